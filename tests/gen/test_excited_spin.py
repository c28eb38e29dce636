"""Spin of a D** in its decay, against explicit Dirac matrices, rotation matrices and partial waves.

Shares with the code the form factors and, in the distributions, the helicity amplitudes, which test_amplitudes.py holds
against Dirac matrices one by one. The tests of distributions ask for p-values above 1e-5 with a seed that
SEMITAU_TEST_SEED replaces: a fresh seed fails somewhere in this file with a chance below 1e-3.
"""

from __future__ import annotations

import os
from itertools import product

import awkward as ak
import numpy as np
import pytest
from scipy import stats
from scipy.linalg import expm
from scipy.special import factorial2
from semitau import gen
from semitau.core.streams import stream_key, uniforms
from semitau.gen.decays.amplitudes import lepton_amplitudes
from semitau.gen.decays.chains import charm_name
from semitau.gen.decays.decay import Decay, WilsonCoefficients
from semitau.gen.decays.rates import differential_rate
from semitau.gen.truth.charm_spin import CharmSpin, spin_of_orbital
from semitau.gen.truth.decay_angles import decay_angles, to_rest_frame
from semitau.gen.truth.momenta import rotation
from semitau.gen.truth.spin_algebra import both_waves, helicity_states, lepton_terms, spin_density
from semitau.gen.truth.tensor_angles import axes, tensor_direction

from . import dirac
from .dirac import GAMMA5, ONE, dot, lower, slash
from .test_amplitudes import brute, operators, points

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5
COUPLINGS = [WilsonCoefficients(), WilsonCoefficients(VR=-0.5 + 0.2j), WilsonCoefficients(VL=0.3 - 0.4j)]
D1, D2, D1_BROAD = "D1(2420)", "D2*(2460)", "D1'(2430)"
DECAYS = [(D1, True), (D1_BROAD, True), (D2, False), (D2, True)]  # and whether a D* comes out


def waves_in_space(family: str, to_vector: bool, n: np.ndarray) -> list[np.ndarray]:
    """Tensors on the axes of the rest frame that stand for the spin of the D**, one for each spin state of the D*.

    Partial waves in Cartesian form (common practice): S wave 1, D wave 3 n n - 1, spin 2 -> D pion n n, spin 2 -> D*
    pion n (n x e). Normalised such that their squares average to 1 over n for each spin state of the D**.
    """
    if family == D1_BROAD:
        return list(np.eye(3))
    if family == D1:
        return list((3 * np.outer(n, n) - np.eye(3)) / np.sqrt(2))
    if not to_vector:
        return [np.sqrt(7.5) * (np.outer(n, n) - np.eye(3) / 3)]
    crossed = [np.cross(n, axis) for axis in np.eye(3)]
    return [np.sqrt(5.0) * (np.outer(n, c) + np.outer(c, n)) / 2 for c in crossed]


def final_states(p: dirac.Point, family: str, to_vector: bool, n: np.ndarray) -> list[np.ndarray]:
    """Matrices of `dirac.heavy_quark_currents` for the D or D* at n in the D** frame: as `dirac.heavy_states`."""
    M, m = np.sqrt(dot(p.parent, p.parent)), np.sqrt(dot(p.charm, p.charm))
    v, velocity = p.parent / M, p.charm / m
    project, axes = (ONE + slash(velocity)) / 2, dirac.polarisations(p.charm)
    shape = slash(v) - dot(v, velocity) * ONE
    found = []
    for wave in waves_in_space(family, to_vector, n):
        if family == D2:
            found.append(project @ slash((axes.T @ wave @ axes) @ lower(v)))
            continue
        e = wave @ axes
        if family == D1:
            found.append(-np.sqrt(1.5) * project @ GAMMA5 @ (dot(v, e) * ONE - slash(e) @ shape / 3))
        else:
            found.append(project @ GAMMA5 @ slash(e))
    return found


def spin_of(family: str, to_vector: bool) -> CharmSpin:
    state = Decay("B0", charm_name("B0", family), "mu").orbital
    assert state is not None
    return spin_of_orbital(state, to_vector, two_pions=False)


