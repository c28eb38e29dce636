"""The response kernels one by one against closed forms, `numpy.interp`, `vector`, and quadrature.

Statistical tests use a fixed seed that SEMITAU_TEST_SEED replaces. Each comparison allows five standard deviations or a
Kolmogorov-Smirnov p-value of 1e-6: with about forty comparisons a fresh seed fails somewhere with a chance below 1e-4.
"""

from __future__ import annotations

import os

import numpy as np
import pytest
import vector
from scipy import integrate, stats
from semitau.core.constants import MASS
from semitau.gen import block as row
from semitau.gen.block import LANES, new_block
from semitau.gen.response import detector as kinds
from semitau.gen.response.charm_decay import LAB_D, decay_to_three, decay_to_two, pair_mass_quantiles
from semitau.gen.response.collider import draw_pair, to_laboratory
from semitau.gen.response.compaction import move
from semitau.gen.response.efficiency import constant, evaluate, piecewise_linear, scaled
from semitau.gen.response.finding import (
    CHARM_SEEN,
    IDENTIFIED,
    LEPTON_SEEN_TOO,
    identify_lepton,
    list_found,
    see_charm,
    see_lepton,
)
from semitau.gen.response.measuring import (
    add_noise,
    draw_random_soft,
    measure_charm,
    measure_lepton,
    measure_pion,
    measure_soft,
    measure_tag,
)

from .blocks import at_rest, four, isotropic, keys, put, values

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
BLOCKS = 80
UNLIKELY = 1e-6
SIGMAS = 5.0

BEAMS = kinds.beams(8.0, 3.4981, 0.0027)
FULL = (-1.0, 1.0)
TRACKS = kinds.Tracks(0.0015, 0.003, 0.0012, *FULL, 0.0, constant(1.0))
PHOTONS = kinds.Photons(0.018, 0.012, 0.008, *FULL)
CURVE = ([0.3, 0.5, 0.8, 1.2, 2.0], [0.4, 0.75, 0.9, 0.93, 0.94])


def expect_mean(sample: np.ndarray, mean: float) -> None:
    assert abs(sample.mean() - mean) < SIGMAS * sample.std() / np.sqrt(sample.size)


def expect_width(sample: np.ndarray, width: float) -> None:
    """Of a Gaussian sample with known mean 0: its mean square has relative error sqrt(2/n)."""
    assert abs((sample**2).mean() / width**2 - 1.0) < SIGMAS * np.sqrt(2.0 / sample.size)


def expect_share(passed: np.ndarray, chances: np.ndarray | float) -> None:
    """Sum of independent yes-or-no outcomes against their chances."""
    chances = np.broadcast_to(chances, passed.shape)
    spread = np.sqrt((chances * (1.0 - chances)).sum())
    assert abs(passed.sum() - chances.sum()) <= SIGMAS * spread + 1e-9


def lab_vector(p: np.ndarray) -> vector.MomentumNumpy4D:
    return vector.array({"px": p[0], "py": p[1], "pz": p[2], "E": p[3]})


# --- efficiencies ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("curve", [CURVE, ([0.5], [0.3]), ([0.0, 1.0, 1.0001], [0.0, 1.0, 0.2])])
def test_efficiency_is_numpy_interp(curve: tuple[list[float], list[float]]) -> None:
    """Hinges against the library's interpolation, beyond both ends as well."""
    momentum = np.linspace(-0.5, 3.0, 3001)
    out = np.empty_like(momentum)
    evaluate(piecewise_linear(*curve), momentum, out)
    np.testing.assert_allclose(out, np.interp(momentum, *curve), atol=1e-11)
    evaluate(scaled(piecewise_linear(*curve), 0.7), momentum, out)
    np.testing.assert_allclose(out, 0.7 * np.interp(momentum, *curve), atol=1e-11)


# --- production and boosts ------------------------------------------------------------------------------------------


def test_beams_give_the_collision_energy() -> None:
    """s = 4 E1 E2 for massless head-on beams; the boost of the scenario is βγ = (E1 − E2)/√s."""
    assert pytest.approx(np.sqrt(4 * 8.0 * 3.4981), rel=1e-14) == BEAMS.energy
    assert pytest.approx((8.0 - 3.4981) / BEAMS.energy, rel=1e-13) == BEAMS.beta * BEAMS.gamma


