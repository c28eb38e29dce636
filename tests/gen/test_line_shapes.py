"""Masses of broad charmed states and of pairs of pions: formulas and draws against integrals that share no code.

Kolmogorov-Smirnov tests ask for a p-value above 1e-5, means for 5 standard deviations: a fresh seed
(SEMITAU_TEST_SEED) fails somewhere with a chance below 1e-3.
"""

from __future__ import annotations

import itertools
import os
from collections.abc import Callable
from functools import cache

import awkward as ak
import numpy as np
import pytest
import vector
from particle import Particle
from scipy import integrate, stats
from semitau import gen
from semitau.core.constants import LIFETIME, MASS
from semitau.core.streams import stream_key
from semitau.gen.block import CHARM_MASS, LANES, LIGHT_MASS, new_block
from semitau.gen.decays.chains import chains_of, channels, semileptonic_branching_fraction
from semitau.gen.decays.decay import CHARMS, CONTINUA, charm_name
from semitau.gen.decays.line_shapes import mass_at, mass_density, mass_range
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.variation_weights import variation_table, variation_weights

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5
PION, D, DST = MASS["pi+"], MASS["D+"], MASS["D*+"]

# Particle data tables, D0*(2300) and D1'(2430): mass, width (MeV), daughter in the heaviest charge state.
RESONANCES = {"D0*(2300)": (10421, D), "D1'(2430)": (20423, DST)}


def momentum(m: float | np.ndarray, a: float, b: float | np.ndarray) -> np.ndarray:
    """Breakup momentum from energies: E_a = (m² + a² - b²)/2m."""
    energy = (m * m + a * a - b * b) / (2 * m)
    return np.sqrt(np.maximum(energy * energy - a * a, 0.0))


def breit_wigner(family: str, m: np.ndarray) -> np.ndarray:
    """d/dm of the relativistic Breit-Wigner (particle data tables, review of resonances), S wave, unnormalised:

    Im of the propagator 1/(m0² - s - i m0 Gamma(s)) over s, times 2m, with m0 Gamma(s) = m0 Gamma0 (p/p0)(m0/m).
    """
    code, daughter = RESONANCES[family]
    m0, width = (Particle.from_pdgid(code).mass / 1e3, Particle.from_pdgid(code).width / 1e3)
    running = m0 * width * momentum(m, daughter, PION) / momentum(m0, daughter, PION) * m0 / m
    return 2 * m * np.imag(1 / (m0**2 - m**2 - 1j * running))


def three_body(m: float) -> float:
    """Volume of flat three-body phase space D pi pi, times m^2: the area of the Dalitz plot over m, by its border.

    Particle data tables, review of kinematics: m23² between (E2* + E3*)² - (sqrt(E2*² - m2²) +- sqrt(E3*² - m3²))².
    """

    points, weights = np.polynomial.legendre.leggauss(200)
    t = (points + 1) / 2
    low, high = 4 * PION**2, (m - D) ** 2
    s12 = low + (high - low) * t * t * (3 - 2 * t)
    m12 = np.sqrt(s12)
    e2, e3 = m12 / 2, (m * m - s12 - D * D) / (2 * m12)  # pions of equal mass
    height = 4 * np.sqrt(np.maximum(e2**2 - PION**2, 0)) * np.sqrt(np.maximum(e3**2 - D * D, 0))
    return float(weights @ (height * 3 * (high - low) * t * (1 - t))) / m


SHAPES: dict[str, Callable[[np.ndarray], np.ndarray]] = {
    "D0*(2300)": lambda m: breit_wigner("D0*(2300)", m),
    "D1'(2430)": lambda m: breit_wigner("D1'(2430)", m),
    "(D* pi)": lambda m: momentum(m, DST, PION) * np.exp(-(m - DST - PION) / 0.5),
    "(D eta)": lambda m: momentum(m, D, MASS["eta"]) * np.exp(-(m - D - MASS["eta"]) / 0.5),
    "(D pi pi)": lambda m: np.array([three_body(float(x)) for x in m]) * np.exp(-(m - D - 2 * PION) / 0.5),
}


