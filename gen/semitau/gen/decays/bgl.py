"""Unitarity-bounded expansion with outer functions and Blaschke factors: Phys. Rev. D 56 (1997) 6895 (BGL).

F(z) = sum a_n z^n / (P(z) phi(z)), expanded around zero recoil (t0 = t-). The functions f, g, F1, F2 are those of the
amplitudes, so nothing is divided by lambda.

Some poles lie so close to threshold that the same coefficients with the masses of the other charge would change rates
by 3%. Coefficients therefore go with the masses of B0 -> D(*)-, and the other charge has the same heavy-quark form
factors at the same w.
"""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np
from semitau.core.constants import MASS

from ..truth.kinematics import Floats, conformal, conformal_of_recoil, recoil
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors

SPECTATORS = 2.6
"""Effective number of light flavours in the bounds."""

# Perturbative susceptibilities of the currents: GeV^-2 for the transverse ones, no unit for the others.
CHI_VECTOR = 5.131e-4
CHI_AXIAL = 3.894e-4
CHI_PSEUDOSCALAR = 19.421e-3

# Masses of the B_c states below the B D* threshold, GeV.
POLES_VECTOR = (6.329, 6.920, 7.020)
POLES_AXIAL = (6.739, 6.750, 7.145, 7.150)
POLES_PSEUDOSCALAR = (6.275, 6.842, 7.250)


def pseudoscalar(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats
) -> PseudoscalarFormFactors:
    """B -> D from `plus_0` ... and `zero_0` ...; no poles, outer functions as in Phys. Rev. D 92 (2015) 034506."""
    M, m = MASS["B0"], MASS["D+"]
    z = conformal_of_recoil(recoil(parent_mass, charm_mass, q2))
    spread = _spread(m / M, z)
    plus = 1.1213 * (1.0 + z) ** 2 * np.sqrt(1.0 - z) * spread**-5.0
    zero = 0.5299 * (1.0 + z) * (1.0 - z) ** 1.5 * spread**-4.0
    isospin = _scale(parent_mass, charm_mass) / _scale(M, m)
    return PseudoscalarFormFactors(
        f_plus=isospin * _series(parameters, "plus", z) / plus, f_zero=_series(parameters, "zero", z) / zero / isospin
    )


def vector(parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats) -> VectorFormFactors:
    """B -> D* from `g_n`, `f_n`, `F1_n` (n > 0; F1_0 follows from F1 = (M - m) f at zero recoil) and `F2_n`."""
    M, m = MASS["B0"], MASS["D*+"]
    r = m / M
    z = conformal_of_recoil(recoil(parent_mass, charm_mass, q2))
    spread, root = _spread(r, z), np.sqrt(SPECTATORS / np.pi)
    phi_f = 4.0 * r / M**2 * root / np.sqrt(3.0 * CHI_AXIAL) * (1.0 + z) * (1.0 - z) ** 1.5 * spread**-4.0
    phi_F1 = 4.0 * r / M**3 * root / np.sqrt(6.0 * CHI_AXIAL) * (1.0 + z) * (1.0 - z) ** 2.5 * spread**-5.0
    odd = (1.0 + z) ** 2 / np.sqrt(1.0 - z) * spread**-4.0
    phi_g = 16.0 * r**2 * root / np.sqrt(3.0 * CHI_VECTOR) * odd
    phi_F2 = 8.0 * np.sqrt(2.0) * r**2 * root / np.sqrt(CHI_PSEUDOSCALAR) * odd
    first = first_longitudinal(parameters)
    axial = _poles(POLES_AXIAL, M, m, z)
    f = _series(parameters, "f", z) / (axial * phi_f)
    g = _series(parameters, "g", z) / (_poles(POLES_VECTOR, M, m, z) * phi_g)
    F1 = _series({**parameters, "F1_0": first}, "F1", z) / (axial * phi_F1)
    F2 = _series(parameters, "F2", z) / (_poles(POLES_PSEUDOSCALAR, M, m, z) * phi_F2)
    isospin = _scale(parent_mass, charm_mass) / _scale(M, m)
    size = (parent_mass - charm_mass) * np.sqrt(parent_mass * charm_mass) / ((M - m) * np.sqrt(M * m))
    return VectorFormFactors(
        V=isospin * 0.5 * (M + m) * g, A0=isospin * 0.5 * F2, A1=f / (M + m) / isospin, F1=size * F1
    )


def first_longitudinal(parameters: Mapping[str, float]) -> float:
    """F1_0, which follows from F1 = (M - m) f at zero recoil."""
    r = MASS["D*+"] / MASS["B0"]
    return float(parameters["f_0"] * (1.0 - r) / (np.sqrt(2.0) * (1.0 + np.sqrt(r)) ** 2))


def _scale(parent_mass: float, charm_mass: float) -> float:
    """Ratio of V, A0, f_plus (inversely A1, f_zero) to the heavy-quark form factors, up to a number."""
    return float((parent_mass + charm_mass) / np.sqrt(parent_mass * charm_mass))


def _spread(r: float, z: Floats) -> Floats:
    spread: Floats = (1.0 + r) * (1.0 - z) + 2.0 * np.sqrt(r) * (1.0 + z)
    return spread


def _series(parameters: Mapping[str, float], stem: str, z: Floats) -> Floats:
    coefficients: list[float] = []
    while (name := f"{stem}_{len(coefficients)}") in parameters:
        coefficients.append(parameters[name])
    return np.asarray(np.polynomial.polynomial.polyval(z, coefficients), dtype=np.float64)


def _poles(poles: tuple[float, ...], parent_mass: float, charm_mass: float, z: Floats) -> Floats:
    """Blaschke factors, taken positive in the physical range."""
    product: Floats = np.ones_like(z)
    start = (parent_mass - charm_mass) ** 2
    for pole in poles:
        at = conformal(parent_mass, charm_mass, np.array(pole**2), start)
        product = product * np.abs((z - at) / (1.0 - z * at))
    return product
