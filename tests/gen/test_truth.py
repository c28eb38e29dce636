"""The truth kernel: joint distributions against quadrature of Dirac traces and published closed forms.

Expected moments are integrals over q², cos(theta), cos(theta_V), chi of densities made of explicit Dirac matrices
(brute_chain.py); the angular quadrature is exact for them, the q² one far better than the samples. Moments are compared
at 5 standard deviations, distributions at p > 1e-5, so with a fresh seed (SEMITAU_TEST_SEED) the file fails by chance
less than once in a thousand.
"""

from __future__ import annotations

import os
import platform
from collections.abc import Callable
from dataclasses import dataclass
from functools import cache

import awkward as ak
import numpy as np
import pytest
from numba import njit
from scipy import integrate, stats
from semitau import gen
from semitau.core.constants import MASS
from semitau.core.streams import stream_key
from semitau.gen.block import LANES, POLARISATION_X, ROWS, SCRATCH_END, new_block
from semitau.gen.decays.amplitudes import helicity_amplitudes
from semitau.gen.decays.chains import chains_of
from semitau.gen.truth import drawing as truth
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.decay_angles import DecayAngles, decay_angles
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.kinematics import kallen

from . import brute_chain

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5
EVENTS = 100_000
NEW = {"VL": 0.1 - 0.1j, "VR": 0.2j, "SL": 0.3 + 0.2j, "SR": -0.3j, "T": 0.06 + 0.08j}


@dataclass(frozen=True)
class Sample:
    name: str
    charm: str
    lepton: str
    tau_to: str = "mu"
    charm_to: str | None = None
    wilson: bool = False

    @property
    def decay(self) -> gen.Decay:
        return gen.Decay("B0", self.charm, self.lepton, wilson=NEW if self.wilson else None)


SAMPLES = [
    Sample("D tau", "D-", "tau", "pi"),
    Sample("D tau, new couplings", "D-", "tau", "mu", wilson=True),
    Sample("D mu", "D-", "mu"),
    Sample("D* tau", "D*-", "tau", "pi", "D0 pi+"),
    Sample("D* tau, muon", "D*-", "tau", "mu", "D+ pi0"),
    Sample("D* tau, new couplings", "D*-", "tau", "pi", "D0 pi+", wilson=True),
    Sample("D* tau, photon, new couplings", "D*-", "tau", "pi", "D+ gamma", wilson=True),
    Sample("D* e", "D*-", "e", "mu", "D0 pi+"),
    Sample("D* e, photon", "D*-", "e", "mu", "D+ gamma"),
    Sample("D* mu, new couplings", "D*-", "mu", "mu", "D0 pi+", wilson=True),
]
NAMES = [sample.name for sample in SAMPLES]


@cache
def drawn(sample: Sample) -> DecayAngles:
    return angles_of(sample, simulated(sample))


def simulated(sample: Sample) -> ak.Array:
    return gen.simulate(sample.decay, EVENTS, SEED, tau_to=sample.tau_to, charm_to=sample.charm_to)


def angles_of(sample: Sample, events: ak.Array, visible: str = "lepton") -> DecayAngles:
    has_tau, has_vector = sample.lepton == "tau", sample.charm == "D*-"
    return decay_angles(
        four(events, "B"),
        four(events, "Dst" if has_vector else "D"),
        four(events, "tau" if has_tau else "lepton"),
        four(events, "D") if has_vector else None,
        four(events, visible) if has_tau else None,
    )


def four(events: ak.Array, name: str) -> np.ndarray:
    return np.stack([ak.to_numpy(events[name][part]) for part in ("px", "py", "pz", "E")])


@dataclass(frozen=True)
class Quadrature:
    """Points of (q², theta, theta_V, chi) and what the density is worth there: density[0] its trace, the rest spin."""

    q2: np.ndarray
    cos_theta: np.ndarray
    cos_v: np.ndarray
    chi: np.ndarray
    density: np.ndarray

    def mean(self, values: np.ndarray, spin: int = 0) -> float:
        return float(np.sum(values * self.density[spin]) / np.sum(self.density[0]))


