"""tau -> rho nu and a1 nu: spin against Dirac matrices, every distribution against quadrature, published line shapes.

Statistical tests ask for p > 1e-5 with a seed that SEMITAU_TEST_SEED replaces: below 2e-4 for the file.
"""

from __future__ import annotations

import os
from functools import cache

import awkward as ak
import numpy as np
import pytest
from particle import Particle
from scipy import integrate, stats
from semitau import gen
from semitau.gen.truth import hadronic_currents
from semitau.gen.truth.polarimeter import PARTNERS, polarimeter

from . import dirac

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5
PARTS = ("px", "py", "pz", "E")
TAU, PION, NEUTRAL = (float(Particle.from_name(name).mass) / 1000 for name in ("tau-", "pi-", "pi0"))
HADRONIC = ("rho", "a1", "a1_1prong")


@cache
def events(tau_to: str, n: int = 100_000) -> ak.Array:
    return gen.simulate(gen.Decay("B0", "D*-", "tau"), n, SEED, tau_to=tau_to, charm_to="D0 pi-")


def vectors(sample: ak.Array, *names: str) -> list[np.ndarray]:
    return [np.stack([ak.to_numpy(sample[name][part]) for part in PARTS]) for name in names]


def square(momentum: np.ndarray) -> np.ndarray:
    return np.asarray(momentum[3] ** 2 - np.sum(momentum[:3] ** 2, axis=0))


def at_rest(momentum: np.ndarray, frame: np.ndarray) -> np.ndarray:
    """Boosted into the rest frame of `frame`: E' = p.P / M, and p' = p - P (E + E') / (E_P + M)."""
    mass = np.sqrt(square(frame))
    energy = (frame[3] * momentum[3] - np.sum(frame[:3] * momentum[:3], axis=0)) / mass
    return np.concatenate([momentum[:3] - frame[:3] * (momentum[3] + energy) / (frame[3] + mass), energy[None]])


def cosine(a: np.ndarray, b: np.ndarray) -> np.ndarray:
    dot = np.sum(a[:3] * b[:3], axis=0)
    return np.asarray(dot / np.sqrt(np.sum(a[:3] ** 2, axis=0) * np.sum(b[:3] ** 2, axis=0)))


# --- a second way to everything: breakup momenta and resonances in the words of the paper ----------------------------


def breakup(mass: float, one: float, other: float) -> float:
    return np.sqrt(max((mass**2 - (one + other) ** 2) * (mass**2 - (one - other) ** 2), 0.0)) / (2 * mass)


def form_factor(s: float) -> complex:
    """Z. Phys. C 48 (1990) 445, eqs. for BW and F; rho' included with beta = -0.145 (from memory)."""
    total = 0.0 + 0.0j
    for mass, width, share in ((0.773, 0.145, 1.0), (1.370, 0.510, -0.145)):
        running = width * mass**2 / s * (breakup(np.sqrt(s), PION, PION) / breakup(mass, PION, PION)) ** 3
        total += share * mass**2 / (mass**2 - s - 1j * np.sqrt(s) * running)
    return total / (1 - 0.145)


def pair_density(s: float) -> float:
    """Phase space (1 - s/m²) k/sqrt(s), times k² |F|² (1 - s/m²) (m² + 2 s) / s for the spin-summed tau."""
    k = breakup(np.sqrt(s), PION, NEUTRAL)
    return float((1 - s / TAU**2) ** 2 * k**3 / np.sqrt(s) * (TAU**2 + 2 * s) / s * abs(form_factor(s)) ** 2)


def test_form_factor() -> None:
    s = np.linspace(0.08, 3.1, 50)
    np.testing.assert_allclose(hadronic_currents.form_factors(s), [form_factor(float(v)) for v in s], rtol=1e-5)


