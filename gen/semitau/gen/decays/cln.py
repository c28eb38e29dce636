"""Dispersive parametrisation with one slope and heavy-quark ratios: Nucl. Phys. B 530 (1998) 153 (CLN)."""

from __future__ import annotations

from collections.abc import Mapping

import numpy as np

from ..truth.kinematics import Floats, conformal_of_recoil, recoil
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors, longitudinal


def pseudoscalar(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats
) -> PseudoscalarFormFactors:
    """B -> D from `rho2` and `V1(1)`; the scalar form factor as in Phys. Rev. D 82 (2010) 034027."""
    ratio = charm_mass / parent_mass
    step = recoil(parent_mass, charm_mass, q2)
    z = conformal_of_recoil(step)
    slope = parameters["rho2"]
    V1 = parameters["V1(1)"] * (1.0 - z * (8.0 * slope - z * (51.0 * slope - 10.0 - z * (252.0 * slope - 84.0))))
    S1 = V1 * (1.0 - 0.019 + step * (0.041 - 0.015 * step))
    return PseudoscalarFormFactors(
        f_plus=V1 * (1.0 + ratio) / (2.0 * np.sqrt(ratio)),
        f_zero=S1 * np.sqrt(ratio) * (step + 2.0) / (1.0 + ratio),
    )


def vector(parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats) -> VectorFormFactors:
    """B -> D* from `h(1)`, `rho2`, `R1(1)`, `R2(1)`, `R0(1)`; R0 as in Phys. Rev. D 85 (2012) 094025."""
    ratio = charm_mass / parent_mass
    step = recoil(parent_mass, charm_mass, q2)
    z = conformal_of_recoil(step)
    slope = parameters["rho2"]
    h = parameters["h(1)"] * (1.0 - z * (8.0 * slope - z * (53.0 * slope - 15.0 - z * (231.0 * slope - 91.0))))
    R1 = parameters["R1(1)"] - step * (0.12 - 0.05 * step)
    R2 = parameters["R2(1)"] + step * (0.11 - 0.06 * step)
    R0 = parameters["R0(1)"] - step * (0.11 - 0.01 * step)
    common = 2.0 * np.sqrt(ratio) / (1.0 + ratio)
    A1 = common * (step + 2.0) * h / 2.0
    return VectorFormFactors(
        V=R1 * h / common,
        A0=R0 * h / common,
        A1=A1,
        F1=longitudinal(parent_mass, charm_mass, q2, A1, R2 * h / common),
    )
