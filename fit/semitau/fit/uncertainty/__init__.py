"""Where the uncertainty of a ratio comes from, its intervals, the quality of a fit, and what more data would bring."""