def grid(decay: gen.Decay, number: int = 301) -> np.ndarray:
    low, high = mass_range(decay)
    return low + (high - low) * np.linspace(0, 1, number) ** 2


@pytest.mark.parametrize("family", SHAPES)
def test_density(family: str) -> None:
    """Shape from formulas written anew; area 1 from threshold to the parent's mass."""
    decay = gen.Decay("B+", charm_name("B+", family), "e")
    m = grid(decay)[1:]
    ours, expected = mass_density(decay, m), SHAPES[family](m)
    np.testing.assert_allclose(ours / ours.max(), expected / expected.max(), rtol=1e-4, atol=1e-9)
    low = decay.orbital.threshold
    t = np.linspace(0, 1, 4001)
    inside = low + (MASS["B+"] - low) * t * t
    area = integrate.simpson(mass_density(decay, inside) * 2 * (MASS["B+"] - low) * t, x=t)
    assert area == pytest.approx(1.0, abs=2e-6)
    assert mass_density(decay, np.array(low)) == 0.0


@pytest.mark.parametrize("family", RESONANCES)
def test_width_at_half_height(family: str) -> None:
    """The peak lies at the nominal mass less a fraction of the width, about the nominal width apart at half height."""
    decay = gen.Decay("B+", charm_name("B+", family), "e")
    m = np.linspace(*mass_range(decay), 20_001)
    density = mass_density(decay, m)
    above = m[density > density.max() / 2]
    assert m[density.argmax()] == pytest.approx(decay.m_charm, abs=0.35 * decay.orbital.width)
    assert above[-1] - above[0] == pytest.approx(decay.orbital.width, rel=0.25)


@cache
def blocks(charm: str, lepton: str, chain: int, rows: tuple[int, ...], number: int = 300) -> np.ndarray:
    decay = gen.Decay("B+", charm, lepton)
    table = channel_table(list(chains_of(decay, ("mu",)))[chain])
    x, found = new_block(), []
    for block in range(number):
        draw_decays(x, table, stream_key(SEED, "masses"), np.uint64(block * LANES))
        found.append([x[row : row + LANES].copy() for row in rows])
    return np.concatenate(found, axis=1)


@pytest.mark.parametrize("lepton", ["mu", "tau"])
@pytest.mark.parametrize("family", SHAPES)
def test_drawn_masses(family: str, lepton: str) -> None:
    """Line shape times the width at each mass, the latter by quadrature at fixed mass."""
    charm = charm_name("B+", family)
    (masses,) = blocks(charm, lepton, 0, (CHARM_MASS,))
    points = grid(gen.Decay("B+", charm, lepton), 161)
    widths = [gen.observables(gen.Decay("B+", charm, lepton, charm_mass=float(m))).rate for m in points[:-1]]
    cumulated = integrate.cumulative_simpson(SHAPES[family](points) * np.array([*widths, 0.0]), x=points, initial=0.0)
    assert stats.kstest(masses, lambda m: np.interp(m, points, cumulated / cumulated[-1])).pvalue > UNLIKELY


@pytest.mark.parametrize(("charm", "lepton"), [("D0*(2300)0", "mu"), ("D1'(2430)0", "tau"), ("(D* pi pi)0", "e")])
def test_everything_else_follows_the_mass(charm: str, lepton: str) -> None:
    """In slices of the mass q² has the mean and the lepton the asymmetry of a fixed mass; overall those of the sum."""
    vector.register_awkward()
    decay = gen.Decay("B+", charm, lepton)
    events = gen.simulate(decay, 200_000, SEED)
    masses = ak.to_numpy(events.Dss.mass)
    boson = events.B - events.Dss
    q2 = ak.to_numpy(boson.mass2)
    charged = events.tau if lepton == "tau" else events.lepton
    axis = boson.to_3D()
    cosine = ak.to_numpy(charged.boostCM_of(boson).to_3D().deltaangle(axis))
    forward = np.where(cosine < np.pi / 2, 1.0, -1.0)
    whole = gen.observables(decay)
    for found, expected in ((q2, whole.mean_q2), (forward, whole.forward_backward)):
        assert abs(found.mean() - expected) < 5 * found.std() / np.sqrt(len(found))
    edges = np.quantile(masses, np.linspace(0, 1, 9))
    for low, high in itertools.pairwise(edges):
        inside = (masses >= low) & (masses < high)
        # mean over the slice of quantities that are nearly straight in it, at drawn masses
        sample = np.quantile(masses[inside], (np.arange(12) + 0.5) / 12)
        fixed = [gen.observables(gen.Decay("B+", charm, lepton, charm_mass=float(m))) for m in sample]
        for found, name in ((q2[inside], "mean_q2"), (forward[inside], "forward_backward")):
            expected = np.mean([getattr(one, name) for one in fixed])
            # 0.3% of what is between the mass points
            assert abs(found.mean() - expected) < 5 * found.std() / np.sqrt(inside.sum()) + 0.003 * abs(expected)


