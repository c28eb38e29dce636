"""Amplitudes and rates at the ends of phase space against textbook formulas at 50 digits.

The reference takes the same doubles for masses and q2 as exact numbers. sqrt(lambda) near zero recoil is then known to
the rounding of (M-m)^2 - q2 and no better, whatever the code: relative 2^-53 (M-m)^2/((M-m)^2 - q2), a few times.
"""

from __future__ import annotations

from typing import Any

import mpmath
import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import BOTTOM_POLE_MASS, CHARM_POLE_MASS
from semitau.gen.decays.amplitudes import helicity_amplitudes
from semitau.gen.decays.rates import differential_rates

EPSILONS = [1e-14, 1e-11, 1e-8, 1e-4, 0.3]
Number = Any


def textbook(decay: gen.Decay, q2: float) -> dict[str, Number]:
    """CLN form factors (Nucl. Phys. B 530 (1998) 153) and amplitudes as they stand in print, with A2 and A3."""
    M, m, q = mpmath.mpf(decay.m_parent), mpmath.mpf(decay.m_charm), mpmath.mpf(q2)
    p = {name: mpmath.mpf(value) for name, value in decay.model.parameters.items()}
    r, w = m / M, (M * M + m * m - q) / (2 * M * m)
    z = (mpmath.sqrt(w + 1) - mpmath.sqrt(2)) / (mpmath.sqrt(w + 1) + mpmath.sqrt(2))
    square = (M * M - m * m - q) ** 2 - 4 * m * m * q
    size, root = mpmath.sqrt(square), mpmath.sqrt(q)
    s = p["rho2"]
    number = mpmath.mpf
    if decay.family == "D":
        V1 = p["V1(1)"] * (1 - 8 * s * z + (51 * s - 10) * z**2 - (252 * s - 84) * z**3)
        S1 = V1 * (1 - number(0.019) + number(0.041) * (w - 1) - number(0.015) * (w - 1) ** 2)
        f_plus, f_zero = V1 * (1 + r) / (2 * mpmath.sqrt(r)), S1 * mpmath.sqrt(r) * (w + 1) / (1 + r)
        f_T = (number(BOTTOM_POLE_MASS) + number(CHARM_POLE_MASS)) * (M + m) * (f_plus - f_zero) / q
        return {
            "J_zero": -size / root * f_plus / 2,
            "J_t": (M * M - m * m) / root * f_zero / 2,
            "T_zero": -2 * size * f_T / (M + m),
        }
    h = p["h(1)"] * (1 - 8 * s * z + (53 * s - 15) * z**2 - (231 * s - 91) * z**3)
    R1 = p["R1(1)"] - number(0.12) * (w - 1) + number(0.05) * (w - 1) ** 2
    R2 = p["R2(1)"] + number(0.11) * (w - 1) - number(0.06) * (w - 1) ** 2
    R0 = p["R0(1)"] - number(0.11) * (w - 1) + number(0.01) * (w - 1) ** 2
    c = 2 * mpmath.sqrt(r) / (1 + r)
    A1, V, A2, A0 = c * (w + 1) * h / 2, R1 * h / c, R2 * h / c, R0 * h / c
    A3 = ((M + m) * A1 - (M - m) * A2) / (2 * m)
    b, k = number(BOTTOM_POLE_MASS), number(CHARM_POLE_MASS)
    T1, T2, T3 = (b + k) * V / (M + m), (b - k) * A1 / (M - m), (b - k) * 2 * m / q * (A0 - A3)
    gap = M * M - m * m
    return {
        "J_plus": ((M + m) * A1 - size * V / (M + m)) / 2,
        "J_minus": ((M + m) * A1 + size * V / (M + m)) / 2,
        "J_zero": ((M * M - m * m - q) * (M + m) * A1 - square * A2 / (M + m)) / (4 * m * root),
        "J_t": -size / root * A0 / 2,
        "T_plus": -2 * (gap * T2 + size * T1) / root,
        "T_minus": -2 * (gap * T2 - size * T1) / root,
        "T_zero": -((M * M + 3 * m * m - q) * T2 - square * T3 / gap) / m,
    }


@pytest.mark.parametrize("charm", ["D-", "D*-"])
@pytest.mark.parametrize("epsilon", EPSILONS)
def test_towards_zero_recoil(charm: str, epsilon: float) -> None:
    decay = gen.Decay("B0", charm, "tau", "CLN-2021", {"T": 1.0}, "EOM")
    q2 = decay.q2_range[1] * (1.0 - epsilon)
    found = helicity_amplitudes(decay, np.array([q2]))
    with mpmath.workdps(50):
        for name, wanted in textbook(decay, q2).items():
            vanishes = (charm == "D-" and name != "J_t") or name == "J_t"
            # Near zero recoil J_+ and J_- also hold sqrt(lambda), which is small there.
            tolerance = 2e-13 + (5e-16 / epsilon if vanishes else 5e-16 / np.sqrt(epsilon))
            assert float(getattr(found, name)[0].real) == pytest.approx(float(wanted), rel=tolerance), name


@pytest.mark.parametrize("charm", ["D-", "D*-"])
@pytest.mark.parametrize("lepton", ["e", "mu", "tau"])
@pytest.mark.parametrize("epsilon", EPSILONS)
def test_towards_the_lepton_mass(charm: str, lepton: str, epsilon: float) -> None:
    """q2 -> m_l^2, where for electrons q2 is 10^-7 GeV2 and the longitudinal amplitudes go with 1/sqrt(q2)."""
    decay = gen.Decay("B0", charm, lepton, "CLN-2021")
    q2 = decay.q2_range[0] * (1.0 + epsilon)
    found = helicity_amplitudes(decay, np.array([q2]))
    with mpmath.workdps(50):
        for name, wanted in textbook(decay, q2).items():
            if name[0] == "J":
                assert float(getattr(found, name)[0].real) == pytest.approx(float(wanted), rel=1e-13), name


@pytest.mark.parametrize("charm", ["D-", "D*-"])
@pytest.mark.parametrize("name", ["BCL", "BGL-2021", "HQE-2021"])
def test_laws_at_the_ends(charm: str, name: str) -> None:
    """Every parametrisation. Zero recoil: d Gamma ~ sqrt(lambda) (timelike part for D, all for D*), and
    J_+ = J_- = J_0 for D*. q2 -> m_l^2: d Gamma ~ (q2 - m_l^2)^2. Textbook phase space."""
    if name == "BCL":
        name = {"D-": "BCL-2021", "D*-": "BCL-2022"}[charm]
    decay = gen.Decay("B0", charm, "tau", name)
    low, high = decay.q2_range
    near = high - np.array([1e-8, 4e-8])
    k = helicity_amplitudes(decay, near)
    rate = differential_rates(decay, near).total
    assert rate[1] / rate[0] == pytest.approx(2.0, rel=1e-3)  # sqrt(4)
    if charm == "D-":
        assert abs(k.J_zero[1] / k.J_zero[0]) == pytest.approx(2.0, rel=1e-6)
    else:
        np.testing.assert_allclose(k.J_zero.real, 0.5 * (k.J_plus + k.J_minus).real, rtol=1e-7)
    start = differential_rates(decay, low + np.array([1e-8, 2e-8])).total
    assert start[1] / start[0] == pytest.approx(4.0, rel=1e-6)
