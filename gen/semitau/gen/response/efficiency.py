"""Efficiencies against momentum: straight lines between points, constant outside, evaluated without look-ups.

A piecewise linear function is a constant plus one hinge max(0, p - knot) per knot: plain arithmetic, which the compiler
vectorises, where a search for the interval would branch on every event.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel

Floats = npt.NDArray[np.float64]


class Efficiency(NamedTuple):
    """Value below the first knot, knots in GeV (n,) and the change of slope in 1/GeV at each (n,)."""

    first: float
    knots: Floats
    bends: Floats


def piecewise_linear(momentum: Sequence[float], value: Sequence[float]) -> Efficiency:
    """The function through the points (momentum in GeV, increasing; value), constant beyond the first and the last."""
    knots = np.asarray(momentum, dtype=np.float64)
    values = np.asarray(value, dtype=np.float64)
    slopes = np.concatenate([[0.0], np.diff(values) / np.diff(knots), [0.0]])
    return Efficiency(float(values[0]), knots, np.diff(slopes))


def constant(value: float) -> Efficiency:
    """The same efficiency at every momentum."""
    return Efficiency(float(value), np.zeros(1), np.zeros(1))


def scaled(efficiency: Efficiency, factor: float) -> Efficiency:
    """The function times a factor."""
    return Efficiency(efficiency.first * factor, efficiency.knots, efficiency.bends * factor)


@kernel
def evaluate(efficiency: Efficiency, momentum: Floats, out: Floats) -> None:
    """Fill out (n,) with the efficiency at momentum (n,)."""
    n = out.shape[0]
    for i in range(n):
        out[i] = efficiency.first
    for k in range(efficiency.knots.shape[0]):
        knot = efficiency.knots[k]
        bend = efficiency.bends[k]
        for i in range(n):
            above = momentum[i] - knot
            out[i] += bend * (above if above > 0.0 else 0.0)
