"""What generation and fit found, as parts of `results.json`, tables and pictures."""
