"""What went into a study, as it stands in results.json and in the report."""
