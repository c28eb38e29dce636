"""Simulated records: conservation, mass shells, end points, what they are called, who may ask for what.

Masses and branching fractions come from the `particle` package, which is made from the particle data tables.
Statistical tests ask for p > 1e-5 with a seed that SEMITAU_TEST_SEED replaces; below 1e-3 for the file.
"""

from __future__ import annotations

import os
from functools import cache

import awkward as ak
import numpy as np
import pytest
import vector
from particle import Particle
from scipy import stats
from semitau import gen
from semitau.core.constants import BRANCHING_FRACTION
from semitau.core.errors import InputError

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5
PARTS = ("px", "py", "pz", "E")


@cache
def mass(name: str) -> float:
    """GeV, from the `particle` package."""
    return float(Particle.from_name(name).mass) / 1000


def invariant(momentum: ak.Array) -> np.ndarray:
    return np.sqrt(np.maximum(ak.to_numpy(momentum.E**2 - momentum.px**2 - momentum.py**2 - momentum.pz**2), 0.0))


def size(momentum: ak.Array) -> np.ndarray:
    return np.sqrt(ak.to_numpy(momentum.px**2 + momentum.py**2 + momentum.pz**2))


CASES = [
    ("B0", "D-", "tau", "mu", None, ["D", "tau", "lepton", "nu", "nu_tau", "nu_lepton"]),
    ("B+", "D0", "e", "mu", None, ["D", "lepton", "nu"]),
    ("B0", "D*-", "tau", "e", None, ["Dst", "soft", "D", "tau", "lepton", "nu", "nu_tau", "nu_lepton"]),
    ("B+", "D*0", "tau", "pi", "D0 gamma", ["Dst", "soft", "D", "tau", "lepton", "nu", "nu_tau"]),
    ("B+", "D*0", "mu", "mu", "D0 pi0", ["Dst", "soft", "D", "lepton", "nu"]),
    ("B0", "D1(2420)-", "tau", "mu", None,
     ["Dss", "pion", "second_pion", "Dst", "soft", "D", "tau", "lepton", "nu", "nu_tau", "nu_lepton"]),
    ("B+", "(D* pi pi)0", "mu", "mu", None, ["Dss", "pion", "second_pion", "Dst", "soft", "D", "lepton", "nu"]),
    ("B0", "(D pi pi)-", "e", "mu", "D- pi+ pi-", ["Dss", "pion", "second_pion", "D", "lepton", "nu"]),
    ("B+", "D2*(2460)0", "mu", "mu", None, ["Dss", "pion", "Dst", "soft", "D", "lepton", "nu"]),
    ("B+", "D2*(2460)0", "e", "mu", "D+ pi-", ["Dss", "pion", "D", "lepton", "nu"]),
    ("B0", "D0*(2300)-", "e", "mu", None, ["Dss", "pion", "D", "lepton", "nu"]),
]  # fmt: skip


