"""How templates follow a nuisance, and how a bin's expectation is kept positive: smooth, with exact derivatives.

A template with values n (nominal), p (plus, at θ = 1) and m (minus, at θ = -1) becomes

    n + odd θ + even bend(θ),    odd = (p - m)/2,    even = (p + m)/2 - n,

where bend(θ) = |θ| outside |θ| <= 1, and inside it is the even polynomial that goes through the nominal and joins with
the same value, slope and curvature: the three conditions at |θ| = 1 fix θ²(15 - 10θ² + 3θ⁴)/8. So the template passes
through its three inputs, is a straight line outside (through the nominal and the side's template), and is twice
continuously differentiable. The morphing of histograms bin by bin is that of J. S. Conway, arXiv:1103.0354, which has a
parabola in the place of the polynomial.

Shifts of several nuisances add (they do not multiply): plus and minus are other weights of the same events, so their
differences are meaningful bin by bin, empty bins need no exception, and the expectation is a linear combination of
fixed arrays. What is left out is the product of two small shifts.

The sum can turn negative when a yield is fitted negative or a nuisance runs far out. A bin's sum ν therefore passes
through `positive`: unchanged down to a floor of FLOOR times the reference expectation, below it a rational function
that joins C² and stays above zero, so that the likelihood is defined and smooth everywhere.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.compiled import inlined
from semitau.core.templates import Floats

FLOOR = 0.01
"""Part of a bin's reference expectation below which the protection sets in."""


@inlined
def bend(theta: float) -> tuple[float, float, float]:
    """The even part of the interpolation at θ: value, first and second derivative."""
    if theta >= 1.0:
        return theta, 1.0, 0.0
    if theta <= -1.0:
        return -theta, -1.0, 0.0
    t = theta * theta
    return (
        0.125 * t * (15.0 + t * (3.0 * t - 10.0)),
        0.25 * theta * (15.0 + t * (9.0 * t - 20.0)),
        3.75 * (1.0 - t) * (1.0 - 3.0 * t),
    )


@inlined
def positive(nu: float, floor: float) -> tuple[float, float, float]:
    """Expected events from the plain sum ν: (μ, dμ/dν, d²μ/dν²); μ = ν for ν >= floor, 0 < μ < floor below."""
    y = 1.0 - nu / floor
    q = 1.0 / (1.0 + y + y * y)
    inside = nu < floor  # selects, not branches: this runs over vectors of lanes
    value = floor * q if inside else nu
    slope = (1.0 + 2.0 * y) * q * q if inside else 1.0
    curvature = 6.0 * y * (1.0 + y) * q * q * q / floor if inside else 0.0
    return value, slope, curvature


def interpolate(nominal: ArrayLike, plus: ArrayLike, minus: ArrayLike, theta: float) -> tuple[Floats, Floats, Floats]:
    """A template at a value of one nuisance: contents, first and second derivative with respect to it.

    nominal, plus, minus : arrays of one shape, expected events at θ = 0, 1, -1.
    theta : the nuisance in standard deviations.
    """
    centre, up, down = (np.asarray(side, dtype=np.float64) for side in (nominal, plus, minus))
    odd, even = 0.5 * (up - down), 0.5 * (up + down) - centre
    value, slope, curvature = bend(float(theta))
    return centre + odd * theta + even * value, odd + even * slope, even * curvature
