"""Detector response and reconstruction, on blocks of events."""