def test_pair_flies_with_sine_squared() -> None:
    """(3/4)(1 − c²) has the distribution function (2 + 3c − c³)/4; the momentum follows from the collision energy."""
    x, cosines, momenta = new_block(), [], []
    for k in range(BLOCKS):
        draw_pair(x, keys(SEED, k), BEAMS, MASS["B0"])
        u = values(x, row.BOOST_X, row.BOOST_Y, row.BOOST_Z)
        p = np.sqrt((u**2).sum(axis=0))
        np.testing.assert_allclose(values(x, row.BOOST_GAMMA), np.sqrt(1.0 + p**2), rtol=1e-14)
        cosines.append(u[2] / p)
        momenta.append(p * MASS["B0"])
    assert stats.kstest(np.concatenate(cosines), lambda c: (2 + 3 * c - c**3) / 4).pvalue > UNLIKELY
    energies = 2.0 * np.sqrt(np.concatenate(momenta) ** 2 + MASS["B0"] ** 2)
    assert stats.kstest(energies, stats.norm(BEAMS.energy, BEAMS.spread).cdf).pvalue > UNLIKELY


def test_boosts_agree_with_vector() -> None:
    """The library boosts by velocities, one after the other."""
    x = new_block()
    draw_pair(x, keys(SEED, 0), BEAMS, MASS["B+"])
    p = isotropic(np.random.default_rng(SEED), np.linspace(0.01, 2.3, LANES), MASS["D0"])
    put(x, row.D_PX, p)
    to_laboratory(x, row.D_PX, LAB_D, BEAMS)
    gamma = values(x, row.BOOST_GAMMA)
    beta = values(x, row.BOOST_X, row.BOOST_Y, row.BOOST_Z) / gamma
    in_cm = lab_vector(p).boost_beta3(vector.array({"px": beta[0], "py": beta[1], "pz": beta[2]}))
    in_lab = in_cm.boostZ(beta=BEAMS.beta)
    expected = [in_lab.px, in_lab.py, in_lab.pz, in_lab.E]
    np.testing.assert_allclose(four(x, LAB_D), expected, rtol=1e-12, atol=1e-12)


# --- decays of the D ------------------------------------------------------------------------------------------------


def with_flying_d(mass: float) -> np.ndarray:
    x = at_rest()
    put(x, LAB_D, isotropic(np.random.default_rng(SEED), np.linspace(0.1, 3.0, LANES), mass))
    return x


def tracks_of(x: np.ndarray, k: int, mass: float) -> vector.MomentumNumpy4D:
    first = (row.TRACK1_PX, row.TRACK2_PX, row.TRACK3_PX)[k]
    p = values(x, first, first + LANES, first + 2 * LANES)
    return vector.array({"px": p[0], "py": p[1], "pz": p[2], "mass": np.full(LANES, mass)})


def test_two_body_decay() -> None:
    """Momentum 861 MeV in the D0 frame (particle data tables), isotropic, D momentum and mass conserved."""
    x, cosines = with_flying_d(MASS["D0"]), []
    d = lab_vector(four(x, LAB_D))
    for k in range(BLOCKS):
        decay_to_two(x, keys(SEED, k), MASS["D0"])
        kaon, pion = tracks_of(x, 0, MASS["K+"]), tracks_of(x, 1, MASS["pi+"])
        total = kaon + pion
        np.testing.assert_allclose(total.mass, MASS["D0"], rtol=1e-12)
        np.testing.assert_allclose([total.px, total.py, total.pz], [d.px, d.py, d.pz], atol=1e-12)
        in_rest = kaon.boostCM_of(d)
        np.testing.assert_allclose(in_rest.p, 0.861, atol=5e-4)
        cosines.append(in_rest.pz / in_rest.p)
    assert stats.kstest(np.concatenate(cosines), stats.uniform(-1, 2).cdf).pvalue > UNLIKELY


