"""Tables of the report, one file a page."""
