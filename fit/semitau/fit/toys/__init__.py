"""Pseudo-experiments: what they say of bias, coverage, linearity and intervals."""
