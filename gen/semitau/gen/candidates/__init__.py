"""Candidates on fine grids, generated once for any number of working points."""
