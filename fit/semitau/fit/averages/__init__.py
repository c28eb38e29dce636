"""Averages of measurements, and how far they lie from a prediction."""
