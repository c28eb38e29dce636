"""`semitau average`: from a file of measurements to their average."""
