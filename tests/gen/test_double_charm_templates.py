"""Double charm through response and templates: decays of light hadrons, end points, charges, shares of the composition.

Statistical tests allow 5 standard deviations (chance 6e-7 each) or a p-value of 1e-6.
"""

from __future__ import annotations

import os
from functools import lru_cache
from itertools import pairwise
from math import prod
from typing import Any

import numpy as np
import pytest
from scipy import integrate, stats
from semitau.core.charm_fractions import LIGHT_DECAYS, TO_LEPTONS
from semitau.core.constants import MASS
from semitau.core.streams import stream_key
from semitau.gen import block as row
from semitau.gen.block import LANES
from semitau.gen.response.detector import Detector
from semitau.gen.response.efficiency import constant
from semitau.gen.response.finding import IDENTIFIED
from semitau.gen.response.light_decays import species
from semitau.gen.response.others import see_others
from semitau.gen.response.recording import CANDIDATE_ROWS, Events, event_recorder
from semitau.gen.response.setup import kernel_chain, kernel_detector
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.chunk_tasks import make_bench
from semitau.gen.templates.component_plan import ChannelPlan, plan_channels
from semitau.gen.templates.pseudo_data import pseudo_data

from .blocks import at_rest, keys, plan, put, values
from .marlow_study import PERFECT, study
from .test_double_charm import breakup, chain

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
LEAST_P = 1e-6
BLOCKS = 120


@lru_cache
def perfect_detector(track_efficiency: float, lost_neutral: float) -> Detector:
    found = kernel_detector(study(**PERFECT))
    return found._replace(
        tracks=found.tracks._replace(efficiency=constant(track_efficiency)),
        residual=found.residual._replace(lost_neutral=lost_neutral),
    )


def others(name: str, momentum: float, detector: Detector, blocks: int = BLOCKS) -> tuple[np.ndarray, np.ndarray]:
    """(n,) whether a track was seen and what energy is left, for hadrons of this momentum (GeV, along x)."""
    seen, left = [], []
    chosen = kernel_chain(chain(source="tau"))._replace(beside_soft=-1, kaon=-1, hadron=species(name))
    centre = detector._replace(beams=detector.beams._replace(beta=0.0, gamma=1.0))
    for k in range(blocks):
        x = at_rest()
        put(x, IDENTIFIED, [np.ones(LANES)])
        p = np.zeros((4, LANES))
        p[0], p[3] = momentum, np.hypot(momentum, MASS[name])
        put(x, row.HADRON_PX, p)
        see_others(x, keys(SEED, k, name), IDENTIFIED, chosen, centre)
        seen.append(values(x, row.OTHERS_SEEN))
        left.append(values(x, row.OTHERS_LEFT))
    return np.concatenate(seen), np.concatenate(left)


def unseen(name: str, efficiency: float) -> float:
    """Chance that no track of a hadron is seen, from the branching fractions by recursion."""
    if name not in LIGHT_DECAYS:
        return 1.0 - efficiency if name in ("pi+", "K+") else 1.0
    modes = LIGHT_DECAYS[name]
    total = sum(share for share, _ in modes)
    return sum(share * prod(unseen(d, efficiency) for d in daughters) for share, daughters in modes) / total


@pytest.mark.parametrize(
    "name", ["K0", "K*0", "K*+", "eta", "eta'", "phi", "rho0", "rho+", "pi+", "K+", "pi0", "gamma"]
)
@pytest.mark.parametrize("efficiency", [1.0, 0.6])
def test_tracks_of_light_hadrons(name: str, efficiency: float) -> None:
    seen, _ = others(name, 0.8, perfect_detector(efficiency, 0.5))
    expected = 1.0 - unseen(name, efficiency)
    assert seen.mean() == pytest.approx(expected, abs=5 * np.sqrt(max(expected * (1 - expected), 1e-9) / seen.size))


@pytest.mark.parametrize("name", ["eta", "eta'", "pi0", "K_S"])
def test_neutral_energy_is_conserved(name: str) -> None:
    """Decays without tracks leave the whole energy if every neutral does."""
    seen, left = others(name, 0.5, perfect_detector(1.0, 1.0))
    assert left[seen == 0.0] == pytest.approx(np.hypot(0.5, MASS[name]), rel=1e-9)
    assert (left <= np.hypot(0.5, MASS[name]) * (1 + 1e-9)).all()


