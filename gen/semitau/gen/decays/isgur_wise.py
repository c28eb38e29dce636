"""Form factors of B -> D** from universal functions: leading order and order 1/m, Phys. Rev. D 57 (1998) 308.

For a spin-1 state v, v' are the four-velocities, e the polarisation and
<V_mu>/sqrt(Mm) = f1 e*_mu + (f2 v_mu + f3 v'_mu)(e*.v),  <A_mu>/sqrt(Mm) = i f_A epsilon_{mu e* v v'}
(V and A change places for D2*, whose polarisation tensor contracted with v stands for e). For D0*,
<A_mu>/sqrt(Mm) = g_plus (v + v')_mu + g_minus (v - v')_mu.

Order 1/m ("Isgur-Wise-1/m"): corrections of the currents, with the subleading functions tau_1, tau_2, zeta_1 in a fixed
ratio (GeV) to the leading ones. Corrections of the Lagrangian are left out: the kinetic ones change the leading
functions alike and are part of them, the chromomagnetic ones are small (Phys. Rev. D 95 (2017) 014022).
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from ..truth.kinematics import Floats, recoil
from .orbital_states import CharmState

GROUND_ENERGY, NARROW_ENERGY, BROAD_ENERGY = 0.40, 0.80, 0.76
"""Energy of the light degrees of freedom in D(*), in the narrow and the broad doublet, GeV (Phys. Rev. D 95 (2017)
014022, from memory)."""

BOTTOM, CHARM = 4.71, 1.31
"""Quark masses of the expansion in the 1S scheme, GeV (same source, from memory)."""

EPSILON_B, EPSILON_C = 0.5 / BOTTOM, 0.5 / CHARM


class OrbitalFormFactors(NamedTuple):
    """f1, f2, f3, f_A of spin 1 and 2; for spin 0 f1 = 0, f2 = g_plus + g_minus, f3 = g_plus - g_minus, f_A = 0: the
    current is f2 v + f3 v'. Each of the shape of w."""

    f1: Floats
    f2: Floats
    f3: Floats
    f_A: Floats


def narrow_doublet(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float | Floats, q2: Floats
) -> Floats:
    """tau(w) of the states D1(2420), D2*(2460): linear in w - 1, from `tau(1)` and `tau_slope`."""
    return parameters["tau(1)"] * (1.0 + parameters["tau_slope"] * recoil(parent_mass, charm_mass, q2))


def broad_doublet(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float | Floats, q2: Floats
) -> Floats:
    """zeta(w) of the states D0*(2300), D1'(2430): linear in w - 1, from `zeta(1)` and `zeta_slope`."""
    return parameters["zeta(1)"] * (1.0 + parameters["zeta_slope"] * recoil(parent_mass, charm_mass, q2))


def continuum(parameters: Mapping[str, float], parent_mass: float, charm_mass: float | Floats, q2: Floats) -> Floats:
    """The same for a system of a D(*) and light mesons, over its value at w = 1; `continuum_slope`, or -1.5."""
    return 1.0 + parameters.get("continuum_slope", -1.5) * recoil(parent_mass, charm_mass, q2)


def form_factors_over_function(state: CharmState, parameters: Mapping[str, float], step: Floats) -> OrbitalFormFactors:
    """Form factors over the leading function. step : w - 1. With 1/m terms if the parameters have them."""
    if state.continuum:
        return _leading(state, step)
    leading = _leading(state, step)
    if state.narrow and "tau1_hat" in parameters:
        t1, t2 = parameters["tau1_hat"], parameters["tau2_hat"]
        added = (_axial_narrow if state.spin == 1 else _tensor)(step, t1, t2)
    elif not state.narrow and "zeta1_hat" in parameters:
        added = (_scalar if state.spin == 0 else _axial_broad)(step, parameters["zeta1_hat"])
    else:
        return leading
    return OrbitalFormFactors(*(a + b for a, b in zip(leading, added, strict=True)))


