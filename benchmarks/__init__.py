"""Speeds, ratios and memory of semitau, measured in one run: `python -m benchmarks`."""

import os

# Before numpy is loaded. Matrices of a fit are small: threads of the linear algebra only get in each other's way.
os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