@pytest.mark.parametrize("tau_to", HADRONIC)
def test_polarimeter_against_dirac_matrices(tau_to: str) -> None:
    """ubar(nu) Jslash P_L u(tau), squared by traces with the spin projector of the tau along each axis.

    Three pions: the imaginary part of the current decides on the sign of the term with epsilon.
    """
    sample = events(tau_to)[:40]
    names = ["lepton", *PARTNERS[tau_to]]
    if tau_to == "a1_1prong":
        names = [*names[1:], names[0]]
    tau, *pions = vectors(sample, "tau", *names)
    found = polarimeter(tau, tuple(pions))
    resting = at_rest(found, tau)
    direction = resting[:3] / resting[3]
    for i in range(40):
        p, *q = (np.roll(vector[:, i], 1) for vector in (tau, *pions))
        total = np.sum(q, axis=0)
        if len(q) == 2:
            current = (q[0] - q[1]).astype(complex)
        else:
            s1, s2 = (float(dirac.dot(q[k] + q[2], q[k] + q[2]).real) for k in (1, 0))
            current = form_factor(s2) * (q[0] - q[2]) + form_factor(s1) * (q[1] - q[2])
        current = current - total * dirac.dot(total, current) / dirac.dot(total, total)
        vertex = dirac.slash(current) @ dirac.LEFT
        tau_spin = dirac.slash(p) + TAU * dirac.ONE

        for axis in np.eye(3):
            spin = dirac.GAMMA5 @ dirac.slash(dirac.boost(np.concatenate([[0.0], axis]), p))
            up, down = (
                np.trace(
                    dirac.slash(p - total) @ vertex @ tau_spin @ (dirac.ONE + sign * spin) @ dirac.bar(vertex)
                ).real
                for sign in (1, -1)
            )
            assert (up - down) / (up + down) == pytest.approx(direction[:, i] @ axis, abs=1e-4)


@pytest.mark.parametrize("tau_to", ["a1", "a1_1prong"])
def test_neutrino_above_or_below_the_plane_of_the_pions(tau_to: str) -> None:
    """Parity violation: with w(u) = |M|² by Dirac traces, r = (w(u) - w(-u)) / (w(u) + w(-u)), mean(r) = mean(r²)."""
    sample = events(tau_to)[:3000]
    names = ["lepton", *PARTNERS[tau_to]]
    if tau_to == "a1_1prong":
        names = [*names[1:], names[0]]
    tau, *pions = vectors(sample, "tau", *names)
    hadrons = np.sum(pions, axis=0)
    ratios = []
    for i in range(3000):
        q = [np.roll(at_rest(pion[:, i : i + 1], hadrons[:, i : i + 1])[:, 0], 1) for pion in pions]
        nu = np.roll(at_rest((tau - hadrons)[:, i : i + 1], hadrons[:, i : i + 1])[:, 0], 1)
        total = np.sum(q, axis=0)
        s1, s2 = (float(dirac.dot(q[k] + q[2], q[k] + q[2]).real) for k in (1, 0))
        current = form_factor(s2) * (q[0] - q[2]) + form_factor(s1) * (q[1] - q[2])
        current[0] = 0.0  # transverse to the pions' momentum, which is at rest
        vertex = dirac.slash(current) @ dirac.LEFT
        w = [
            np.trace(dirac.slash(n) @ vertex @ (dirac.slash(total + n) + TAU * dirac.ONE) @ dirac.bar(vertex)).real
            for n in (nu, nu * np.array([1.0, -1.0, -1.0, -1.0]))
        ]
        ratios.append((w[0] - w[1]) / (w[0] + w[1]))
    r = np.array(ratios)
    difference = r - r**2
    assert np.mean(r**2) > 4 * np.std(r) / np.sqrt(r.size)  # enough of it to see the sign
    assert 2 * stats.norm.sf(abs(difference.mean()) / (difference.std() / np.sqrt(r.size))) > UNLIKELY


