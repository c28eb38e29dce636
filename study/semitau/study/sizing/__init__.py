"""How many events a study should generate, and of what."""