def _leading(state: CharmState, step: Floats) -> OrbitalFormFactors:
    w, one, none = step + 1.0, np.ones(step.shape), np.zeros(step.shape)
    if state.spin == 2:
        return OrbitalFormFactors(-(1.0 + w), none, one, -one)
    if state.narrow:
        norm = 1.0 / np.sqrt(6.0)
        return OrbitalFormFactors(-norm * step * (w + 1.0), -3.0 * norm * one, norm * (w - 2.0), -norm * (w + 1.0))
    if state.parity < 0:  # those of D and D*
        return OrbitalFormFactors(w + 1.0, none, -one, one) if state.spin else OrbitalFormFactors(none, one, one, none)
    return OrbitalFormFactors(step, none, -one, one) if state.spin else OrbitalFormFactors(none, one, -one, none)


def _narrow_bottom(w: Floats, t1: float, t2: float) -> Floats:
    """What multiplies 1/(2 m_b) in all form factors of the narrow doublet."""
    return (NARROW_ENERGY + GROUND_ENERGY) - (2.0 * w + 1.0) * t1 - t2


def _axial_narrow(step: Floats, t1: float, t2: float) -> OrbitalFormFactors:
    """1/m terms of D1(2420); t1, t2: tau_1, tau_2 over tau, GeV."""
    w, norm = step + 1.0, 1.0 / np.sqrt(6.0)
    bottom = EPSILON_B * _narrow_bottom(w, t1, t2)
    charm = 4.0 * (w * NARROW_ENERGY - GROUND_ENERGY)
    square = step * (w + 1.0)
    return OrbitalFormFactors(
        norm * (-square * bottom - EPSILON_C * ((w + 1.0) * charm - 3.0 * square * (t1 - t2))),
        norm * (-3.0 * bottom - EPSILON_C * ((4.0 * w - 1.0) * t1 + 5.0 * t2)),
        norm * ((2.0 + w) * bottom + EPSILON_C * (charm + (2.0 + w) * t1 + (2.0 + 3.0 * w) * t2)),
        norm * (-step * bottom - EPSILON_C * (charm - 3.0 * step * (t1 - t2))),
    )


def _tensor(step: Floats, t1: float, t2: float) -> OrbitalFormFactors:
    """1/m terms of D2*(2460): k_A1, k_A2, k_A3, k_V."""
    w = step + 1.0
    bottom = EPSILON_B * _narrow_bottom(w, t1, t2)
    return OrbitalFormFactors(
        -step * bottom - EPSILON_C * step * (t1 - t2),
        np.full(step.shape, -2.0 * EPSILON_C * t1),
        bottom - EPSILON_C * (t1 + t2),
        -bottom - EPSILON_C * (t1 - t2),
    )


def _broad_bottom(w: Floats, z1: float) -> Floats:
    """What multiplies -1/(2 m_b) in the broad doublet; z1: zeta_1 over zeta, GeV."""
    return (BROAD_ENERGY * (2.0 * w + 1.0) - GROUND_ENERGY * (w + 2.0)) / (w + 1.0) - 2.0 * (w - 1.0) * z1


def _broad_charm(w: Floats) -> Floats:
    return (w * BROAD_ENERGY - GROUND_ENERGY) / (w + 1.0)


def _scalar(step: Floats, z1: float) -> OrbitalFormFactors:
    """1/m terms of D0*(2300): only g_plus has any."""
    w = step + 1.0
    plus = EPSILON_C * (2.0 * step * z1 - 3.0 * _broad_charm(w)) - EPSILON_B * _broad_bottom(w, z1)
    none = np.zeros(step.shape)
    return OrbitalFormFactors(none, plus, plus, none)


def _axial_broad(step: Floats, z1: float) -> OrbitalFormFactors:
    """1/m terms of D1'(2430): g_V1, g_V2, g_V3, g_A."""
    w = step + 1.0
    charm, bottom = EPSILON_C * _broad_charm(w), EPSILON_B * _broad_bottom(w, z1)
    return OrbitalFormFactors(
        (w + 1.0) * (charm - bottom),
        np.full(step.shape, 2.0 * EPSILON_C * z1),
        -charm - 2.0 * EPSILON_C * z1 + bottom,
        charm - bottom,
    )