@pytest.mark.parametrize("tau_to", HADRONIC)
def test_a_full_state_analyses_with_power_one(tau_to: str) -> None:
    """Light-like Pi; and weights of the couplings have the ratio of widths as mean, which needs the drawn spin."""
    sample = events(tau_to)
    decay = gen.Decay("B0", "D*-", "tau")
    assert np.all(gen.weights(sample, decay) == 1.0)
    changed = gen.Decay("B0", "D*-", "tau", wilson={"T": 0.08 + 0.03j, "SR": 0.3j})
    weights = gen.weights(sample, changed)
    expected = gen.observables(changed).rate / gen.observables(decay).rate
    pull = (weights.mean() - expected) / (weights.std() / np.sqrt(weights.size))
    assert 2 * stats.norm.sf(abs(pull)) > UNLIKELY
    # and a weighted sample is one drawn with these couplings: energy of the first pion in the B frame
    direct = gen.simulate(changed, 100_000, SEED + 1, tau_to=tau_to, charm_to="D0 pi-")
    energy = ak.to_numpy(sample.lepton.E)
    edges = np.quantile(energy, np.linspace(0.01, 0.99, 13))
    drawn = np.histogram(ak.to_numpy(direct.lepton.E), edges)[0]
    weighted = np.histogram(energy, edges, weights=weights / expected)[0]
    variance = np.histogram(energy, edges, weights=(weights / expected) ** 2)[0]
    chi2 = np.sum((drawn - weighted) ** 2 / (drawn + variance))
    assert stats.chi2.sf(chi2, len(drawn)) > UNLIKELY


def test_rho_line_shape() -> None:
    charged, neutral = vectors(events("rho"), "lepton", "pi0")
    s = square(charged + neutral)
    grid = np.linspace((PION + NEUTRAL) ** 2, TAU**2, 4001)
    density = [pair_density(float(v)) for v in grid]
    cumulative = integrate.cumulative_simpson(density, x=grid, initial=0.0)
    assert stats.kstest(s, lambda v: np.interp(v, grid, cumulative / cumulative[-1])).pvalue > UNLIKELY


def test_rho_decay_angle() -> None:
    """Helicity 0 and -1 of the rho come as m² : 2 s, so the pion has sin² + (m²/s) cos² to the neutrino's direction."""
    tau, charged, neutral = vectors(events("rho"), "tau", "lepton", "pi0")
    hadrons = charged + neutral
    c = cosine(at_rest(charged, hadrons), at_rest(tau, hadrons))
    r = TAU**2 / square(hadrons)
    # cumulative of 1 + (r - 1) c², each event at its own s
    probability = (c + 1 + (r - 1) * (c**3 + 1) / 3) / (2 + 2 * (r - 1) / 3)
    assert stats.kstest(probability, "uniform").pvalue > UNLIKELY


def mean_power(low: float, density: object, at: object) -> float:
    top = integrate.quad(lambda s: density(s) * at(s), low, TAU**2, limit=400)[0]  # type: ignore[operator]
    return float(top / integrate.quad(density, low, TAU**2, limit=400)[0])  # type: ignore[arg-type]


def power_of_vector(s: float) -> float:
    """Analysing power of the direction of a vector of squared mass s (Phys. Rev. D 4 (1971) 2821)."""
    return (TAU**2 - 2 * s) / (TAU**2 + 2 * s)


def test_rho_analysing_power() -> None:
    """0.46 at the mass of the rho (handbook value, from memory); in events the mean projection is power * P / 3."""
    assert power_of_vector(0.775**2) == pytest.approx(0.45, abs=0.01)
    power = mean_power((PION + NEUTRAL) ** 2, pair_density, power_of_vector)
    check_direction("rho", ("lepton", "pi0"), power)


@pytest.mark.parametrize("tau_to", ["a1", "a1_1prong"])
def test_a1_analysing_power(tau_to: str) -> None:
    """Same formula, integrated over the events' own line shape (which has a test of its own)."""
    names = ("lepton", *PARTNERS[tau_to])
    s = square(np.sum(vectors(events(tau_to), *names), axis=0))
    check_direction(tau_to, names, float(np.mean(power_of_vector(s))))