def dalitz_width(s: float, parent: float, first: float, second: float, third: float) -> float:
    """Range of m²(second, third) at m²(first, second) = s (particle data tables, review of kinematics)."""
    m = np.sqrt(s)
    e2 = (s - first**2 + second**2) / (2 * m)
    e3 = (parent**2 - s - third**2) / (2 * m)
    p2, p3 = np.sqrt(max(e2**2 - second**2, 0.0)), np.sqrt(max(e3**2 - third**2, 0.0))
    return float(4.0 * p2 * p3)


@pytest.mark.parametrize(("first", "second"), [(1, 2), (0, 1), (0, 2)])
def test_three_body_decay_fills_the_dalitz_plot_evenly(first: int, second: int) -> None:
    """Every projection of the flat Dalitz plot follows the plot's width, which quadrature integrates."""
    masses = [MASS["K+"], MASS["pi+"], MASS["pi+"]]
    third = 3 - first - second
    parent = MASS["D+"]
    x, quantiles = with_flying_d(parent), pair_mass_quantiles(parent)
    d, squares = lab_vector(four(x, LAB_D)), []
    for k in range(BLOCKS):
        decay_to_three(x, keys(SEED, k), parent, quantiles)
        tracks = [tracks_of(x, j, masses[j]) for j in range(3)]
        total = tracks[0] + tracks[1] + tracks[2]
        np.testing.assert_allclose(total.mass, parent, rtol=1e-11)
        np.testing.assert_allclose([total.px, total.py, total.pz], [d.px, d.py, d.pz], atol=1e-11)
        squares.append((tracks[first] + tracks[second]).mass2)
    low, high = (masses[first] + masses[second]) ** 2, (parent - masses[third]) ** 2
    s = np.linspace(low, high, 4001)
    width = np.array([dalitz_width(v, parent, masses[first], masses[second], masses[third]) for v in s])
    cumulative = integrate.cumulative_trapezoid(width, s, initial=0.0)
    found = stats.kstest(np.concatenate(squares), lambda v: np.interp(v, s, cumulative / cumulative[-1]))
    assert found.pvalue > UNLIKELY


# --- acceptance and identification ----------------------------------------------------------------------------------


def test_acceptance_of_isotropic_tracks_with_boost() -> None:
    """Massless leptons of 2 GeV from a B at rest in the centre of mass: cosθ* = (cosθ − β)/(1 − β cosθ) bounds the
    share of the sphere within the laboratory's polar limits, and pt = p* sinθ* cuts both poles."""
    low, high, pt = np.cos(np.deg2rad(150.0)), np.cos(np.deg2rad(17.0)), 0.5
    tracks = TRACKS._replace(cos_min=low, cos_max=high, pt_min=pt, efficiency=constant(0.9))
    generator, seen = np.random.default_rng(SEED), []
    for k in range(BLOCKS):
        x = at_rest()
        put(x, row.LEPTON_PX, isotropic(generator, 2.0, 0.0))
        put(x, CHARM_SEEN, [1.0])
        to_laboratory(x, row.LEPTON_PX, row.LAB_LEPTON_PX, BEAMS)
        see_lepton(x, keys(SEED, k), tracks)
        seen.append(values(x, LEPTON_SEEN_TOO))
    pole = np.sqrt(1.0 - (pt / 2.0) ** 2)
    limits = [np.clip((c - BEAMS.beta) / (1.0 - BEAMS.beta * c), -pole, pole) for c in (low, high)]
    expect_share(np.concatenate(seen), 0.9 * 0.5 * (limits[1] - limits[0]))


@pytest.mark.parametrize("charged", [0, 1])
def test_charm_needs_all_its_tracks(charged: int) -> None:
    """Independent efficiencies multiply: 0.8² or 0.8³; a pt limit between the tracks' values loses all."""
    tracks = TRACKS._replace(efficiency=constant(0.8))
    generator, seen = np.random.default_rng(SEED), []
    for k in range(BLOCKS):
        x = at_rest()
        for first in (row.TRACK1_PX, row.TRACK2_PX, row.TRACK3_PX)[: 2 + charged]:
            put(x, first, isotropic(generator, 1.0, 0.1)[:3])
        see_charm(x, keys(SEED, k), charged, tracks)
        seen.append(values(x, CHARM_SEEN).copy())
    expect_share(np.concatenate(seen), 0.8 ** (2 + charged))
    put(x, row.TRACK1_PX, [0.1, 0.0, 1.0])
    see_charm(x, keys(SEED, 0), charged, tracks._replace(pt_min=0.2))
    assert not values(x, CHARM_SEEN).any()