@pytest.mark.parametrize("frame", ["B", "Upsilon"])
@pytest.mark.parametrize(("parent", "charm", "lepton", "tau_to", "charm_to", "fields"), CASES)
def test_conservation_and_mass_shells(
    parent: str, charm: str, lepton: str, tau_to: str, charm_to: str | None, fields: list[str], frame: str
) -> None:
    decay = gen.Decay(parent, charm, lepton)
    events = gen.simulate(decay, 3000, SEED, tau_to=tau_to, charm_to=charm_to, frame=frame)
    assert events.fields == ["B", *fields]
    assert all(events[name].fields == list(PARTS) for name in events.fields)
    assert all(ak.parameters(events[name]).get("__record__") == "Momentum4D" for name in ("B", "D", "lepton"))
    for part in PARTS:

        def total(*names: str, part: str = part) -> np.ndarray:
            return sum(ak.to_numpy(ak.fill_none(events[name][part], 0.0)) for name in names)

        last = [name for name in fields if name not in ("Dss", "Dst", "tau")]
        np.testing.assert_allclose(total(*last), total("B"), atol=1e-9)
        if lepton == "tau":
            neutrinos = [name for name in ("nu_tau", "nu_lepton") if name in fields]
            np.testing.assert_allclose(total("lepton", *neutrinos), total("tau"), atol=1e-9)
    seen = {"e": "e-", "mu": "mu-", "pi": "pi+"}[tau_to if lepton == "tau" else lepton]
    shells = {"B": mass(parent), "lepton": mass(seen), "tau": mass("tau-"), "nu": 0.0, "nu_tau": 0.0, "nu_lepton": 0.0}
    for name, value in shells.items():
        if name in events.fields:
            # rounding of E² - p² grows with E²/m
            np.testing.assert_allclose(invariant(events[name]), value, atol=1e-6, rtol=1e-4)
    for name, allowed in {
        "D": [mass("D0"), mass("D+")],
        "soft": [mass("pi+"), mass("pi0"), 0.0],
        "Dst": [mass("D*(2010)+"), mass("D*(2007)0")],
        "pion": [mass("pi+"), mass("pi0")],
        "second_pion": [mass("pi+"), mass("pi0")],
    }.items():
        if name in events.fields:
            found = invariant(ak.drop_none(events[name]))
            assert np.abs(found[:, None] - np.array(allowed)).min(axis=1).max() < 2e-4
    if "Dss" in fields:
        found = invariant(events.Dss)
        if charm[0] == "(" or charm.startswith("D0*"):  # broad: from D pi to B less lepton
            assert mass("D+") + mass("pi+") <= found.min() < found.max() < mass(parent) - mass("e-")
        else:
            np.testing.assert_allclose(found, decay.m_charm, rtol=1e-9)


def test_works_with_vector() -> None:
    """The record name is that of the `vector` library, whose masses and boosts apply."""
    vector.register_awkward()
    events = gen.simulate(gen.Decay("B0", "D*-", "tau"), 100, SEED)
    np.testing.assert_allclose(events.tau.mass, mass("tau-"), rtol=1e-4)
    resting = events.soft.boostCM_of(events.Dst)
    assert ak.max(resting.p) < 0.14


def test_slow_pion_momentum() -> None:
    """p* = 39 MeV in D*+ -> D0 pi+, 38 MeV in D+ pi0, 136 MeV in D+ gamma (particle data tables, D*(2010)+)."""
    vector.register_awkward()
    for charm_to, expected in (("D0 pi+", 0.039), ("D+ pi0", 0.038), ("D+ gamma", 0.136)):
        events = gen.simulate(gen.Decay("B0", "D*-", "mu"), 200, SEED, charm_to=charm_to)
        momentum = ak.to_numpy(events.soft.boostCM_of(events.Dst).p)
        np.testing.assert_allclose(momentum, expected, atol=0.0006)


@pytest.mark.parametrize(("charm", "lepton"), [("D-", "tau"), ("D*-", "tau"), ("D*-", "mu"), ("D-", "e")])
def test_end_points(charm: str, lepton: str) -> None:
    """q² in [m², (M-m)²]; charm momentum up to its value against a system of mass m_lepton; both nearly reached."""
    decay = gen.Decay("B0", charm, lepton)
    events = gen.simulate(decay, 100_000, SEED)
    hadron = events["Dst" if charm == "D*-" else "D"]
    M, m = mass("B0"), mass("D*(2010)+" if charm == "D*-" else "D+")
    m_lepton = mass({"tau": "tau-", "mu": "mu-", "e": "e-"}[lepton])
    q2 = M**2 + m**2 - 2 * M * ak.to_numpy(hadron.E)
    low, high = m_lepton**2, (M - m) ** 2
    assert q2.min() > low * 0.998 - 0.003
    assert q2.max() < high + 0.003
    assert q2.min() < low + (0.35 if lepton == "tau" else 0.02)
    assert q2.max() > high - 0.2
    top = np.sqrt((M**2 - (m + m_lepton) ** 2) * (M**2 - (m - m_lepton) ** 2)) / (2 * M)
    assert size(hadron).max() == pytest.approx(top, rel=2e-2)
    assert size(hadron).max() < top * 1.001
    if lepton != "tau":
        # a light lepton is hardest when charm and neutrino recoil together with the smallest mass
        highest = (M**2 + m_lepton**2 - m**2) / (2 * M)
        assert highest * 0.97 < ak.max(events.lepton.E) < highest * 1.001


