"""A whole study, from its file to its folder."""