@pytest.mark.parametrize("muon", [0, 1])
def test_identification_follows_the_curves(muon: int) -> None:
    """Right names by one curve, wrong ones by the other, never both."""
    right, wrong = piecewise_linear(*CURVE), piecewise_linear([0.3, 2.0], [0.05, 0.02])
    none = constant(0.0)
    leptons = kinds.Leptons(none, right, none, wrong) if muon else kinds.Leptons(right, none, wrong, none)
    generator, named, flavour, momenta = np.random.default_rng(SEED), [], [], []
    for k in range(BLOCKS):
        x = at_rest()
        p = isotropic(generator, generator.uniform(0.1, 2.5, LANES), 0.0)
        put(x, row.LAB_LEPTON_PX, p)
        put(x, CHARM_SEEN, [1.0])
        see_lepton(x, keys(SEED, k), TRACKS)
        identify_lepton(x, keys(SEED, k), muon, leptons)
        named.append(values(x, IDENTIFIED) == 1.0)
        flavour.append(values(x, row.FLAVOUR).copy())
        momenta.append(p[3])
    is_named, code, p = np.concatenate(named), np.concatenate(flavour), np.concatenate(momenta)
    expect_share(is_named & (code == muon), np.interp(p, *CURVE))
    expect_share(is_named & (code != muon), np.interp(p, [0.3, 2.0], [0.05, 0.02]))


def test_found_events_are_packed_in_order() -> None:
    """list_found and move against numpy's own selection."""
    x, y = new_block(), new_block()
    chosen = np.random.default_rng(SEED).random(LANES) < 0.4
    put(x, CHARM_SEEN, [np.ones(LANES)])
    put(x, LEPTON_SEEN_TOO, [np.arange(LANES) % 2 == 0])
    put(x, IDENTIFIED, [chosen])
    put(x, row.Q2, [np.arange(LANES) * 0.5])
    put(x, row.FLAVOUR, [np.arange(LANES) * 2.0])
    counts, lanes = np.zeros(3, dtype=np.int64), np.zeros(LANES, dtype=np.uint64)
    found = list_found(x, 200, counts, lanes)
    expected = np.flatnonzero(chosen[:200])
    np.testing.assert_array_equal(lanes[:found], expected)
    np.testing.assert_array_equal(counts, [200, 100, len(expected)])
    number = np.arange(LANES, dtype=np.uint64)
    y_keys, y_number = np.zeros_like(number), np.zeros_like(number)
    move(x, number + np.uint64(7), number, lanes, 3, 20, y, y_keys, y_number, 10)
    np.testing.assert_array_equal(values(y, row.Q2)[10:30], expected[3:23] * 0.5)
    np.testing.assert_array_equal(values(y, row.FLAVOUR)[10:30], expected[3:23] * 2.0)
    np.testing.assert_array_equal(y_number[10:30], expected[3:23])
    np.testing.assert_array_equal(y_keys[10:30], expected[3:23] + 7)
    assert not values(y, row.Q2)[30:].any()


# --- measurement ----------------------------------------------------------------------------------------------------