def test_missing_mass() -> None:
    """Zero for one neutrino; for three between 0 and (M - m_D* - m_mu)²."""
    for lepton, neutrinos in (("mu", ["nu"]), ("tau", ["nu", "nu_tau", "nu_lepton"])):
        events = gen.simulate(gen.Decay("B0", "D*-", lepton), 20_000, SEED)
        parts = [sum(ak.to_numpy(events[name][part]) for name in neutrinos) for part in PARTS]
        mm2 = parts[3] ** 2 - parts[0] ** 2 - parts[1] ** 2 - parts[2] ** 2
        if lepton == "mu":
            np.testing.assert_allclose(mm2, 0.0, atol=1e-12)
        else:
            assert mm2.min() > 0.0
            assert 8.0 < mm2.max() < (mass("B0") - mass("D*(2010)+") - mass("mu-")) ** 2


def test_same_seed_same_events() -> None:
    decay = gen.Decay("B0", "D*-", "tau")
    first, again, longer = (gen.simulate(decay, n, SEED) for n in (700, 700, 1500))
    other = gen.simulate(decay, 700, SEED + 1)
    for name in first.fields:
        for part in PARTS:
            np.testing.assert_array_equal(ak.to_numpy(first[name][part]), ak.to_numpy(again[name][part]))
            np.testing.assert_array_equal(ak.to_numpy(first[name][part]), ak.to_numpy(longer[name][part])[:700])
    assert not np.any(ak.to_numpy(first.lepton.px) == ak.to_numpy(other.lepton.px))


@pytest.mark.parametrize(("parent", "charm", "table"), [("B0", "D*-", "D*+"), ("B+", "D*0", "D*0")])
def test_charm_decays_follow_branching_fractions(parent: str, charm: str, table: str) -> None:
    n = 20_000
    events = gen.simulate(gen.Decay(parent, charm, "mu"), n, SEED)
    soft, d = invariant(events.soft), invariant(events.D)
    names = {("D+", "pi+"): "never"} | {tuple(name.split()): name for name in BRANCHING_FRACTION[table]}
    total = sum(BRANCHING_FRACTION[table].values())
    counts = {}
    for (d_name, light), name in names.items():
        light_mass = 0.0 if light == "gamma" else mass(light)
        counts[name] = int(np.sum((abs(d - mass(d_name)) < 1e-3) & (abs(soft - light_mass) < 1e-3)))
    assert counts.pop("never") == 0
    expected = [BRANCHING_FRACTION[table][name] / total * n for name in counts]
    assert stats.chisquare(list(counts.values()), expected).pvalue > UNLIKELY


def test_excited_state_without_vector_has_none() -> None:
    """D2* -> D pi in a mixed sample: no D*, no soft particle. Share of D pi: 1.56/(1 + 1.56) (particle data tables)."""
    events = gen.simulate(gen.Decay("B+", "D2*(2460)0", "mu"), 20_000, SEED)
    direct = ak.to_numpy(ak.is_none(events.Dst.E))
    np.testing.assert_array_equal(direct, ak.to_numpy(ak.is_none(events.soft.E)))
    assert np.mean(direct) == pytest.approx(1.56 / 2.56, abs=0.03)
    light, charged = invariant(events.pion), mass("pi+")
    assert np.mean(abs(light - charged) < 1e-3) == pytest.approx(2 / 3, abs=5 * np.sqrt(2 / 9 / 20_000))


def test_isotropic_in_the_parent_frame() -> None:
    events = gen.simulate(gen.Decay("B0", "D*-", "tau"), 50_000, SEED)
    for name in ("lepton", "D", "soft"):
        for part in PARTS[:3]:
            assert (
                stats.kstest(ak.to_numpy(events[name][part]) / size(events[name]), "uniform", args=(-1, 2)).pvalue
                > UNLIKELY
            )


