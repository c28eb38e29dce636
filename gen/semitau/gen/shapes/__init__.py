"""Backgrounds by shape."""
