"""Poisson numbers from numbered uniform draws, exact for every mean."""

from __future__ import annotations

import math

import numpy as np
from semitau.core.compiled import kernel
from semitau.core.elementary import exp, log
from semitau.core.streams import uniform

_TWO = np.uint64(2)
_ONE = np.uint64(1)
_HALF_LOG_2_PI = 0.5 * math.log(2.0 * math.pi)
_LOG_FACTORIALS = np.array([math.lgamma(k + 1.0) for k in range(16)])


@kernel
def poisson(mean: float, key: np.uint64, first_draw: np.uint64) -> float:
    """A Poisson number of the given mean, from the draws first_draw, first_draw + 1, ... of an event key.

    Below 10 the distribution is inverted term by term; above, transformed rejection: W. Hörmann, "The transformed
    rejection method for generating Poisson random variables", Insurance: Mathematics and Economics 12 (1993) 39.
    """
    if not mean > 0.0:
        return 0.0
    if mean < 10.0:
        return float(_inverted(mean, uniform(key, first_draw)))
    b = 0.931 + 2.53 * np.sqrt(mean)
    a = -0.059 + 0.02483 * b
    inverse_alpha = 1.1239 + 1.1328 / (b - 3.4)
    inside = 0.9277 - 3.6224 / (b - 2.0)
    draw = first_draw
    while True:
        u = uniform(key, draw) - 0.5
        v = uniform(key, draw + _ONE)
        draw += _TWO
        us = 0.5 - abs(u)
        if us <= 0.0:
            continue
        k = np.floor((2.0 * a / us + b) * u + mean + 0.43)
        if us >= 0.07 and v <= inside:
            return float(k)
        if k < 0.0 or (us < 0.013 and v > us):
            continue
        if v <= 0.0 or log(v * inverse_alpha / (a / (us * us) + b)) <= k * log(mean) - mean - log_factorial(k):
            return float(k)


@kernel
def _inverted(mean: float, u: float) -> float:
    k = 0.0
    term = exp(-mean)
    total = term
    while u >= total and k < 200.0:  # the tail beyond is far below the spacing of u
        k += 1.0
        term *= mean / k
        total += term
    return k


@kernel
def log_factorial(k: float) -> float:
    """ln k! for a whole number k >= 0, by table and Stirling's series; relative error below 1e-13."""
    if k < 16.0:
        return float(_LOG_FACTORIALS[int(k)])
    inverse = 1.0 / k
    square = inverse * inverse
    series = inverse * (1.0 / 12.0 - square * (1.0 / 360.0 - square * (1.0 / 1260.0 - square / 1680.0)))
    return float((k + 0.5) * log(k) - k + _HALF_LOG_2_PI + series)