def pair_distribution(m: float, x: np.ndarray) -> np.ndarray:
    """Distribution of the pair mass in X -> D pi pi by the borders of the Dalitz plot (particle data tables)."""
    s = x * x
    e2, e3 = s / (2 * x), (m * m - s - D * D) / (2 * x)
    height = np.sqrt(np.maximum(e2**2 - PION**2, 0)) * np.sqrt(np.maximum(e3**2 - D * D, 0)) * 2 * x
    cumulated = integrate.cumulative_simpson(height, x=x, initial=0.0)
    return cumulated / cumulated[-1]


def test_pairs_of_pions() -> None:
    """Mass of the two pions in D1(2420)- -> D- pi+ pi-."""
    decay = gen.Decay("B0", "D1(2420)-", "mu")
    (chain,) = [c for c in chains_of(decay, ("mu",)) if (c.bachelor, c.second) == ("charged", "charged")]
    assert chain.ground == "D+"
    x, found = new_block(), []
    table = channel_table(chain)
    for block in range(300):
        draw_decays(x, table, stream_key(SEED, "pairs"), np.uint64(block * LANES))
        found.append(x[LIGHT_MASS : LIGHT_MASS + LANES].copy())
    points = np.linspace(2 * PION, decay.m_charm - D, 4001)
    expected = pair_distribution(decay.m_charm, points)
    assert stats.kstest(np.concatenate(found), lambda m: np.interp(m, points, expected)).pvalue > UNLIKELY


def test_two_body_momenta() -> None:
    """p in D** -> D(*) pi: particle data tables, D1(2420)0 -> D*+ pi- 354 MeV, D2*(2460)0 -> D+ pi- 507, D*+ pi- 391.

    From memory; 4 MeV for other editions of the masses.
    """
    vector.register_awkward()
    known = {("D1(2420)0", "D*+ pi-"): 0.354, ("D2*(2460)0", "D+ pi-"): 0.507, ("D2*(2460)0", "D*+ pi-"): 0.391}
    for (charm, to), expected in known.items():
        events = gen.simulate(gen.Decay("B+", charm, "mu"), 500, SEED, charm_to=to)
        found = ak.to_numpy(events.pion.boostCM_of(events.Dss).p)
        np.testing.assert_allclose(found, expected, atol=0.004)


@pytest.mark.parametrize("parent", ["B+", "B0"])
def test_inclusive_rate(parent: str) -> None:
    """Sum over all families against B -> X_c l nu, (10.65 +- 0.16)% for the mean of B+ and B0, by the lifetimes.

    Eur. Phys. J. C 81 (2021) 226, from memory. The widths of D and D* have |V_cb| with an error of 2%, 4% of the rate.
    """
    total = sum(
        semileptonic_branching_fraction(gen.Decay(parent, charm_name(parent, family), "e")) for family in CHARMS
    )
    mean = 0.1065 * 2 * LIFETIME[parent] / (LIFETIME["B+"] + LIFETIME["B0"])
    assert total == pytest.approx(mean, rel=np.hypot(0.0016 / 0.1065, 0.04 * 0.72))