@cache
def quadrature(sample: Sample) -> Quadrature:
    decay = sample.decay
    low, high = decay.q2_range
    t, t_weights = np.polynomial.legendre.leggauss(12)
    # q² as a cubic of t: smooth at both end points
    t = (t + 1) / 2
    q2_nodes, q2_weights = low + (high - low) * t * t * (3 - 2 * t), t_weights * t * (1 - t)
    c_nodes, c_weights = np.polynomial.legendre.leggauss(3)
    v_nodes, v_weights, chi_nodes = [0.0], [1.0], [0.0]
    if sample.charm == "D*-":
        v_nodes, v_weights, chi_nodes = c_nodes, c_weights, 2 * np.pi * np.arange(6) / 6
    d, soft = {"D0 pi+": ("D0", "pi+"), "D+ pi0": ("D+", "pi0"), "D+ gamma": ("D+", "gamma"), None: ("D+", "gamma")}[
        sample.charm_to
    ]
    found = []
    for q2, q2_weight in zip(q2_nodes, q2_weights, strict=True):
        momentum = np.sqrt(kallen(decay.m_parent, decay.m_charm, q2)) * (1 - decay.m_lepton**2 / q2)
        for c, c_weight in zip(c_nodes, c_weights, strict=True):
            p = brute_chain.angular_point(decay, q2, c)
            for v, v_weight in zip(v_nodes, v_weights, strict=True):
                for chi in chi_nodes:
                    daughter = None
                    if sample.charm == "D*-":
                        daughter = brute_chain.daughter(p, d, MASS[soft], v, chi)
                    matrices = brute_chain.operators(decay, p, daughter, soft == "gamma")
                    weight = q2_weight * momentum * c_weight * v_weight
                    found.append([q2, c, v, chi, *(weight * brute_chain.spin_weights(p, matrices))])
    q2, c, v, chi, *density = np.array(found).T
    return Quadrature(q2, c, v, chi, np.array(density))


Moment = Callable[[np.ndarray, np.ndarray, np.ndarray, np.ndarray], np.ndarray]
# Functions of cos(theta), sin(theta), cos(theta_V), chi such that function times density is a polynomial of low degree.
MOMENTS: dict[str, Moment] = {
    "c": lambda c, s, v, chi: c,
    "c²": lambda c, s, v, chi: c * c,
    "v²": lambda c, s, v, chi: v * v,
    "c v²": lambda c, s, v, chi: c * v * v,
    "c² v²": lambda c, s, v, chi: c * c * v * v,
    "cos χ": lambda c, s, v, chi: s * v * np.sqrt(1 - v * v) * np.cos(chi),
    "c cos χ": lambda c, s, v, chi: c * s * v * np.sqrt(1 - v * v) * np.cos(chi),
    "sin χ": lambda c, s, v, chi: s * v * np.sqrt(1 - v * v) * np.sin(chi),
    "c sin χ": lambda c, s, v, chi: c * s * v * np.sqrt(1 - v * v) * np.sin(chi),
    "cos 2χ": lambda c, s, v, chi: np.cos(2 * chi),
    "c² cos 2χ": lambda c, s, v, chi: c * c * np.cos(2 * chi),
    "sin 2χ": lambda c, s, v, chi: np.sin(2 * chi),
}
SPIN_MOMENTS: dict[str, tuple[int, Moment]] = {
    "z": (3, lambda c, s, v, chi: np.ones_like(c)),
    "z c": (3, lambda c, s, v, chi: c),
    "z c²": (3, lambda c, s, v, chi: c * c),
    "z v²": (3, lambda c, s, v, chi: v * v),
    "z cos χ": (3, lambda c, s, v, chi: s * v * np.sqrt(1 - v * v) * np.cos(chi)),
    "z cos 2χ": (3, lambda c, s, v, chi: np.cos(2 * chi)),
    "x s": (1, lambda c, s, v, chi: s),
    "x s c": (1, lambda c, s, v, chi: s * c),
    "x s v²": (1, lambda c, s, v, chi: s * v * v),
    "x cos χ": (1, lambda c, s, v, chi: v * np.sqrt(1 - v * v) * np.cos(chi)),
    "x c cos χ": (1, lambda c, s, v, chi: c * v * np.sqrt(1 - v * v) * np.cos(chi)),
    "x sin χ": (1, lambda c, s, v, chi: v * np.sqrt(1 - v * v) * np.sin(chi)),
    "x s cos 2χ": (1, lambda c, s, v, chi: s * np.cos(2 * chi)),
    "x s sin 2χ": (1, lambda c, s, v, chi: s * np.sin(2 * chi)),
    "y s": (2, lambda c, s, v, chi: s),
    "y s c": (2, lambda c, s, v, chi: s * c),
    "y sin χ": (2, lambda c, s, v, chi: v * np.sqrt(1 - v * v) * np.sin(chi)),
    "y c sin χ": (2, lambda c, s, v, chi: c * v * np.sqrt(1 - v * v) * np.sin(chi)),
    "y cos χ": (2, lambda c, s, v, chi: v * np.sqrt(1 - v * v) * np.cos(chi)),
    "y s sin 2χ": (2, lambda c, s, v, chi: s * np.sin(2 * chi)),
    "y s cos 2χ": (2, lambda c, s, v, chi: s * np.cos(2 * chi)),
}


