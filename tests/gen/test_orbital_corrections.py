"""Order 1/m of B -> D** against the trace formalism, worked out with explicit Dirac matrices.

Phys. Rev. D 57 (1998) 308, sect. II: c Gamma b -> c (Gamma - i D<- Gamma / 2m_c + i Gamma D / 2m_b) b, with

    c i D<-_l Gamma b = Tr S(c)_sl Fbar^s Gamma H,     c Gamma i D_l b = Tr S(b)_sl Fbar^s Gamma H,
    S_sl = v_s (t1 v_l + t2 v'_l + t3 gamma_l) + t4 g_sl      (narrow doublet),
    S_l = z1 v_l + z2 v'_l + z3 gamma_l                       (broad doublet).

The coefficients follow here from the equations of motion v.D b = 0, v'.D c = 0 and from translation invariance, S(c) +
S(b) = (Lambda v - Lambda' v') x leading order, solved by linear algebra with the matrices; only tau_1(c), tau_2(c) and
zeta_1(c) are free. Nothing of this is in the package, which has the expanded form factors.
"""

from __future__ import annotations

import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import mass
from semitau.gen.decays import isgur_wise
from semitau.gen.decays.amplitudes import lepton_amplitudes
from semitau.gen.decays.decay import ORBITAL_STATES, charm_name

from . import dirac
from .dirac import GAMMA, GAMMA5, METRIC, ONE, bar, dot, lower, slash
from .test_amplitudes import by_helicity, density, points, spin_components, table

LIGHT = isgur_wise.GROUND_ENERGY


def states(p: dirac.Point, family: str) -> list[list[np.ndarray]]:
    """Matrices F^s (four of them, upper index) of each spin state of the narrow doublet; (K,) of the broad one."""
    m = np.sqrt(dot(p.charm, p.charm))
    velocity = p.charm / m
    project = (ONE + slash(velocity)) / 2
    if family == "D0*(2300)":
        return [[project]]
    if family == "D1'(2430)":
        return [[project @ GAMMA5 @ slash(e)] for e in dirac.polarisations(p.charm)]
    if family == "D2*(2460)":
        return [[project @ slash(tensor[s]) for s in range(4)] for tensor in dirac.tensor_polarisations(p.charm)]
    factor = -np.sqrt(1.5) * project @ GAMMA5
    return [
        [factor @ (e[s] * ONE - slash(e) @ (GAMMA[s] - velocity[s] * ONE) / 3) for s in range(4)]
        for e in dirac.polarisations(p.charm)
    ]


def narrow_coefficients(w: float, t1: float, t2: float) -> tuple[np.ndarray, np.ndarray]:
    """(t1, t2, t3, t4) of S(c) and S(b), leading function 1.

    v_s Fbar^s .. with v'.l contracted: Fbar^s from the left of v' gives -Fbar^s, H times v gives -H; v'_s F^s = 0.
    """
    excited = isgur_wise.NARROW_ENERGY
    # unknown: t3(c), t4(c); S(b) = (LIGHT, -excited, 0, 0) - S(c)
    #   w t1 + t2 - t3 = 0
    #   t1(b) + w t2(b) - t3(b) + t4(b) = 0
    matrix = np.array([[-1.0, 0.0], [1.0, -1.0]])
    known = np.array([-(w * t1 + t2), -((LIGHT - t1) + w * (-excited - t2))])
    t3, t4 = np.linalg.solve(matrix, known)
    charm = np.array([t1, t2, t3, t4])
    return charm, np.array([LIGHT, -excited, 0.0, 0.0]) - charm


def broad_coefficients(w: float, z1: float) -> tuple[np.ndarray, np.ndarray]:
    """(z1, z2, z3) of S(c) and S(b); K from the left of v' gives +K here."""
    excited = isgur_wise.BROAD_ENERGY
    #   w z1 + z2 + z3 = 0
    #   z1(b) + w z2(b) - z3(b) = 0
    matrix = np.array([[1.0, 1.0], [-w, 1.0]])
    known = np.array([-w * z1, -((LIGHT - z1) - w * excited)])
    z2, z3 = np.linalg.solve(matrix, known)
    charm = np.array([z1, z2, z3])
    return charm, np.array([LIGHT, -excited, 0.0]) - charm