def check_direction(tau_to: str, names: tuple[str, ...], power: float) -> None:
    """cos to the tau's direction in the W* frame has the mean power * P_tau / 3."""
    B, charm, tau, *pions = vectors(events(tau_to), "B", "Dst", "tau", *names)
    boson = B - charm
    hadrons = at_rest(at_rest(np.sum(pions, axis=0), boson), at_rest(tau, boson))
    c = cosine(hadrons, at_rest(tau, boson))
    expected = power * gen.observables(gen.Decay("B0", "D*-", "tau")).tau_polarisation / 3
    assert 2 * stats.norm.sf(abs(c.mean() - expected) / (c.std() / np.sqrt(c.size))) > UNLIKELY


def test_single_pion_spectrum() -> None:
    """tau -> pi nu in the helicity frame: 1 + P cos, so the mean is P / 3 (closed form)."""
    B, charm, tau, pion = vectors(events("pi"), "B", "Dst", "tau", "lepton")
    boson = B - charm
    c = cosine(at_rest(at_rest(pion, boson), at_rest(tau, boson)), at_rest(tau, boson))
    polarisation = gen.observables(gen.Decay("B0", "D*-", "tau")).tau_polarisation
    assert stats.kstest(c, lambda v: (v + 1) / 2 + polarisation * (v**2 - 1) / 4).pvalue > UNLIKELY


def published_running(s: np.ndarray) -> np.ndarray:
    """Running of the a1 width, parametrised in Z. Phys. C 48 (1990) 445, eq. (3.16) (from memory); GeV²."""
    x = s - 9 * PION**2
    low = 4.1 * x**3 * (1 - 3.3 * x + 5.8 * x**2)
    high = s * (1.623 + 10.38 / s - 9.32 / s**2 + 0.65 / s**3)
    return np.where(s < (0.773 + PION) ** 2, low, high)


def test_a1_width_against_the_published_parametrisation() -> None:
    """Below 0.6 GeV² the published polynomial is 3% to 10% off any integral of the current it describes."""
    s = np.linspace(0.6, 3.0, 40)
    ours = hadronic_currents.triple_width(s, PION, PION) / published_running(s)
    np.testing.assert_allclose(ours / ours[20], 1.0, atol=0.02)


def test_a1_line_shape() -> None:
    """Published width in the resonance, and in phase space: the whole spectrum without any integral of ours.

    Where the polynomial is off (below 0.6 GeV²: a thousandth of the decays) the cumulative hardly notices: KS with
    20 000 events. The mass peaks near 1.1 GeV, below the a1's 1.251 (Z. Phys. C 48 (1990) 445, from memory).
    """
    s = square(np.sum(vectors(events("a1")[:20_000], "lepton", "pi_second", "pi_odd"), axis=0))
    grid = np.linspace(9 * PION**2 + 1e-6, TAU**2, 4001)
    g, peak = published_running(grid), published_running(np.array(1.251**2))
    resonance = 1.251**4 / ((1.251**2 - grid) ** 2 + (1.251 * 0.599 * g / peak) ** 2)
    density = (TAU**2 - grid) ** 2 * (TAU**2 + 2 * grid) / grid * g * resonance
    cumulative = integrate.cumulative_simpson(density, x=grid, initial=0.0)
    assert stats.kstest(s, lambda v: np.interp(v, grid, cumulative / cumulative[-1])).pvalue > UNLIKELY
    counts, edges = np.histogram(np.sqrt(s), 30, (0.5, 1.75))
    assert 1.0 < edges[np.argmax(counts)] < 1.25