def sine(c: np.ndarray) -> np.ndarray:
    return np.sqrt(1 - c * c)


def check_mean(values: np.ndarray, expected: float) -> None:
    assert abs(np.mean(values) - expected) < 5 * np.std(values) / np.sqrt(len(values)) + 1e-12


@pytest.mark.parametrize("sample", SAMPLES, ids=NAMES)
def test_angular_moments(sample: Sample) -> None:
    a, q = drawn(sample), quadrature(sample)
    chi = np.arctan2(a.sin_chi, a.cos_chi)
    check_mean(a.q2, q.mean(q.q2))
    for moment in MOMENTS.values():
        if sample.charm == "D-":
            a_v, a_chi = np.zeros(EVENTS), np.zeros(EVENTS)
        else:
            a_v, a_chi = a.cos_v, chi
        expected = q.mean(moment(q.cos_theta, sine(q.cos_theta), q.cos_v, q.chi))
        check_mean(moment(a.cos_theta, sine(a.cos_theta), a_v, a_chi), expected)
    check_mean(a.q2 * a.cos_theta, q.mean(q.q2 * q.cos_theta))


def michel(x: np.ndarray, x0: float) -> tuple[np.ndarray, np.ndarray]:
    """Spectrum of the charged lepton of l- -> l'- nu nu in x = E/E_max: isotropic part and coefficient of n.P.

    Particle data tables, review "Muon decay parameters": F_IS and F_AS for rho = delta = 3/4, eta = 0, xi = 1, from
    memory; x0 = m/E_max. The sign of the second is that of a negative lepton.
    """
    size = np.sqrt(np.maximum(x * x - x0 * x0, 0.0))
    isotropic = x * (1 - x) + (4 * x * x - 3 * x - x0 * x0) / 6
    along = size / 3 * (1 - x + (4 * x - 3 + np.sqrt(1 - x0 * x0) - 1) / 2)
    return size * isotropic, -size * along


def daughter_means(tau_to: str, power: int) -> tuple[float, float]:
    """Mean of |l|^power, and of |l|^power times the coefficient of n.P relative to the rest, over a tau decay."""
    tau, mass = MASS["tau"], MASS["pi+" if tau_to == "pi" else tau_to]
    top = (tau**2 + mass**2) / (2 * tau)
    if tau_to == "pi":
        size = np.sqrt(top**2 - mass**2) ** power
        return size, size
    x = np.linspace(mass / top, 1.0, 4001)
    even, odd = michel(x, mass / top)
    size = np.sqrt((x * top) ** 2 - mass**2) ** power
    norm = integrate.simpson(even, x=x)
    return integrate.simpson(size * even, x=x) / norm, integrate.simpson(size * odd, x=x) / norm


TAU_SAMPLES = [sample for sample in SAMPLES if sample.lepton == "tau"]


@pytest.mark.parametrize("sample", TAU_SAMPLES, ids=[sample.name for sample in TAU_SAMPLES])
def test_spin_moments(sample: Sample) -> None:
    """Direction of the tau daughter along x', y', z', alone and in correlation with every angle."""
    a, q = drawn(sample), quadrature(sample)
    chi, v = np.arctan2(a.sin_chi, a.cos_chi), a.cos_v
    if sample.charm == "D-":
        chi, v = np.zeros(EVENTS), np.zeros(EVENTS)
    power = daughter_means(sample.tau_to, 0)[1]
    directions = (None, a.visible_x, a.visible_y, a.visible_z)
    for axis, moment in SPIN_MOMENTS.values():
        # mean of n given P is power P / 3
        expected = power / 3 * q.mean(moment(q.cos_theta, sine(q.cos_theta), q.cos_v, q.chi), axis)
        check_mean(directions[axis] * moment(a.cos_theta, sine(a.cos_theta), v, chi), expected)