def test_long_lived_kaons_leave_nothing() -> None:
    _, left = others("K0", 0.5, perfect_detector(1.0, 1.0))
    assert (left == 0.0).mean() > 0.5


def test_flat_three_body_decay_of_a_hadron() -> None:
    """Energy of the pi0 in omega -> pi+ pi- pi0 at rest: product of both breakup momenta over the pair mass (particle
    data tables, review of kinematics)."""
    _, left = others("omega", 0.0, perfect_detector(0.0, 1.0), 300)
    M, m, m0 = MASS["omega"], MASS["pi+"], MASS["pi0"]
    energy = left[(left > 1e-6) & (left < M - 1e-6)]
    edges = np.linspace(m0, (M**2 + m0**2 - 4 * m**2) / (2 * M), 21)

    def density(e: float) -> float:
        pair = np.sqrt(M**2 + m0**2 - 2 * M * e)
        return float(breakup(M, pair, m0) * breakup(pair, m, m) / pair)

    expected = np.array([integrate.quad(density, a, b)[0] for a, b in pairwise(edges)])
    counts = np.histogram(energy, edges)[0]
    assert counts.sum() == energy.size
    assert stats.chisquare(counts, expected * energy.size / expected.sum()).pvalue > LEAST_P


# --- reconstruction with a detector without faults -------------------------------------------------------------------


def recorded(made: StudyConfig, events: int = 40_000, **kinds: str | None) -> tuple[Events, dict[str, np.ndarray]]:
    bench = make_bench(made, variations=False)
    found = event_recorder(plan(chain(**kinds)), bench, stream_key(SEED, "double charm"))(0, events)
    return found, dict(zip(CANDIDATE_ROWS, found.candidates, strict=True))


@lru_cache
def perfect_study() -> StudyConfig:
    return study(**PERFECT)


def test_nothing_is_missing_but_a_neutrino() -> None:
    """B0 -> D*- D_s, D_s -> mu nu: mm2 = 0, and lepton energies fill the two-body range evenly (D_s has no spin)."""
    _, seen = recorded(perfect_study(), parent="B0", family="D*", partner="D_s+", source="mu", soft="charged_pion")
    assert seen["mm2"].size > 1000
    assert np.abs(seen["mm2"]).max() < 2e-3
    m, lepton = MASS["D_s+"], MASS["mu"]
    k = float(breakup(MASS["B0"], MASS["D*+"], m))
    own, p = (m**2 + lepton**2) / (2 * m), (m**2 - lepton**2) / (2 * m)
    low, high = ((np.hypot(k, m) * own + sign * k * p) / m for sign in (-1, 1))
    assert seen["el"].min() > low - 1e-3
    assert seen["el"].max() < high + 1e-3
    assert stats.kstest(seen["el"], stats.uniform(low, high - low).cdf).pvalue > LEAST_P
    assert seen["q2"] == pytest.approx(m**2, abs=5e-3)


def test_end_points_of_the_tau() -> None:
    _, seen = recorded(perfect_study(), parent="B0", family="D", partner="D_s+", source="tau", tau_to="mu")
    most = (MASS["D_s+"] - MASS["mu"]) ** 2
    assert seen["mm2"].min() > -2e-3
    assert 0.85 * most < seen["mm2"].max() < most + 2e-3


def test_seen_tracks_veto() -> None:
    """If everything is seen, D0 K+ beside the D never survives, and eta l nu as often as the eta gives no track."""
    found, _ = recorded(perfect_study(), parent="B0", family="D", partner="D0", kaon="K+", source="K", lepton="e")
    assert found.number.size == 0
    events = 40_000
    kept, _ = recorded(perfect_study(), events, parent="B0", family="D", partner="D_s+", source="eta", lepton="e")
    expected = unseen("eta", 1.0)
    assert kept.number.size / events == pytest.approx(expected, abs=5 * np.sqrt(expected * (1 - expected) / events))


