"""Tasks for workers elsewhere, which find them by their names: this folder is on their path."""

from __future__ import annotations

import os
import signal
import time
from pathlib import Path

import numpy as np
import numpy.typing as npt
from semitau.core.errors import InputError, Problem


def product(common: npt.NDArray[np.float64], number: int) -> npt.NDArray[np.float64]:
    return common * number


def slow(common: float, number: int) -> int:
    time.sleep(common)
    return number


def traced(folder: str, number: int) -> int:
    """Leaves a file for each task that began."""
    (Path(folder) / str(number)).touch()
    time.sleep(0.1)
    return number


def refuse(common: str, number: int) -> int:
    if number == 3:
        raise InputError(Problem("is no number", common, got=str(number), remedy="Take another."))
    return number


def fatal(common: None, number: int) -> int:
    os.kill(os.getpid(), signal.SIGKILL)
    return number


def process(common: None, number: int) -> int:
    time.sleep(0.2)
    return os.getpid()
