"""Couplings, form factors, amplitudes, rates and decay chains."""