def test_upsilon_frame() -> None:
    """B momentum sqrt(m²/4 - M²), angle to the beams as sin² (vector decaying to two pseudoscalars, any textbook)."""
    decay = gen.Decay("B+", "D*0", "tau")
    events = gen.simulate(decay, 50_000, SEED, frame="Upsilon")
    half = mass("Upsilon(4S)") / 2
    np.testing.assert_allclose(size(events.B), np.sqrt(half**2 - mass("B+") ** 2), rtol=5e-3)
    cosine = ak.to_numpy(events.B.pz) / size(events.B)
    assert stats.kstest(cosine, lambda c: (3 * c - c**3 + 2) / 4).pvalue > UNLIKELY
    azimuth = np.arctan2(ak.to_numpy(events.B.py), ak.to_numpy(events.B.px))
    assert stats.kstest(azimuth, "uniform", args=(-np.pi, 2 * np.pi)).pvalue > UNLIKELY
    # the same events, seen from elsewhere: invariants agree
    resting = gen.simulate(decay, 50_000, SEED)

    def product(sample: ak.Array, one: str, other: str) -> np.ndarray:
        a, b = sample[one], sample[other]
        return ak.to_numpy(a.E * b.E - a.px * b.px - a.py * b.py - a.pz * b.pz)

    for one, other in (("B", "lepton"), ("D", "lepton"), ("soft", "nu"), ("tau", "Dst")):
        np.testing.assert_allclose(product(events, one, other), product(resting, one, other), rtol=1e-9, atol=1e-10)


def test_no_events() -> None:
    events = gen.simulate(gen.Decay("B+", "D2*(2460)0", "tau"), 0, SEED)
    assert len(events) == 0
    assert "nu_lepton" in events.fields


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"decay": "B0 -> D- tau"}, r"decay: not a decay \(got str\)\. Make one: gen\.Decay"),
        ({"n": -1}, r"n: the number of events must be a whole number \(got -1, allowed 0 or more\)"),
        ({"n": 2.5}, r"n: the number of events must be a whole number \(got 2\.5"),
        ({"n": True}, "n: the number of events must be a whole number"),
        ({"seed": -3}, r"seed: the seed must be a whole number \(got -3, allowed 0 to"),
        (
            {"tau_to": "eta"},
            r"tau_to: no such tau decay \(got 'eta', allowed 'e', 'mu', 'pi', 'rho', 'a1', 'a1_1prong'\)",
        ),
        ({"tau_to": None}, r"tau_to: no such tau decay \(got None"),
        (
            {"charm_to": "D0 gamma"},
            r"charm_to: D\*- has no such decay \(got 'D0 gamma', allowed 'D0 pi\+', 'D\+ pi0', 'D\+ gamma'\)",
        ),
        ({"frame": "lab"}, r"frame: no such frame \(got 'lab', allowed 'B', 'Upsilon'\)"),
    ],
)
def test_bad_arguments(change: dict[str, object], message: str) -> None:
    arguments = {"decay": gen.Decay("B0", "D*-", "tau"), "n": 10, "seed": 1} | change
    with pytest.raises(InputError, match=message):
        gen.simulate(**arguments)


def test_mass_point_below_threshold() -> None:
    with pytest.raises(InputError, match=r"D1'\(2430\)- is too light to decay \(got 2\.14 GeV, allowed at least 2\.14"):
        gen.simulate(gen.Decay("B0", "D1'(2430)-", "mu", charm_mass=2.14), 10, 1)
    events = gen.simulate(gen.Decay("B0", "D1'(2430)-", "mu", charm_mass=2.2), 10, 1)
    np.testing.assert_allclose(invariant(events.Dss), 2.2)


def test_all_problems_at_once() -> None:
    with pytest.raises(InputError) as caught:
        gen.simulate(gen.Decay("B+", "D0", "tau"), -1, 1, tau_to="k", charm_to="D0 pi0", frame="x")
    assert [problem.where for problem in caught.value.problems] == ["n", "tau_to", "frame", "charm_to"]
    assert "None: the D0 is followed no further" in str(caught.value)
