"""Expansion in the conformal variable with the threshold behaviour built in: Phys. Rev. D 79 (2009) 013008 (BCL)."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from ..truth.kinematics import Floats, conformal
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors

TERMS = 3

# Masses of the lowest B_c states below threshold, GeV: the poles of B -> D*.
POLE_VECTOR, POLE_AXIAL, POLE_PSEUDOSCALAR = 6.329, 6.739, 6.275


def pseudoscalar(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats
) -> PseudoscalarFormFactors:
    """B -> D from `a0`, `a1`, `a2` (vector) and `b0`, `b1` (scalar), without pole factors.

    The last scalar coefficient follows from f_plus(0) = f_zero(0). The masses are those of the decay at hand: between
    charged and neutral modes the coefficients stay and z moves with the masses.
    """
    z, z_origin = (_conformal(parent_mass, charm_mass, at) for at in (q2, np.zeros(1)))
    vector = np.array([parameters[f"a{n}"] for n in range(TERMS)])
    scalar = np.array([parameters["b0"], parameters["b1"]])
    last = (_vector(vector, z_origin) - _power_series(scalar, z_origin)) / z_origin**2
    return PseudoscalarFormFactors(f_plus=_vector(vector, z), f_zero=_power_series(np.append(scalar, last), z))


def vector(parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats) -> VectorFormFactors:
    """B -> D* from `V_n`, `A0_n`, `A1_n` and `A12_2`, each form factor with its lowest pole.

    A12 = F1/(8 M m) (JHEP 09 (2013) 119) has three terms as well; two follow from A0(0) = A3(0), which is
    F1(0) = (M2-m2) A0(0), and from F1 = (M2-m2) A1 at zero recoil.
    """
    M, m = parent_mass, charm_mass
    ends = np.array([0.0, (M - m) ** 2])
    z, z_ends = _conformal(M, m, q2), _conformal(M, m, ends)

    def series(stem: str, pole: float, at: Floats, z_at: Floats) -> Floats:
        coefficients = np.array([parameters[f"{stem}_{n}"] for n in range(TERMS)])
        return _power_series(coefficients, z_at) / (1.0 - at / pole**2)

    curvature = parameters["A12_2"]
    A0, A1 = (
        series("A0", POLE_PSEUDOSCALAR, ends, z_ends)[0],
        series("A1", POLE_AXIAL, ends, z_ends)[1],
    )
    fixed = (M * M - m * m) * np.array([A0, A1]) / (8.0 * M * m) * (1.0 - ends / POLE_AXIAL**2)
    fixed = fixed - curvature * z_ends**2
    slope = (fixed[1] - fixed[0]) / (z_ends[1] - z_ends[0])
    A12 = np.array([fixed[0] - slope * z_ends[0], slope, curvature])
    return VectorFormFactors(
        V=series("V", POLE_VECTOR, q2, z),
        A0=series("A0", POLE_PSEUDOSCALAR, q2, z),
        A1=series("A1", POLE_AXIAL, q2, z),
        F1=8.0 * M * m * _power_series(A12, z) / (1.0 - q2 / POLE_AXIAL**2),
    )


def _conformal(parent_mass: float, charm_mass: float, q2: Floats) -> Floats:
    """z around the point that makes it smallest over the physical range."""
    t_zero = (parent_mass + charm_mass) * (np.sqrt(parent_mass) - np.sqrt(charm_mass)) ** 2
    return conformal(parent_mass, charm_mass, q2, t_zero)


def _vector(coefficients: Floats, z: Floats) -> Floats:
    """Series whose last power is tied to the others by angular momentum conservation at threshold."""
    tail = sum((-1.0) ** (n - TERMS) * n / TERMS * a for n, a in enumerate(coefficients))
    series: Floats = _power_series(coefficients, z) - tail * z**TERMS
    return series


def _power_series(coefficients: Floats, z: Floats) -> Floats:
    return np.asarray(np.polynomial.polynomial.polyval(z, coefficients), dtype=np.float64)
