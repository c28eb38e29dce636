"""Leading-order form factors of B -> D**: two universal functions, Phys. Rev. D 57 (1998) 308."""

from __future__ import annotations

from collections.abc import Mapping

from ..truth.kinematics import Floats, recoil


def narrow_doublet(parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats) -> Floats:
    """tau(w) of the states D1(2420), D2*(2460): linear in w - 1, from `tau(1)` and `tau_slope`."""
    return parameters["tau(1)"] * (1.0 + parameters["tau_slope"] * recoil(parent_mass, charm_mass, q2))


def broad_doublet(parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats) -> Floats:
    """zeta(w) of the states D0*(2300), D1'(2430): linear in w - 1, from `zeta(1)` and `zeta_slope`."""
    return parameters["zeta(1)"] * (1.0 + parameters["zeta_slope"] * recoil(parent_mass, charm_mass, q2))