def test_track_resolution() -> None:
    """Pulls of transverse momentum, polar angle and azimuth are standard normal numbers, independent of each other."""
    generator, pulls = np.random.default_rng(SEED), []
    for k in range(5 * BLOCKS):
        x = at_rest()
        p = isotropic(generator, generator.uniform(0.2, 3.0, LANES), 0.0)
        p = np.where(np.hypot(p[0], p[1]) / p[3] > 0.2, p, np.array([[0.8], [0.6], [1.0], [np.sqrt(2.0)]]))
        put(x, row.LAB_LEPTON_PX, p)
        measure_lepton(x, keys(SEED, k), TRACKS)
        q = values(x, row.MEASURED_LEPTON_PX, row.MEASURED_LEPTON_PY, row.MEASURED_LEPTON_PZ)
        pt = np.hypot(p[0], p[1])
        sigma = np.hypot(0.0015 * pt, 0.003)
        polar = np.arctan2(np.hypot(q[0], q[1]), q[2]) - np.arctan2(pt, p[2])
        turn = np.arctan2(p[0] * q[1] - p[1] * q[0], p[0] * q[0] + p[1] * q[1])
        pulls.append([(np.hypot(q[0], q[1]) / pt - 1.0) / sigma, polar / 0.0012, turn / 0.0012])
    for pull in np.concatenate(pulls, axis=1):
        assert stats.kstest(pull, stats.norm.cdf).pvalue > UNLIKELY
        expect_width(pull, 1.0)
    correlation = np.corrcoef(np.concatenate(pulls, axis=1)) - np.eye(3)
    assert np.abs(correlation).max() < SIGMAS / np.sqrt(5 * BLOCKS * LANES)


def soft_block(generator: np.random.Generator, mass: float) -> tuple[np.ndarray, np.ndarray]:
    """A soft particle of 50 to 400 MeV; its momentum in the laboratory."""
    x = at_rest()
    put(x, row.SOFT_PX, isotropic(generator, generator.uniform(0.05, 0.4, LANES), mass))
    to_laboratory(x, row.SOFT_PX, row.LAB_SOFT_PX, BEAMS)
    return x, four(x, row.LAB_SOFT_PX).copy()


def detector(**changes: object) -> kinds.Detector:
    """A detector with full acceptance and the resolutions above."""
    full = kinds.Detector(
        beams=BEAMS,
        tag=kinds.Tag(0.022, 0.16, 0.12, 0.3),
        tracks=TRACKS,
        photons=PHOTONS,
        leptons=kinds.Leptons(constant(1.0), constant(1.0), constant(0.0), constant(0.0)),
        soft=kinds.SoftParticles(
            piecewise_linear([0.1, 0.5], [0.2, 0.7]),
            piecewise_linear([0.1, 0.5], [0.3, 0.5]),
            piecewise_linear([0.1, 0.5], [0.4, 0.8]),
            0.03,
            0.12,
            0.10,
            0.1351,
            0.18,
        ),
        residual=kinds.Residual(0.35, 0.12, 0.45, 0.7),
    )
    return full._replace(**changes)


def chain(soft: int = kinds.NO_PARTICLE, pion: int = kinds.NO_PARTICLE, charged_d: int = 0) -> kinds.Chain:
    return kinds.Chain(
        MASS["B+"], MASS["D+" if charged_d else "D0"], MASS["D*0"], MASS["D*+"], 1, charged_d, 1, soft, pion
    )


def test_photon_resolution() -> None:
    """Energy: sigma/E = a/√E and b in quadrature; angles 8 mrad."""
    generator, pulls = np.random.default_rng(SEED), []
    for k in range(BLOCKS):
        x, p = soft_block(generator, 0.0)
        measure_soft(x, keys(SEED, k), chain(kinds.PHOTON), detector())
        q = values(x, row.MEASURED_SOFT_PX, row.MEASURED_SOFT_PY, row.MEASURED_SOFT_PZ)
        sigma = np.hypot(0.018 / np.sqrt(p[3]), 0.012)
        polar = np.arctan2(np.hypot(q[0], q[1]), q[2]) - np.arctan2(np.hypot(p[0], p[1]), p[2])
        turn = np.arctan2(p[0] * q[1] - p[1] * q[0], p[0] * q[0] + p[1] * q[1])
        far = np.hypot(p[0], p[1]) / p[3] > 0.2  # near the beam the polar angle folds over
        pulls.append(
            np.array([(np.sqrt((q**2).sum(axis=0)) / p[3] - 1.0) / sigma, polar / 0.008, turn / 0.008])[:, far]
        )
    for pull in np.concatenate(pulls, axis=1):
        assert stats.kstest(pull, stats.norm.cdf).pvalue > UNLIKELY