@pytest.mark.parametrize("couplings", COUPLINGS, ids=["none", "VR", "VL"])
@pytest.mark.parametrize("lepton", ["mu", "tau"])
@pytest.mark.parametrize(("family", "to_vector"), DECAYS)
def test_density_and_lepton_spin(family: str, to_vector: bool, lepton: str, couplings: WilsonCoefficients) -> None:
    """Every angle of B -> D** l nu, D** -> D(*) pion and the lepton's spin, with every interference."""
    charm = charm_name("B0", family)
    decay = Decay("B0", charm, lepton, wilson=couplings, charm_mass=2.4)
    rng = np.random.default_rng(SEED)
    for q2, theta, _ in points(decay):
        v, chi = rng.uniform(-1, 1), rng.uniform(0, 2 * np.pi)
        parameters, function = decay.model.parameters, "zeta" if family == D1_BROAD else "tau"
        step = ((decay.m_parent - decay.m_charm) ** 2 - q2) / (2 * decay.m_parent * decay.m_charm)
        universal = parameters[f"{function}(1)"] * (1 + parameters[f"{function}_slope"] * step)
        p = dirac.point(decay.m_parent, decay.m_charm, decay.m_lepton, q2, theta, 0.0)
        s = np.sqrt(1 - v * v)
        n = np.array([s * np.cos(chi), -s * np.sin(chi), -v])  # as brute_chain.daughter has it for a D*
        currents = dirac.heavy_quark_currents(p, final_states(p, family, to_vector, n))
        expected = universal**2 * brute(p, operators(currents, couplings))
        k = lepton_amplitudes(decay, np.array([q2]))
        states = helicity_states(np.cos(theta), *(complex(one[0]) for one in terms(k)))
        trace, *along = both_waves(spin_of(family, to_vector), v, np.cos(chi), np.sin(chi), *states)
        ours = (q2 - decay.m_lepton**2) * np.array([trace, *((trace + one) / 2 for one in along)])
        np.testing.assert_allclose(ours, expected, rtol=1e-9, atol=1e-11 * expected[0])
        if not (family == D2 and to_vector):
            one_wave = spin_density(spin_of(family, to_vector), v, np.cos(chi), np.sin(chi), *states)
            np.testing.assert_allclose(one_wave, [trace, *along], rtol=1e-13, atol=1e-13 * trace)


def terms(k: object) -> list[np.ndarray]:
    return [getattr(k, name) for name in ("a_plus", "a_minus", "a_zero", "b_plus", "b_minus", "b_zero", "t")]


def test_sums_over_an_icosahedron() -> None:
    """Each even monomial of degree up to four has its mean over the sphere as its mean over the six axes.

    The mean of x^a y^b z^c, all even, is (a-1)!! (b-1)!! (c-1)!! / (a+b+c+1)!! (handbook integral).
    """
    turn = rotation(*uniforms(stream_key(SEED, "turn"), 0, 3, 0))
    corners = np.array(axes(turn))
    np.testing.assert_allclose(np.sum(corners**2, axis=1), 1.0, rtol=1e-14)
    for powers in product(range(5), repeat=3):
        if sum(powers) % 2 or sum(powers) > 4:
            continue
        even = not any(p % 2 for p in powers)
        mean = np.prod([factorial2(p - 1) if p else 1 for p in powers]) / factorial2(sum(powers) + 1) if even else 0.0
        assert np.mean(np.prod(corners**powers, axis=1)) == pytest.approx(mean, abs=1e-14)


def test_choice_among_the_axes() -> None:
    """Directions of a spin-2 decay against the integral of its density, in bins of cos and azimuth."""
    turns = np.array([uniforms(stream_key(SEED, "turn"), 0, 100_000, k) for k in range(4)])
    spin = spin_of(D2, to_vector=False)
    states = helicity_states(0.3, *lepton_terms(0.4, 0.2, 0.9, -0.7, 0.5, 0.0, 0.0, 0.0, 0.0))
    drawn = np.array([tensor_direction(rotation(a, b, c), u, spin, spin_density, states) for a, b, c, u in turns.T])
    edges_v, edges_chi = np.linspace(-1, 1, 11), np.linspace(-np.pi, np.pi, 11)
    chi = np.arctan2(drawn[:, 2], drawn[:, 1])
    found, _, _ = np.histogram2d(drawn[:, 0], chi, (edges_v, edges_chi))
    check_bins(found, in_bins(lambda v, c: spin_density(spin, v, np.cos(c), np.sin(c), *states)[0], edges_v, edges_chi))


