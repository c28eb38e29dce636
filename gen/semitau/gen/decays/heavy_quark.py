"""Heavy-quark expansion of B -> D and B -> D* to order 1/m and alpha_s: one leading function, three subleading ones.

h_i(w) = xi(w) [heavy-quark limit + alpha_s/pi C_i + Lambda/(2 m_c) (...) + Lambda/(2 m_b) (...)], Phys. Rev. D 47
(1993) 2965 and Phys. Rept. 245 (1994) 259, with the subleading Isgur-Wise functions chi_2, chi_3, eta over xi; chi_1 is
part of xi. Luke's theorem is chi_3(1) = 0, which is built in. D and D* share every parameter but their normalisations.

xi(w) follows from the B -> D form factor V1 = h_+ - (1-r)/(1+r) h_-, which has the shape with one slope of
Nucl. Phys. B 530 (1998) 153. Order 1/m^2 is kept at zero recoil only, as the factors V1(1) and h(1).
Tensor form factors come out at the same order (`tensor="HQE"`).

Parameters: rho2 (slope of V1), chi2(1), chi2_slope, chi3_slope, eta(1), eta_slope, m_b (1S mass, GeV), m_b-m_c (GeV),
V1(1), h(1).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from semitau.core.constants import MASS

from ..truth.kinematics import Floats, conformal_of_recoil, recoil
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors, longitudinal
from .heavy_quark_matching import matching

ALPHA_S = 0.26
"""Strong coupling at mu^2 = m_b m_c."""

SPIN_AVERAGED_MESON = 5.313
"""(3 m_B* + m_B)/4 in GeV."""

KINETIC_TERM = -0.30
"""lambda_1 in GeV2: m_B = m_b + Lambda - lambda_1/(2 m_b)."""


@dataclass(frozen=True)
class Subleading:
    """What breaks the symmetry at order 1/m, over xi: functions of w (arrays), and Lambda/(2 m) of both quarks.

    L1 ... L6 as in Phys. Rept. 245 (1994) 259; L1 and L2 are 0 at zero recoil (Luke's theorem).
    """

    L1: Floats
    L2: Floats
    L3: Floats
    L4: Floats
    L5: Floats
    L6: Floats
    charm: float
    bottom: float
    z: float


@dataclass(frozen=True)
class HeavyQuarkFormFactors:
    """h_i(w)/xi(w), arrays of the shape of w. D: plus, minus, T. D*: V, A1, A2, A3, T1, T2, T3.

    Tensor: <D*|c sigma^mn b|B> = -sqrt(Mm) eps^mnrs [T1 e*_r (v+v')_s + T2 e*_r (v-v')_s + T3 (e*.v)(v+v')_r (v-v')_s].
    """

    plus: Floats
    minus: Floats
    T: Floats
    V: Floats
    A1: Floats
    A2: Floats
    A3: Floats
    T1: Floats
    T2: Floats
    T3: Floats


def subleading(parameters: Mapping[str, float], step: Floats) -> Subleading:
    """At w = 1 + step."""
    bottom_mass = parameters["m_b"]
    charm_mass = bottom_mass - parameters["m_b-m_c"]
    binding = SPIN_AVERAGED_MESON - bottom_mass + KINETIC_TERM / (2.0 * bottom_mass)
    chi2 = parameters["chi2(1)"] + parameters["chi2_slope"] * step
    chi3 = parameters["chi3_slope"] * step
    eta = parameters["eta(1)"] + parameters["eta_slope"] * step
    return Subleading(
        L1=-4.0 * step * chi2 + 12.0 * chi3,
        L2=-4.0 * chi3,
        L3=4.0 * chi2,
        L4=2.0 * eta - 1.0,
        L5=-np.ones_like(step),
        L6=-2.0 * (1.0 + eta) / (step + 2.0),
        charm=binding / (2.0 * charm_mass),
        bottom=binding / (2.0 * bottom_mass),
        z=charm_mass / bottom_mass,
    )


def over_leading(parts: Subleading, step: Floats, coupling: float = ALPHA_S) -> HeavyQuarkFormFactors:
    """All h_i/xi; coupling : alpha_s, 0 leaves the gluons out."""
    L, c, b = parts, parts.charm, parts.bottom
    a, C = coupling / np.pi, matching(step, parts.z)
    w = 1.0 + step
    turn = step / (w + 1.0)
    return HeavyQuarkFormFactors(
        plus=1.0 + a * (C.V1 + 0.5 * (w + 1.0) * (C.V2 + C.V3)) + (c + b) * L.L1,
        minus=a * 0.5 * (w + 1.0) * (C.V2 - C.V3) + (c - b) * L.L4,
        T=1.0 + a * (C.T1 - C.T2 + C.T3) + (c + b) * (L.L1 - L.L4),
        V=1.0 + a * C.V1 + c * (L.L2 - L.L5) + b * (L.L1 - L.L4),
        A1=1.0 + a * C.A1 + c * (L.L2 - L.L5 * turn) + b * (L.L1 - L.L4 * turn),
        A2=a * C.A2 + c * (L.L3 + L.L6),
        A3=1.0 + a * (C.A1 + C.A3) + c * (L.L2 - L.L3 + L.L6 - L.L5) + b * (L.L1 - L.L4),
        T1=1.0 + a * (C.T1 + 0.5 * step * (C.T2 - C.T3)) + c * L.L2 + b * L.L1,
        T2=a * 0.5 * (w + 1.0) * (C.T2 + C.T3) + c * L.L5 - b * L.L4,
        T3=a * C.T2 + c * (L.L6 - L.L3),
    )


def pseudoscalar(
    parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats
) -> PseudoscalarFormFactors:
    """B -> D, its tensor form factor with it."""
    r, step = charm_mass / parent_mass, recoil(parent_mass, charm_mass, q2)
    h = over_leading(subleading(parameters, step), step)
    scale = parameters["V1(1)"] * _leading(parameters, step) / _pseudoscalar_sum(parameters, np.zeros(1))
    root = np.sqrt(r)
    return PseudoscalarFormFactors(
        f_plus=scale * ((1.0 + r) * h.plus - (1.0 - r) * h.minus) / (2.0 * root),
        f_zero=scale * root * ((step + 2.0) / (1.0 + r) * h.plus - step / (1.0 - r) * h.minus),
        f_T=scale * (1.0 + r) * h.T / (2.0 * root),
    )


def vector(parameters: Mapping[str, float], parent_mass: float, charm_mass: float, q2: Floats) -> VectorFormFactors:
    """B -> D*, its tensor form factors with it."""
    r, step = charm_mass / parent_mass, recoil(parent_mass, charm_mass, q2)
    h = over_leading(subleading(parameters, step), step)
    origin = over_leading(subleading(parameters, np.zeros(1)), np.zeros(1))
    scale = parameters["h(1)"] * _leading(parameters, step) / origin.A1 / (2.0 * np.sqrt(r))
    A1 = scale * 2.0 * r / (1.0 + r) * (step + 2.0) * h.A1
    A2 = scale * (1.0 + r) * (h.A3 + r * h.A2)
    return VectorFormFactors(
        V=scale * (1.0 + r) * h.V,
        A0=scale * ((step + 2.0) * h.A1 + (r * (1.0 + step) - 1.0) * h.A2 + (r - 1.0 - step) * h.A3),
        A1=A1,
        F1=longitudinal(parent_mass, charm_mass, q2, A1, A2),
        T1=scale * ((1.0 + r) * h.T1 - (1.0 - r) * h.T2),
        T2=scale * 2.0 * r * ((step + 2.0) / (1.0 + r) * h.T1 - step / (1.0 - r) * h.T2),
        T3=scale * ((1.0 - r) * h.T1 - (1.0 + r) * h.T2 + (1.0 - r * r) * h.T3),
    )


def _leading(parameters: Mapping[str, float], step: Floats) -> Floats:
    """xi(w), 1 at zero recoil, from the shape of V1."""
    z, slope = conformal_of_recoil(step), parameters["rho2"]
    shape = 1.0 - z * (8.0 * slope - z * (51.0 * slope - 10.0 - z * (252.0 * slope - 84.0)))
    xi: Floats = shape * _pseudoscalar_sum(parameters, np.zeros(1)) / _pseudoscalar_sum(parameters, step)
    return xi


def _pseudoscalar_sum(parameters: Mapping[str, float], step: Floats) -> Floats:
    """V1/xi with the masses of B0 -> D-, so that xi does not depend on the charge."""
    r = MASS["D+"] / MASS["B0"]
    h = over_leading(subleading(parameters, step), step)
    return h.plus - (1.0 - r) / (1.0 + r) * h.minus