@pytest.mark.parametrize(
    ("kind", "mass", "curve"),
    [
        (kinds.CHARGED_PION, MASS["pi+"], ([0.1, 0.5], [0.2, 0.7])),
        (kinds.NEUTRAL_PION, MASS["pi0"], ([0.1, 0.5], [0.3, 0.5])),
        (kinds.PHOTON, 0.0, ([0.1, 0.5], [0.4, 0.8])),
    ],
)
def test_soft_particles_are_found_by_their_curves(kind: int, mass: float, curve: tuple[list[float], ...]) -> None:
    """Efficiency at the laboratory momentum, within polar limits; lost neutral ones leave their energy or nothing.

    A lost pion leaves that of either photon: on average 0.7 of what an isotropic decay puts within the limits.
    """
    limit = 0.8
    faulty = detector(
        tracks=TRACKS._replace(cos_max=limit, pt_min=9.0),
        photons=PHOTONS._replace(cos_max=limit),
        residual=kinds.Residual(1.0, 0.12, 0.45, 0.7),
    )
    generator, found, chances, left, lost_energy = np.random.default_rng(SEED), [], [], [], []
    for k in range(BLOCKS):
        x, p = soft_block(generator, mass)
        measure_soft(x, keys(SEED, k), chain(kind), faulty)
        momentum = np.sqrt((p[:3] ** 2).sum(axis=0))
        inside = p[2] <= limit * momentum
        chance = np.where(inside, np.interp(momentum, *curve), 0.0)
        np.testing.assert_allclose(values(x, row.SOFT_EFFICIENCY), chance, atol=1e-14)
        hit = values(x, row.SOFT_FOUND).copy()
        found.append(hit)
        chances.append(chance)
        left.append(values(x, row.LEFT_OVER).copy())
        lost_energy.append(np.where(hit == 0.0, within(p, limit, generator) if mass else inside * p[3], 0.0))
    expect_share(np.concatenate(found), np.concatenate(chances))
    energy, expected = np.concatenate(left), np.concatenate(lost_energy)
    if kind == kinds.CHARGED_PION:
        assert not energy.any()
    elif kind == kinds.NEUTRAL_PION:
        difference = energy - 0.7 * expected
        assert abs(difference.mean()) < 5.0 * difference.std() / np.sqrt(difference.size)
    else:
        assert np.all((energy == 0.0) | (np.abs(energy - expected) < 1e-12))
        expect_share(energy[expected > 0.0] > 0.0, 0.7)


def within(p: np.ndarray, limit: float, generator: np.random.Generator) -> np.ndarray:
    """Energy of the photons below a cosine, pions of momenta p (4, n) decaying isotropically: own boost, by axes."""
    mass = np.sqrt(p[3] ** 2 - (p[:3] ** 2).sum(axis=0))
    n = generator.normal(size=(3, p.shape[1]))
    n /= np.sqrt((n**2).sum(axis=0))
    size = np.sqrt((p[:3] ** 2).sum(axis=0))
    axis = p[:3] / size
    along = (n * axis).sum(axis=0)
    found = np.zeros(p.shape[1])
    for sign in (1.0, -1.0):
        energy = (p[3] + sign * size * along) / 2
        forward = (size + sign * p[3] * along) / 2
        z = forward * axis[2] + sign * (n - along * axis)[2] * mass / 2
        found += np.where(z <= limit * energy, energy, 0.0)
    return found


def test_photon_beside_a_charged_d_is_lost() -> None:
    x, _ = soft_block(np.random.default_rng(SEED), 0.0)
    measure_soft(x, keys(SEED, 0), chain(kinds.PHOTON, charged_d=1), detector())
    assert not values(x, row.SOFT_FOUND).any()
    assert not values(x, row.SOFT_EFFICIENCY).any()