def test_charges() -> None:
    """A D0 needs a charged tag, unless a charged pion makes it a D*+: B0 -> D*- (-> D0 pi-) D_s is that or nothing."""
    codes = {"D0": 0, "D+": 1, "D*0": 2, "D*+": 3}
    for kinds, charm in (
        ({"parent": "B0", "family": "D*", "soft": "charged_pion"}, {"D*+"}),
        ({"parent": "B+", "family": "D*", "soft": "neutral_pion"}, {"D*0"}),
        ({"parent": "B0", "family": "D"}, {"D+"}),
        ({"parent": "B+", "family": "D"}, {"D0"}),
    ):
        _, seen = recorded(perfect_study(), 20_000, partner="D_s+", source="mu", **kinds)
        assert {int(code) // 2 for code in seen["category"]} == {codes[name] for name in charm}, kinds


# --- templates ------------------------------------------------------------------------------------------------------


def with_double_charm(*variations: dict[str, Any], **keys: Any) -> StudyConfig:
    table = {"component": "double_charm", "events": 130_000, "yield": {"uncertainty": 0.3}} | keys
    return study(double_charm=[table], variation=list(variations))


def mine(made: StudyConfig) -> list[ChannelPlan]:
    return [chosen for chosen in plan_channels(made) if chosen.component == "double_charm"]


def test_shares_keep_the_total() -> None:
    """D_s -> tau nu moves by the error of its branching fraction (5.36 +- 0.10)%, particle data tables, from memory."""
    tau = {"name": "tau", "kind": "double_charm_share", "source": "tau"}
    vectors = {"name": "vectors", "kind": "double_charm_share", "beside": "D_s*", "relative": 0.2}
    plans = mine(with_double_charm(tau, vectors))
    total = sum(p.expected for p in plans)
    for name in ("tau", "vectors"):
        for sign in (1, -1):
            factors = np.array([p.variations.factors[name, sign][0] for p in plans])
            expected = np.array([p.expected for p in plans])
            assert factors @ expected == pytest.approx(total, rel=1e-12)
    moved = [p.variations.factors["tau", 1][0] for p in plans if p.channel.lepton == "tau"]
    assert moved == pytest.approx([1 + 0.10 / 5.36] * len(moved), rel=1e-12)
    moved = [p.variations.factors["vectors", -1][0] for p in plans if p.channel.partner == "D_s*+"]
    assert moved == pytest.approx([0.8] * len(moved), rel=1e-12)


def test_numbers_of_decays() -> None:
    """2 * pairs * share * branching fractions * tag * charm, by hand for D_s -> mu nu beside a D from a B0."""
    made = with_double_charm()
    detector = made.detector
    fraction = 7.2e-3 * TO_LEPTONS["D_s+"][("mu",)].value  # B0 -> D- D_s+: particle data tables, from memory
    expected = 2 * 700e6 * (1 - 0.514) * fraction * detector.tag.efficiency["B0"] * detector.charm.reconstructed["D+"]
    found = [
        p.expected for p in mine(made)
        if (p.channel.parent, p.channel.family, p.channel.partner, p.channel.source) == ("B0", "D", "D_s+", "mu")
    ]  # fmt: skip
    assert sum(found) == pytest.approx(expected, rel=1e-9)


def test_templates_do_not_depend_on_the_workers() -> None:
    made = with_double_charm({"name": "tau", "kind": "double_charm_share", "source": "tau"}, events=1000)
    one, two = (build_templates(made, workers=n).templates for n in (1, 2))
    for category in one.categories:
        a, b = (found.templates[category.name, "double_charm"] for found in (one, two))
        np.testing.assert_array_equal(a.nominal, b.nominal)
        np.testing.assert_array_equal(a.plus["tau"], b.plus["tau"])
        assert a.nominal.sum() > 0.0
    component = next(c for c in one.components if c.name == "double_charm")
    assert component.role == "background"
    assert component.scales_with == ("yield_double_charm",)


def test_pseudo_data_has_it() -> None:
    """Counts with and without it, at the same seed: modes stay the same, backgrounds are drawn anew."""
    made = with_double_charm(beside=["D_s", "D_s*"], charm=["D*"], events=1000)
    totals: dict[str, float] = {}
    for (_, component), template in build_templates(made).templates.templates.items():
        totals[component] = totals.get(component, 0.0) + float(template.nominal.sum())
    counts = [
        sum(float(values.sum()) for values in pseudo_data(made, factors={"double_charm": factor}).values())
        for factor in (1.0, 0.0)
    ]
    expected, rest = totals["double_charm"], totals["continuum"] + totals["fakes"]
    assert expected > 300
    assert counts[0] - counts[1] == pytest.approx(expected, abs=5 * np.sqrt(expected + 2 * rest))