def in_bins(density: object, *edges: np.ndarray) -> np.ndarray:
    """Shares of the bins by Gauss-Legendre quadrature, exact for what is meant here up to rounding."""
    nodes, weights = np.polynomial.legendre.leggauss(8)
    middles = [(e[1:, None] + e[:-1, None]) / 2 + np.diff(e)[:, None] / 2 * nodes for e in edges]
    values = np.zeros(tuple(len(e) - 1 for e in edges))
    for place in product(*(range(len(e) - 1) for e in edges)):
        for node in product(range(8), repeat=len(edges)):
            at = [m[p][k] for m, p, k in zip(middles, place, node, strict=True)]
            values[place] += np.prod(weights[list(node)]) * density(*at)
    return values / values.sum()


def check_bins(found: np.ndarray, shares: np.ndarray) -> None:
    assert stats.chisquare(found.ravel(), found.sum() * shares.ravel()).pvalue > UNLIKELY


def rotation_element(spin: int, angle: float) -> np.ndarray:
    """(2 J + 1, 2 J + 1): exp(-i angle J_y), helicities J ... -J: d^J without its closed form."""
    m = np.arange(spin, -spin, -1)
    raised = np.diag(np.sqrt(spin * (spin + 1) - m * (m - 1)), 1)
    return np.real(expm(-angle * (raised - raised.T) / 2))


AMPLITUDES = {  # of the D* helicities +, 0, - in a D wave and for spin 2, Clebsch-Gordan coefficients (handbook tables)
    (D1, True): np.array([np.sqrt(1 / 6), -np.sqrt(2 / 3), np.sqrt(1 / 6)]),
    (D1_BROAD, True): np.array([1.0, 1.0, 1.0]) / np.sqrt(3),
    (D2, True): np.array([1.0, 0.0, -1.0]) / np.sqrt(2),
}


@pytest.mark.parametrize("lepton", ["mu", "tau"])
@pytest.mark.parametrize(("family", "to_vector"), DECAYS)
def test_drawn_directions(family: str, to_vector: bool, lepton: str) -> None:
    """cos(theta_V) and chi of events, from their momenta, against an integral over q² and theta.

    The charm side from exponentials of spin matrices, so that no function of the angles is shared. The cosine is of
    the D or D* in the D** frame; its sign carries no information.
    """
    charm = charm_name("B0", family)
    decay = gen.Decay("B0", charm, lepton, charm_mass=2.4 if family == D1_BROAD else None)
    charm_to = "D*- pi0" if to_vector else "D- pi0"
    events = gen.simulate(decay, 60_000, SEED, charm_to=charm_to, tau_to="mu")
    d = four(events, "Dst" if to_vector else "D")
    a = decay_angles(*(four(events, name) for name in ("B", "Dss", "tau" if lepton == "tau" else "lepton")), d)
    chi = np.arctan2(a.sin_chi, a.cos_chi)
    edges_v, edges_chi = np.linspace(-1, 1, 9), np.linspace(-np.pi, np.pi, 9)
    found, _, _ = np.histogram2d(a.cos_v, chi, (edges_v, edges_chi))
    rho = charm_density(decay)

    def density(v: float, angle: float) -> float:
        turned = rotation_element(2 if family == D2 else 1, float(np.arccos(v)))
        middle = len(turned) // 2
        near = slice(middle - 1, middle + 2)
        # to helicity s of the daughter from helicity l of the D**, with the signs of the table in decays/amplitudes.py
        seen = turned[near, near] * AMPLITUDES[family, True][:, None] if to_vector else turned[[middle], near]
        seen = seen * np.exp(1j * angle * np.array([1, 0, -1]))
        return float(np.einsum("sl,lm,sm->", seen, rho, seen.conj()).real)

    check_bins(found, in_bins(density, edges_v, edges_chi))


