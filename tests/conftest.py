"""Set before any test module is imported."""

from __future__ import annotations

import os
import signal
from pathlib import Path

# Two processes that compile one function at the same moment can spoil each other's entry in numba's cache on disk, so
# each process of a parallel run keeps a cache of its own.
if worker := os.environ.get("PYTEST_XDIST_WORKER"):
    os.environ["NUMBA_CACHE_DIR"] = str(Path(__file__).parents[1] / ".numba_cache" / worker)

# A shell starts what runs in the background with interrupts ignored, which children inherit; tests send interrupts.
if signal.getsignal(signal.SIGINT) is signal.SIG_IGN:
    signal.signal(signal.SIGINT, signal.default_int_handler)