@pytest.mark.parametrize("sample", TAU_SAMPLES, ids=[sample.name for sample in TAU_SAMPLES])
def test_mean_lepton_energy_in_the_parent_frame(sample: Sample) -> None:
    """The observable of the fit: depends on P_z' and on P_x' (not on P_z' alone); missing mass likewise."""
    events, q = simulated(sample), quadrature(sample)
    M, m, tau = sample.decay.m_parent, sample.decay.m_charm, MASS["tau"]
    mass = MASS["pi+" if sample.tau_to == "pi" else sample.tau_to]
    top = (tau**2 + mass**2) / (2 * tau)
    if sample.tau_to == "pi":
        energy = top
    else:
        x = np.linspace(mass / top, 1.0, 4001)
        even = michel(x, mass / top)[0]
        energy = top * integrate.simpson(x * even, x=x) / integrate.simpson(even, x=x)
    pull = daughter_means(sample.tau_to, 1)[1] / 3
    root = np.sqrt(q.q2)
    w_energy = (M * M + q.q2 - m * m) / (2 * M)
    w_size = np.sqrt(w_energy**2 - q.q2)
    tau_gamma, tau_gamma_beta = (q.q2 + tau**2) / (2 * root * tau), (q.q2 - tau**2) / (2 * root * tau)
    # energy in the B frame = steady + along n_z' |l| + side n_x' |l|
    steady = energy * (w_energy * tau_gamma + w_size * q.cos_theta * tau_gamma_beta) / root
    along = (w_energy * tau_gamma_beta + w_size * q.cos_theta * tau_gamma) / root
    side = -w_size * np.sqrt(1 - q.cos_theta**2) / root
    expected = q.mean(steady) + pull * (q.mean(along, 3) + q.mean(side, 1))
    check_mean(ak.to_numpy(events.lepton.E), expected)
    assert abs(pull * q.mean(side, 1)) > 5 * np.std(events.lepton.E) / np.sqrt(EVENTS) or sample.tau_to == "mu"


@pytest.mark.parametrize("sample", SAMPLES, ids=NAMES)
def test_angular_distributions(sample: Sample) -> None:
    """Shapes are fixed by a few moments: 1, c, c² in cos(theta), 1, v² in cos(theta_V), 1, cos 2 chi, sin 2 chi."""
    a, q = drawn(sample), quadrature(sample)
    mean, square = q.mean(q.cos_theta), q.mean(q.cos_theta**2)
    # density (1 + f P1-part + g P2-part)/2 of Legendre polynomials
    first, second = 3 * mean, 5 * (3 * square - 1) / 2

    def theta(c: np.ndarray) -> np.ndarray:
        return (c + 1 + first * (c * c - 1) / 2 + second * (c**3 - c) / 2) / 2

    assert stats.kstest(a.cos_theta, theta).pvalue > UNLIKELY
    if sample.charm == "D*-":
        curve = 5 * (3 * q.mean(q.cos_v**2) - 1) / 2
        assert stats.kstest(a.cos_v, lambda v: (v + 1 + curve * (v**3 - v) / 2) / 2).pvalue > UNLIKELY
        cosine, sines = 2 * q.mean(np.cos(2 * q.chi)), 2 * q.mean(np.sin(2 * q.chi))

        def azimuth(chi: np.ndarray) -> np.ndarray:
            wave = cosine * np.sin(2 * chi) / 2 + sines * (1 - np.cos(2 * chi)) / 2
            return (chi + wave) / (2 * np.pi)

        chi = np.arctan2(a.sin_chi, a.cos_chi) % (2 * np.pi)
        assert stats.kstest(chi, azimuth).pvalue > UNLIKELY