def charm_density(decay: Decay) -> np.ndarray:
    """(3, 3) spin density matrix of the charmed meson, helicities +, 0, -, integrated over q² and cos(theta)."""
    nodes, weights = np.polynomial.legendre.leggauss(60)
    low, high = decay.q2_range
    total = np.zeros((3, 3), dtype=complex)
    for t, w in zip((nodes + 1) / 2, weights, strict=True):
        q2 = low + (high - low) * t * t * (3 - 2 * t)
        k = [complex(one[0]) for one in terms(lepton_amplitudes(decay, np.array([q2])))]
        at_q2 = np.zeros((3, 3), dtype=complex)
        for c, weight in zip(*np.polynomial.legendre.leggauss(6), strict=True):
            kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus = helicity_states(c, *k)
            for state in ([kp_minus, k0_minus, km_minus], [kp_plus, k0_plus, km_plus]):
                at_q2 += weight * np.outer(state, np.conj(state))
        rate = float(differential_rate(decay, np.array([q2]))[0]) * t * (1 - t)
        total += w * rate * at_q2 / np.trace(at_q2).real
    return total


def four(events: ak.Array, name: str) -> np.ndarray:
    return np.stack([ak.to_numpy(events[name][part], allow_missing=False) for part in ("px", "py", "pz", "E")])


@pytest.mark.parametrize("soft", ["pion", "photon"])
@pytest.mark.parametrize("family", [D1, D1_BROAD, D2])
def test_alignment_of_the_vector(family: str, soft: str) -> None:
    """Angle between the two pions in the D* frame: 1 + 3 cos² for a D wave, sin² for spin 2, flat for an S wave.

    From the squares of the Clebsch-Gordan coefficients of AMPLITUDES; used in measurements to tell D1 from D2* (Phys.
    Rev. D 82 (2010) 111101, from memory). Helicity 0 gives cos² with a pion and sin² with a photon (summed over its
    helicities), the others sin² / 2 and (1 + cos²) / 2.
    """
    transverse, straight, _ = AMPLITUDES[family, True] ** 2
    even, square = (
        (transverse, straight - transverse) if soft == "pion" else (straight + transverse, transverse - straight)
    )
    norm = 2 * even + 2 * square / 3

    def density(c: np.ndarray) -> np.ndarray:
        return (even * (c + 1) + square * (c**3 + 1) / 3) / norm

    charm = charm_name("B+", family)
    to = "D*+ pi-" if soft == "pion" else "D*0 pi0"
    events = gen.simulate(gen.Decay("B+", charm, "mu"), 40_000 if soft == "pion" else 110_000, SEED, charm_to=to)
    mass2 = events.soft.E**2 - events.soft.px**2 - events.soft.py**2 - events.soft.pz**2
    events = events[mass2 > 0.01] if soft == "pion" else events[mass2 < 0.001]
    vector = four(events, "Dst")
    soft = to_rest_frame(four(events, "soft"), vector)[:3]
    pion = to_rest_frame(four(events, "pion"), vector)[:3]
    cosine = np.sum(soft * pion, axis=0) / np.linalg.norm(soft, axis=0) / np.linalg.norm(pion, axis=0)
    assert stats.kstest(cosine, density).pvalue > UNLIKELY


def test_samples_that_mix_decays() -> None:
    """Weights look at the D* where there is one and at the D where there is none: as for samples of one decay each."""
    decay, other = (gen.Decay("B+", "D2*(2460)0", "tau", wilson=w) for w in (None, {"VR": 0.4 - 0.2j}))
    events = gen.simulate(decay, 3000, SEED)
    mixed = gen.weights(events, other)
    direct = ak.to_numpy(ak.is_none(events.Dst.E))
    assert 0 < direct.sum() < len(direct)
    for where, drop in ((direct, ["Dst", "soft"]), (~direct, [])):
        part = events[where]
        kept = part[[name for name in part.fields if name not in drop]]
        np.testing.assert_array_equal(gen.weights(ak.drop_none(kept), other, drawn_from=decay), mixed[where])