def currents(p: dirac.Point, family: str, hats: tuple[float, ...]) -> list[dirac.Currents]:
    M, m = np.sqrt(dot(p.parent, p.parent)), np.sqrt(dot(p.charm, p.charm))
    v, velocity = p.parent / M, p.charm / m
    w = dot(v, velocity)
    initial = -(ONE + slash(v)) / 2 @ GAMMA5
    gamma_low = [METRIC[l, l] * GAMMA[l] for l in range(4)]
    v_low, velocity_low = lower(v), lower(velocity)
    narrow = ORBITAL_STATES[family].narrow
    of_charm, of_bottom = narrow_coefficients(w, *hats) if narrow else broad_coefficients(w, *hats)

    def structure(c: np.ndarray, s: int, l: int) -> np.ndarray:
        inner = (c[0] * v_low[l] + c[1] * velocity_low[l]) * ONE + c[2] * gamma_low[l]
        return v_low[s] * inner + c[3] * METRIC[s, l] * ONE if narrow else inner

    def element(matrices: list[np.ndarray], gamma: np.ndarray) -> complex:
        total = 0.0
        for s, matrix in enumerate(matrices):
            weight = v_low[s] if narrow else 1.0
            total += weight * np.trace(bar(matrix) @ gamma @ initial)
            for l in range(4):
                total -= isgur_wise.EPSILON_C * np.trace(
                    structure(of_charm, s, l) @ bar(matrix) @ GAMMA[l] @ gamma @ initial
                )
                total += isgur_wise.EPSILON_B * np.trace(
                    structure(of_bottom, s, l) @ bar(matrix) @ gamma @ GAMMA[l] @ initial
                )
        return np.sqrt(M * m) * total

    return [
        dirac.Currents(
            np.array([element(matrices, g) for g in GAMMA]),
            np.array([element(matrices, g @ GAMMA5) for g in GAMMA]),
            0.0,
            0.0,
            np.zeros((4, 4)),
        )
        for matrices in states(p, family)
    ]


@pytest.mark.parametrize("family", ORBITAL_STATES)
def test_order_one_over_m(family: str) -> None:
    """All amplitudes of the current, with lepton spin, at random points."""
    charm = charm_name("B+", family)
    decay = gen.Decay("B+", charm, "tau", "IW-2017", charm_mass=mass(charm))
    parameters = decay.model.parameters
    names = ("tau1_hat", "tau2_hat") if ORBITAL_STATES[family].narrow else ("zeta1_hat",)
    function = "tau" if ORBITAL_STATES[family].narrow else "zeta"
    for q2, theta, phi in points(decay):
        step = ((decay.m_parent - decay.m_charm) ** 2 - q2) / (2 * decay.m_parent * decay.m_charm)
        leading = parameters[f"{function}(1)"] * (1 + parameters[f"{function}_slope"] * step)
        k = lepton_amplitudes(decay, np.array([q2]))
        ours = (q2 - decay.m_lepton**2) * spin_components(density(by_helicity(table(k, 0, theta))))
        p = dirac.point(decay.m_parent, decay.m_charm, decay.m_lepton, q2, theta, phi)
        found = currents(p, family, tuple(parameters[name] for name in names))
        operators = [dirac.lepton_operator(x) for x in found]
        brute = [dirac.squared(p, operators), *(dirac.squared(p, operators, axis) for axis in p.axes)]
        expected = leading**2 * np.array(brute)
        np.testing.assert_allclose(ours, expected, rtol=1e-9, atol=1e-10 * expected[0])


# Phys. Rev. D 95 (2017) 014022, "R(D**)" with its errors, from memory; electron and muon in the denominator.
PREDICTED = {
    "D1(2420)": (0.10, 0.02),
    "D2*(2460)": (0.07, 0.01),
    "D0*(2300)": (0.08, 0.04),
    "D1'(2430)": (0.05, 0.02),
}


@pytest.mark.parametrize("family", PREDICTED)
def test_ratios_of_excited_states(family: str) -> None:
    value, error = PREDICTED[family]
    assert gen.ratio("B+", charm_name("B+", family), "IW-2017") == pytest.approx(value, abs=error)


def test_ratio_of_the_narrow_states() -> None:
    """Gamma(D2*) / Gamma(D1), light lepton: 0.5 of measured products (Eur. Phys. J. C 81 (2021) 226, from memory:

    D2* -> D pi 0.15(2)% and D* pi 0.068(12)%, D1 -> D* pi 0.281(16)%, over 0.67(5) of D1 that go to D* pi) is
    0.52(9); at leading order it is above 1.5 (Phys. Rev. D 57 (1998) 308: "1/m corrections enhance D1").
    """

    def width(family: str, chosen: str) -> float:
        return gen.observables(gen.Decay("B+", charm_name("B+", family), "mu", chosen)).rate

    assert width("D2*(2460)", "IW-2017") / width("D1(2420)", "IW-2017") == pytest.approx(0.52, abs=0.2)
    assert width("D2*(2460)", "IW-1998") / width("D1(2420)", "IW-1998") > 1.5
