"""Kinematics of B -> X_c l nu at fixed q2, stable at zero recoil and at q2 -> 0. Masses in GeV, q2 in GeV2."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


def kallen(parent_mass: float, charm_mass: float | Floats, q2: Floats) -> Floats:
    """(M2 - m2 - q2)^2 - 4 m2 q2 as a product, so that it goes to zero without cancellation; 0 beyond the end point."""
    product = ((parent_mass - charm_mass) ** 2 - q2) * ((parent_mass + charm_mass) ** 2 - q2)
    return np.maximum(product, 0.0)


def recoil(parent_mass: float, charm_mass: float | Floats, q2: Floats) -> Floats:
    """w - 1, with w the product of the four-velocities."""
    return ((parent_mass - charm_mass) ** 2 - q2) / (2.0 * parent_mass * charm_mass)


def conformal_of_recoil(recoil_minus_one: Floats) -> Floats:
    """z(w) = (sqrt(w+1) - sqrt(2)) / (sqrt(w+1) + sqrt(2)), written without cancellation at w = 1."""
    z: Floats = recoil_minus_one / (np.sqrt(recoil_minus_one + 2.0) + np.sqrt(2.0)) ** 2
    return z


def conformal(parent_mass: float, charm_mass: float, q2: Floats, t_zero: float) -> Floats:
    """z(q2, t0) with the branch point at (M + m)^2."""
    threshold = (parent_mass + charm_mass) ** 2
    z: Floats = (t_zero - q2) / (np.sqrt(threshold - q2) + np.sqrt(threshold - t_zero)) ** 2
    return z