def test_pion_of_an_excited_charm() -> None:
    """A charged one is seen as a track or not; each photon of a neutral one leaves its energy or not.

    That of one photon is even between (1 - beta)/2 and (1 + beta)/2 of the pion's (textbook kinematics).
    """
    generator, extra, energy = np.random.default_rng(SEED), [], []
    sees = detector(tracks=TRACKS._replace(efficiency=constant(0.6)))
    for k in range(BLOCKS):
        x = at_rest()
        put(x, row.PION_PX, isotropic(generator, 0.4, MASS["pi+"]))
        measure_pion(x, keys(SEED, k), kinds.CHARGED_PION, sees)
        extra.append(values(x, row.EXTRA).copy())
        measure_pion(x, keys(SEED, k), kinds.NEUTRAL_PION, sees)
        assert not values(x, row.EXTRA).any()
        energy.append(values(x, row.LEFT_OVER) / values(x, row.LAB_PION_E))
    expect_share(np.concatenate(extra), 0.6)
    shares = np.concatenate(energy)
    expect_share(shares == 0.0, 0.3**2)
    expect_share(np.abs(shares - 1.0) < 1e-12, 0.7**2)
    beta = 0.4 / np.hypot(0.4, MASS["pi+"])
    one = shares[(shares > 0.0) & (np.abs(shares - 1.0) > 1e-12)]
    assert stats.kstest(one, stats.uniform((1 - beta) / 2, beta).cdf).pvalue > UNLIKELY


def test_eta_of_a_continuum() -> None:
    """Particle data tables (from memory): 39.4% two photons, 32.6% six, 23.0% and 4.3% with two tracks.

    No energy: both photons lost (0.3²), all six (0.3⁶), two and one beside tracks that are not seen. A track of the
    two is seen with the chance 1 - 0.4².
    """
    generator, extra, energy = np.random.default_rng(SEED), [], []
    sees = detector(tracks=TRACKS._replace(efficiency=constant(0.6)))
    for k in range(BLOCKS):
        x = at_rest()
        put(x, row.PION_PX, isotropic(generator, 0.4, MASS["eta"]))
        measure_pion(x, keys(SEED, k), kinds.ETA, sees)
        extra.append(values(x, row.EXTRA).copy())
        energy.append(values(x, row.LEFT_OVER) / values(x, row.LAB_PION_E))
    shares = np.array([0.3936, 0.3257, 0.2302, 0.0428]) / 0.9923
    seen, left = np.concatenate(extra), np.concatenate(energy)
    expect_share(seen, shares[2:].sum() * (1 - 0.4**2))
    nothing = (shares * [0.3**2, 0.3**6, 0.4**2 * 0.3**2, 0.4**2 * 0.3]).sum()
    expect_share((seen == 0.0) & (left == 0.0), nothing)
    expect_share((seen == 0.0) & (np.abs(left - 1.0) < 1e-9), shares[0] * 0.7**2 + shares[1] * 0.7**6)


@pytest.mark.parametrize("charged", [0, 1])
def test_tag(charged: int) -> None:
    """12% wrong tags, 30% of them with the other charge; each component of the momentum with its width."""
    wrong, swapped, shifts, energies = [], [], [], []
    for k in range(BLOCKS):
        x = new_block()
        draw_pair(x, keys(SEED, k), BEAMS, MASS["B+"])
        measure_tag(x, keys(SEED, k), MASS["B+"], charged, kinds.Tag(0.022, 0.16, 0.12, 0.3))
        wrong.append(values(x, row.TAG_WRONG).copy())
        swapped.append(values(x, row.TAG_CHARGED) != charged)
        shifts.append(values(x, row.TAG_SHIFT_X, row.TAG_SHIFT_Y, row.TAG_SHIFT_Z))
        energies.append(values(x, row.BOOST_GAMMA).copy())
        momentum = values(x, row.TAG_PX, row.TAG_PY, row.TAG_PZ)
        expected = MASS["B+"] ** 2 * (values(x, row.BOOST_GAMMA) ** 2 - 1.0)
        np.testing.assert_allclose((momentum**2).sum(axis=0), expected, rtol=1e-9)
    bad, other, shift = np.concatenate(wrong) == 1.0, np.concatenate(swapped), np.concatenate(shifts, axis=1)
    expect_share(bad, 0.12)
    assert not (other & ~bad).any()
    expect_share(other[bad], 0.3)
    for component in shift:
        assert stats.kstest(component[~bad], stats.norm(0, 0.022).cdf).pvalue > UNLIKELY
        assert stats.kstest(component[bad], stats.norm(0, 0.16).cdf).pvalue > UNLIKELY
    # The components do not know each other, nor the collision energy that shares a pair of numbers with one of them.
    together = np.concatenate([shift, [np.concatenate(energies)]])[:, ~bad]
    assert np.abs(np.corrcoef(together) - np.eye(4)).max() < SIGMAS / np.sqrt((~bad).sum())


