"""From events to templates: selection, filling, variations, pseudo-data, event files."""
