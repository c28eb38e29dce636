"""Expansion in the conformal variable with the threshold behaviour built in: Phys. Rev. D 79 (2009) 013008 (BCL)."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from ..truth.kinematics import Floats, conformal
from .form_factor_values import PseudoscalarFormFactors

TERMS = 3


def pseudoscalar(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats
) -> PseudoscalarFormFactors:
    """B -> D from `a0`, `a1`, `a2` (vector) and `b0`, `b1` (scalar), without pole factors.

    The last scalar coefficient follows from f_plus(0) = f_zero(0). The masses are those of the decay at hand: between
    charged and neutral modes the coefficients stay and z moves with the masses.
    """
    t_zero = (parent_mass + charm_mass) * (np.sqrt(parent_mass) - np.sqrt(charm_mass)) ** 2
    z = conformal(parent_mass, charm_mass, q2, t_zero)
    z_origin = conformal(parent_mass, charm_mass, np.zeros(1), t_zero)
    vector = np.array([parameters[f"a{n}"] for n in range(TERMS)])
    scalar = np.array([parameters["b0"], parameters["b1"]])
    last = (_vector(vector, z_origin) - _power_series(scalar, z_origin)) / z_origin**2
    return PseudoscalarFormFactors(f_plus=_vector(vector, z), f_zero=_power_series(np.append(scalar, last), z))


def _vector(coefficients: Floats, z: Floats) -> Floats:
    """Series whose last power is tied to the others by angular momentum conservation at threshold."""
    tail = sum((-1.0) ** (n - TERMS) * n / TERMS * a for n, a in enumerate(coefficients))
    series: Floats = _power_series(coefficients, z) - tail * z**TERMS
    return series


def _power_series(coefficients: Floats, z: Floats) -> Floats:
    return np.asarray(np.polynomial.polynomial.polyval(z, coefficients), dtype=np.float64)