@pytest.mark.parametrize("tau_to", ["a1", "a1_1prong"])
def test_dalitz_plot(tau_to: str) -> None:
    """Pair masses against weights |J|² on flat phase space, J written as a four-vector; both like pions alike."""
    names = ("lepton", *PARTNERS[tau_to])
    if tau_to == "a1_1prong":
        names = (*names[1:], names[0])
    first, second, odd = vectors(events(tau_to), *names)
    Q2, s1, s2 = square(first + second + odd), square(second + odd), square(first + odd)
    assert stats.ks_2samp(s1, s2).pvalue > UNLIKELY
    like, unlike = (NEUTRAL, PION) if tau_to == "a1_1prong" else (PION, PION)
    random = np.random.default_rng(SEED)
    low, high = (like + unlike) ** 2, (np.sqrt(Q2) - like) ** 2
    t1, t2 = (low + (high - low) * random.random(Q2.size) for _ in range(2))
    # (q_i - q_j).(q_k - q_l) from q_i.q_j, all of which follow from the pair masses
    t3 = Q2 + 2 * like**2 + unlike**2 - t1 - t2
    d12, d13, d23 = (t3 - 2 * like**2) / 2, (t2 - like**2 - unlike**2) / 2, (t1 - like**2 - unlike**2) / 2
    v1 = (like**2 + d12 + d13) - (unlike**2 + d13 + d23)  # Q.(q1 - q3)
    v2 = (like**2 + d12 + d23) - (unlike**2 + d13 + d23)
    aa, bb = like**2 + unlike**2 - 2 * d13 - v1**2 / Q2, like**2 + unlike**2 - 2 * d23 - v2**2 / Q2
    ab = d12 - d13 - d23 + unlike**2 - v1 * v2 / Q2
    f1, f2 = hadronic_currents.form_factors(t1), hadronic_currents.form_factors(t2)
    weight = -(np.abs(f2) ** 2 * aa + np.abs(f1) ** 2 * bb + 2 * (f1 * f2.conj()).real * ab)
    e1, e2 = (Q2 + like**2 - t1) / 2 / np.sqrt(Q2), (Q2 + like**2 - t2) / 2 / np.sqrt(Q2)
    p1, p2 = e1**2 - like**2, e2**2 - like**2
    p3 = (np.sqrt(Q2) - e1 - e2) ** 2 - unlike**2
    inside = (p1 > 0) & (p2 > 0) & (4 * p1 * p2 > (p3 - p1 - p2) ** 2)
    # at each event's own Q² the flat points stand for the drawn one once divided by their mean in slices of Q²
    edges = np.quantile(Q2, np.linspace(0, 1, 41))
    slices = np.clip(np.digitize(Q2, edges) - 1, 0, 39)
    weight = np.where(inside, weight * (high - low) ** 2, 0.0)
    weight /= (np.bincount(slices, weight, 40) / np.bincount(slices, minlength=40))[slices]
    bins = np.linspace(0.1, 2.4, 16)
    drawn = np.histogram(s1, bins)[0]
    expected, variance = np.histogram(t1, bins, weights=weight)[0], np.histogram(t1, bins, weights=weight**2)[0]
    kept = drawn > 25
    chi2 = np.sum((drawn - expected)[kept] ** 2 / (drawn + variance)[kept])
    assert stats.chi2.sf(chi2, kept.sum()) > UNLIKELY


@pytest.mark.parametrize("like", [PION, NEUTRAL])
def test_bound_of_the_dalitz_plot(like: float) -> None:
    """Rejection is exact only below the bound: |J|² at random places never passes it."""
    random = np.random.default_rng(SEED)
    low, high = hadronic_currents.triple_range(like, PION)
    position = random.random(400_000)
    Q2 = low + (high - low) * position
    least, most = (like + PION) ** 2, (np.sqrt(Q2) - like) ** 2
    s2 = least + (most - least) * random.random(Q2.size)
    first, last = hadronic_currents.dalitz_range(Q2, s2, like, PION)
    s1 = first + (last - first) * random.random(Q2.size)
    bound = hadronic_currents.triple_bounds(like, PION)[(position * hadronic_currents.LINE_INTERVALS).astype(int)]
    assert np.all(hadronic_currents.current2(Q2, s1, s2, like, PION) < bound)


@pytest.mark.parametrize("tau_to", HADRONIC)
def test_conservation_and_mass_shells(tau_to: str) -> None:
    names = ("lepton", *PARTNERS[tau_to])
    tau, nu, *pions = vectors(events(tau_to), "tau", "nu_tau", *names)
    np.testing.assert_allclose(nu + np.sum(pions, axis=0), tau, atol=1e-9)
    np.testing.assert_allclose(square(nu), 0.0, atol=1e-9)
    for name, pion in zip(names, pions, strict=True):
        np.testing.assert_allclose(square(pion), (NEUTRAL if "pi0" in name else PION) ** 2, atol=1e-6)
