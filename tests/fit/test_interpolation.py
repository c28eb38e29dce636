"""Interpolation and protection against their defining conditions and against derivatives in high precision."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from semitau.fit.likelihood.interpolation import bend, interpolate, positive

from .reference import polynomial

INPUTS = np.array([10.0, 3.0, 0.0]), np.array([12.0, 2.0, 1.5]), np.array([9.0, 2.5, 0.5])
"""nominal, plus, minus: both-sided, one-sided, and a bin that only the variations fill"""


def test_passes_through_its_inputs_and_is_straight_outside() -> None:
    nominal, plus, minus = INPUTS
    for theta, expected in ((0.0, nominal), (1.0, plus), (-1.0, minus)):
        np.testing.assert_allclose(interpolate(*INPUTS, theta)[0], expected, rtol=1e-15)
    for theta, side in ((2.5, plus), (-3.0, minus)):
        np.testing.assert_allclose(interpolate(*INPUTS, theta)[0], nominal + abs(theta) * (side - nominal), rtol=1e-14)


@given(st.floats(-1, 1))
def test_is_the_polynomial_of_its_seven_conditions(theta: float) -> None:
    """The coefficients come from linear algebra in reference.py, not from the formula."""
    value, slope, curvature = interpolate(*INPUTS, theta)
    for i in range(3):
        curve = np.polynomial.Polynomial(polynomial(*(side[i] for side in INPUTS)))
        assert value[i] == pytest.approx(curve(theta), abs=1e-12)
        assert slope[i] == pytest.approx(curve.deriv()(theta), abs=1e-11)
        assert curvature[i] == pytest.approx(curve.deriv(2)(theta), abs=1e-10)


@pytest.mark.parametrize("theta", [-1.0, 1.0])
def test_joins_with_value_slope_and_curvature(theta: float) -> None:
    inside, outside = bend(theta * (1 - 1e-13)), bend(theta * (1 + 1e-13))
    assert inside == pytest.approx(outside, abs=1e-11)


def protected(nu: mpmath.mpf) -> mpmath.mpf:
    y = 1 - nu / mpmath.mpf("0.4")
    return nu if nu >= mpmath.mpf("0.4") else mpmath.mpf("0.4") / (1 + y + y * y)


@pytest.mark.parametrize("nu", [-50.0, -1.0, 0.0, 0.1, 0.39, 0.5, 30.0])
def test_protection_has_exact_derivatives(nu: float) -> None:
    """Derivatives by mpmath at 40 digits."""
    with mpmath.workdps(40):
        wanted = [float(mpmath.diff(protected, mpmath.mpf(nu), order)) for order in (0, 1, 2)]
    assert positive(nu, 0.4) == pytest.approx(wanted, rel=1e-12, abs=1e-14)


def test_protection_joins_smoothly_and_stays_positive() -> None:
    below, above = positive(0.4 * (1 - 1e-12), 0.4), positive(0.4 * (1 + 1e-12), 0.4)
    assert below == pytest.approx(above, abs=1e-10)
    values = [positive(nu, 0.4)[0] for nu in np.linspace(-1e3, 1, 20001)]
    assert min(values) > 0
    assert np.all(np.diff(values) > 0)