def test_massless_angular_form() -> None:
    """B -> D* e nu in 5 x 5 x 8 bins of (c, v, chi): Rev. Mod. Phys. 67 (1995) 893, eq. for d Gamma/dq² dcos dcos dchi.

    With the signs of our angles (theta from the W* flight). Bin contents are integrals by hand of the polynomials.
    """
    sample = SAMPLES[NAMES.index("D* e")]
    a = drawn(sample)
    decay = sample.decay
    nodes, weights = np.polynomial.legendre.leggauss(40)
    low, high = decay.q2_range
    t = (nodes + 1) / 2
    q2 = low + (high - low) * t * t * (3 - 2 * t)
    k = helicity_amplitudes(decay, q2)
    plus, minus, zero = (2 * x.real for x in (k.J_plus, k.J_minus, k.J_zero))
    rate = weights * t * (1 - t) * np.sqrt(kallen(decay.m_parent, decay.m_charm, q2)) * q2

    def total(values: np.ndarray) -> float:
        return float(np.sum(rate * values))

    c_edges, v_edges, x_edges = np.linspace(-1, 1, 6), np.linspace(-1, 1, 6), np.linspace(0, 2 * np.pi, 9)

    def bins(edges: np.ndarray, primitive: Callable[[np.ndarray], np.ndarray]) -> np.ndarray:
        return np.diff(primitive(edges))

    def root(u: np.ndarray) -> np.ndarray:
        return np.sqrt(np.maximum(1 - u * u, 0))

    sin2 = bins(c_edges, lambda c: c - c**3 / 3)
    less, more = bins(c_edges, lambda c: -((1 - c) ** 3) / 3), bins(c_edges, lambda c: (1 + c) ** 3 / 3)
    sine_c = bins(c_edges, lambda c: (c * root(c) + np.arcsin(c)) / 2)
    sine_cos = bins(c_edges, lambda c: -(root(c) ** 3) / 3)
    v_sin2, v_cos2 = bins(v_edges, lambda v: v - v**3 / 3), bins(v_edges, lambda v: v**3 / 3)
    v_mixed = bins(v_edges, lambda v: -(root(v) ** 3) / 3)
    flat, once, twice = np.diff(x_edges), bins(x_edges, np.sin), bins(x_edges, lambda x: np.sin(2 * x) / 2)

    def cell(c: np.ndarray, v: np.ndarray, x: np.ndarray) -> np.ndarray:
        return np.einsum("i,j,k->ijk", c, v, x)

    expected = (
        total(plus**2) * cell(less, v_sin2, flat)
        + total(minus**2) * cell(more, v_sin2, flat)
        + 4 * total(zero**2) * cell(sin2, v_cos2, flat)
        - 2 * total(plus * minus) * cell(sin2, v_sin2, twice)
        - 4 * total(plus * zero) * cell(sine_c - sine_cos, v_mixed, once)
        + 4 * total(minus * zero) * cell(sine_c + sine_cos, v_mixed, once)
    )
    chi = np.arctan2(a.sin_chi, a.cos_chi) % (2 * np.pi)
    counts = np.histogramdd([a.cos_theta, a.cos_v, chi], bins=[c_edges, v_edges, x_edges])[0]
    assert stats.chisquare(counts.ravel(), (expected / expected.sum() * EVENTS).ravel()).pvalue > UNLIKELY


def polarisation(sample: Sample) -> np.ndarray:
    """(3, EVENTS) of the tau on x', y', z', from the kernel; the events of `drawn` if these are of one chain."""
    table = channel_table(next(chains_of(sample.decay, (sample.tau_to,))))
    x, found = new_block(), []
    for start in range(0, EVENTS, LANES):
        draw_decays(x, table, stream_key(SEED, "simulate"), np.uint64(start))
        found.append(x[POLARISATION_X : POLARISATION_X + 3 * LANES].reshape(3, LANES).copy())
    return np.concatenate(found, axis=1)[:, :EVENTS]