def test_width_of_a_continuum_is_its_branching_fraction() -> None:
    """The strength of the universal function is made for that; measured branching fractions are the source."""
    for family, state in CONTINUA.items():
        found = gen.observables(gen.Decay("B+", charm_name("B+", family), "e")).branching_fraction
        assert found == pytest.approx(state.light_branching_fraction, rel=1e-4)


def test_continuum_charges() -> None:
    """Isospin: 2/3 charged pions in (D pi); pairs 1/2 +-, 1/3 +-0, 1/6 00; every chain conserves charge."""
    found = channels(["B+", "B0"], CONTINUA, ["mu"])
    for family in CONTINUA:
        chains = [c for c in found if c.family == family and c.parent == "B+"]
        total = sum(c.branching_fraction for c in chains)
        shares: dict[tuple[str, str], float] = {}
        for c in chains:
            shares[c.bachelor, c.second] = shares.get((c.bachelor, c.second), 0.0) + c.branching_fraction / total
        if "eta" in family:
            assert shares == {("eta", "none"): pytest.approx(1.0)}
        elif "pi pi" in family:
            assert shares["charged", "charged"] == pytest.approx(1 / 2)
            assert shares["charged", "neutral"] == pytest.approx(1 / 3)
        else:
            assert shares["charged", "none"] == pytest.approx(2 / 3)
        for c in chains:
            # the B+ has a neutral state: an odd number of charged pions goes with a charged D or D*
            odd = [c.bachelor, c.second].count("charged") % 2
            assert (c.vector or c.ground).endswith("+") == bool(odd)


def test_weights_of_a_line_shape() -> None:
    """Another mass and width of D0*: weights turn one spectrum into the other, from momenta and in the kernel."""
    decay = gen.Decay("B+", "D0*(2300)0", "mu", "IW-2017")
    shifts = {"D0*_mass": 0.02, "D0*_width": 0.05, "zeta_slope": -0.4}
    varied = gen.Decay("B+", "D0*(2300)0", "mu", decay.form_factor_set.shifted(shifts))
    vector.register_awkward()
    events = gen.simulate(decay, 100_000, SEED)
    weights = gen.weights(events, varied)
    expected = gen.observables(varied).rate / gen.observables(decay).rate
    assert weights.mean() == pytest.approx(expected, abs=5 * weights.std() / np.sqrt(len(weights)))
    masses = ak.to_numpy(events.Dss.mass)
    target = ak.to_numpy(gen.simulate(varied, 100_000, SEED + 1).Dss.mass)
    for power in (1, 2):
        mean = np.average(masses**power, weights=weights)
        spread = np.hypot((masses**power * weights).std() / weights.mean(), (target**power).std()) / np.sqrt(1e5)
        assert abs(mean - (target**power).mean()) < 5 * spread

    chain = next(chains_of(decay, ("mu",)))
    table, variation = channel_table(chain), variation_table(chain, [varied], shape_only=True)
    x, out, mass_sum, weight_sum, n = new_block(), np.empty((LANES, 1)), 0.0, [], 300
    for block in range(n):
        draw_decays(x, table, stream_key(SEED, "shape"), np.uint64(block * LANES))
        variation_weights(x, variation, out, LANES)
        weight_sum.append(out[:, 0].copy())
        mass_sum += float(out[:, 0] @ x[CHARM_MASS : CHARM_MASS + LANES])
    shape = np.concatenate(weight_sum)
    assert shape.mean() == pytest.approx(1.0, abs=5 * shape.std() / np.sqrt(shape.size))
    assert mass_sum / shape.sum() == pytest.approx(target.mean(), abs=0.004)


def test_a_fixed_mass_has_no_line_shape() -> None:
    vector.register_awkward()
    events = gen.simulate(gen.Decay("B+", "D0*(2300)0", "mu", charm_mass=2.4), 100, SEED)
    np.testing.assert_allclose(events.Dss.mass, 2.4, rtol=1e-9)
    decay = gen.Decay("B+", "D0*(2300)0", "mu")
    assert float(mass_at(decay, np.array(0.0))) == pytest.approx(D + PION, rel=1e-12)