def test_residual_energy() -> None:
    """35% have none; the rest is exponential; wrong tags add another exponential."""
    energies = {0.0: [], 1.0: []}
    for k in range(BLOCKS):
        x = new_block()
        for wrong in energies:
            put(x, row.TAG_WRONG, [wrong])
            add_noise(x, keys(SEED, k), kinds.Residual(0.35, 0.12, 0.45, 0.7))
            energies[wrong].append(values(x, row.LEFT_OVER).copy())
    right, wrong_tags = (np.concatenate(energies[wrong]) for wrong in (0.0, 1.0))
    expect_share(right == 0.0, 0.35)
    assert stats.kstest(right[right > 0.0], stats.expon(scale=0.12).cdf).pvalue > UNLIKELY
    assert stats.kstest(wrong_tags - right, stats.expon(scale=0.45).cdf).pvalue > UNLIKELY


@pytest.mark.parametrize(
    ("charged_d", "tag", "chances"),
    [(0, 1, {"pi0": 0.12, "gamma": 0.10}), (0, 0, {"pi+": 0.03}), (1, 0, {"pi0": 0.12})],
)
def test_random_soft_candidates(charged_d: int, tag: int, chances: dict[str, float]) -> None:
    """How often, of which kind, evenly over the window from the particle's mass on, in all directions."""
    masses, deltas, cosines = [], [], []
    for k in range(BLOCKS):
        x = new_block()
        put(x, row.TAG_CHARGED, [float(tag)])
        draw_random_soft(x, keys(SEED, k), charged_d, detector().soft)
        masses.append(values(x, row.RANDOM_MASS).copy())
        deltas.append(values(x, row.RANDOM_DELTA_M).copy())
        cosines.append(values(x, row.RANDOM_Z).copy())
    mass, delta = np.concatenate(masses), np.concatenate(deltas)
    expect_share(delta > 0.0, sum(chances.values()))
    for name, chance in chances.items():
        mine = (delta > 0.0) & (mass == MASS[name])
        expect_share(mine, chance)
        low = max(MASS[name], 0.1351)
        assert stats.kstest(delta[mine], stats.uniform(low, 0.18 - low).cdf).pvalue > UNLIKELY
    assert stats.kstest(np.concatenate(cosines), stats.uniform(-1, 2).cdf).pvalue > UNLIKELY


def test_charm_momentum_is_the_sum_of_its_tracks() -> None:
    """With no resolution the sum is exact; with it each track adds its variance."""
    exact = TRACKS._replace(slope=0.0, floor=0.0, angle=0.0)
    generator = np.random.default_rng(SEED)
    pulls = []
    for k in range(BLOCKS):
        x = at_rest()
        p = [isotropic(generator, 1.0, 0.0)[:3] for _ in range(3)]
        for first, momentum in zip((row.TRACK1_PX, row.TRACK2_PX, row.TRACK3_PX), p, strict=True):
            put(x, first, momentum)
        measure_charm(x, keys(SEED, k), 1, exact)
        measured = values(x, row.MEASURED_D_PX, row.MEASURED_D_PY, row.MEASURED_D_PZ)
        np.testing.assert_allclose(measured, sum(p), atol=1e-14)
        measure_charm(x, keys(SEED, k), 1, exact._replace(floor=0.01))
        shift = values(x, row.MEASURED_D_PX) - sum(p)[0]
        pulls.append(shift / (0.01 * np.sqrt(sum(q[0] ** 2 for q in p))))
    expect_width(np.concatenate(pulls), 1.0)
    expect_mean(np.concatenate(pulls), 0.0)