def test_michel_spectrum_of_the_polarised_tau() -> None:
    """Energy and angle to P in 12 x 10 bins: y²[(3-2y) - cos (2y-1)] for |P| = 1 and massless daughter (handbooks)."""
    sample = Sample("electron", "D-", "tau", "e")
    a, spin = drawn(sample), polarisation(sample)
    np.testing.assert_allclose(np.sum(spin**2, axis=0), 1.0, rtol=1e-12)
    y = 2 * a.visible_energy / MASS["tau"]
    cosine = a.visible_x * spin[0] + a.visible_y * spin[1] + a.visible_z * spin[2]
    y_edges, c_edges = np.linspace(0, 1, 13), np.linspace(-1, 1, 11)
    counts = np.histogram2d(y, cosine, bins=[y_edges, c_edges])[0]
    isotropic, along = np.diff(y_edges**3 - y_edges**4 / 2), -np.diff(y_edges**4 / 2 - y_edges**3 / 3)
    expected = np.outer(isotropic, np.diff(c_edges)) + np.outer(along, np.diff(c_edges**2 / 2))
    assert stats.chisquare(counts.ravel(), (expected / expected.sum() * counts.sum()).ravel()).pvalue > UNLIKELY
    assert counts.sum() == pytest.approx(EVENTS, abs=5)


@pytest.mark.parametrize("charm", ["D-", "D*-"])
def test_antineutrino_of_the_tau_decay(charm: str) -> None:
    """Spectrum 12 y²(1-y) and full analysing power, 1 + cos, of the antineutrino of the electron.

    Handbook result for muon decay in flight (electron-neutrino flux of a muon storage ring), massless electron.
    """
    sample = Sample("electron", charm, "tau", "e", None if charm == "D-" else "D0 pi+")
    k = angles_of(sample, simulated(sample), "nu_lepton")
    y = 2 * k.visible_energy / MASS["tau"]
    assert stats.kstest(y, lambda y: 4 * y**3 - 3 * y**4).pvalue > UNLIKELY
    spin = polarisation(sample)
    cosine = k.visible_x * spin[0] + k.visible_y * spin[1] + k.visible_z * spin[2]
    size = np.sqrt(np.sum(spin**2, axis=0))
    np.testing.assert_allclose(size, 1.0, rtol=1e-12)
    assert stats.kstest(cosine, lambda c: (c + 1 + (c * c - 1) / 2) / 2).pvalue > UNLIKELY


@pytest.mark.parametrize("charm", ["D1(2420)-", "D2*(2460)-", "D0*(2300)-", "D1'(2430)-"])
def test_excited_states(charm: str) -> None:
    """Asymmetry and tau polarisation from the angles of the momenta, against the integrals of test_rates.py."""
    decay = gen.Decay("B0", charm, "tau")
    events = gen.simulate(decay, EVENTS, SEED, tau_to="pi")
    a = decay_angles(*(four(events, name) for name in ("B", "Dss", "tau")), None, four(events, "lepton"))
    expected = gen.observables(decay)
    check_mean(np.sign(a.cos_theta), expected.forward_backward)
    check_mean(a.visible_z, expected.tau_polarisation / 3)
    check_mean(a.q2, expected.mean_q2)


def test_other_rows_are_left_alone() -> None:
    block = np.full(ROWS * LANES, 7.0)
    for charm, wilson in (("D-", None), ("D*-", {"T": 0.1j}), ("D2*(2460)-", None)):
        for chain in chains_of(gen.Decay("B0", charm, "tau", wilson=wilson), ("mu", "pi")):
            draw_decays(block, channel_table(chain), stream_key(SEED), np.uint64(0))
    assert (block[SCRATCH_END * LANES :] == 7.0).all()


@pytest.mark.skipif(platform.machine() not in ("x86_64", "AMD64"), reason="looks for x86 instructions")
@pytest.mark.parametrize(
    "name", ["_draw_angles", "_draw_angles_complex", "_draw_tensor_angles", "_polarise", "_draw_visible"]
)
def test_kernels_vectorise(name: str) -> None:
    """Far more packed than scalar multiplications: a branch or a call in a lane loop would turn this round."""
    function = getattr(truth, name).py_func
    compiled = njit(nogil=True, error_model="numpy")(function)
    tensor = gen.Decay("B0", "D2*(2460)-", "tau")
    for decay in (tensor,) if "tensor" in name else (SAMPLES[0].decay, SAMPLES[5].decay):
        table = channel_table(next(chains_of(decay, ("mu",))))
        arguments = [new_block(), table, stream_key(1), np.uint64(0)]
        compiled(*(arguments if "draw" in name else arguments[:2]))
    assembly = "".join(compiled.inspect_asm().values())
    packed = sum(assembly.count(word) for word in ("mulpd", "fmadd132pd", "fmadd213pd", "fmadd231pd"))
    assert packed > 20 * assembly.count("mulsd")
