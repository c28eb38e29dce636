"""Pions of a tau through detector and reconstruction: as a category of their own, and taken for leptons.

Truth and candidates are compared event by event; shares are binomial, 5 standard deviations (below 1e-6 a check).
"""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from semitau.core.constants import BRANCHING_FRACTION, MASS
from semitau.gen.templates.binning import category_code
from semitau.gen.templates.component_plan import plan_channels
from semitau.gen.templates.fit_components import template_categories

from .blocks import channel
from .marlow_study import PERFECT, study
from .test_reconstruction import bench, expect_share, recorded, vectors

ALL_TAUS = ["e", "mu", "pi", "rho", "a1", "a1_1prong"]
N = 6000


def with_pions(**changes: Any) -> dict[str, Any]:
    """The study with hadronic taus and categories of pions; a perfect detector unless changed."""
    tables: dict[str, Any] = PERFECT | named(e=1.0, mu=1.0, pi=1.0)
    tables["category"] = [
        {
            "charm": ["D0", "D+", "D*0", "D*+"],
            "leptons": ["e", "mu", "pi", "3pi"],
            "observables": {"mm2": [-2.0, 0.0, 3.0, 9.0], "el": [0.1, 1.0, 3.0]},
        }
    ]
    tau_modes = [{"component": f"{name}_tau", "charm": [charm], "leptons": ["tau"], "tau_to": ALL_TAUS,
                  "scales_with": ratio, "events": 20_000}
                 for name, charm, ratio in (("D", "D", "R_D"), ("Dst", "D*", "R_Dst"))]  # fmt: skip
    light = [{"component": f"{name}_light", "charm": [charm], "leptons": ["e", "mu"], "events": 20_000}
             for name, charm in (("D", "D"), ("Dst", "D*"))]  # fmt: skip
    tables["mode"] = [*tau_modes, *light]
    tables["variation"] = []
    tables["background"] = []
    return tables | changes


def named(**chances: float) -> dict[str, Any]:
    """Identification with the given chances, and none for the rest."""
    none = dict.fromkeys(
        ("e", "mu", "pi", "hadron_as_e", "hadron_as_mu", "e_as_mu", "mu_as_e", "e_as_pi", "mu_as_pi"), 0.0
    )
    return {"detector__lepton_id": none | chances}


def pions(truth: dict[str, np.ndarray], tau_to: str) -> list[Any]:
    return [vectors(truth, name) for name in ("lepton", "partner_1", "partner_2")[: {"pi": 1, "rho": 2}.get(tau_to, 3)]]


def test_axes_say_what_is_seen() -> None:
    labels = {category.name: category.observables[1].label for category in template_categories(study(**with_pions()))}
    assert labels["D0_e"] == "lepton energy in the B frame"
    assert labels["D0_pi"] == "pion energy in the B frame"
    assert labels["Dstp_3pi"] == "three-pion energy in the B frame"


@pytest.mark.parametrize("tau_to", ["pi", "rho", "a1_1prong"])
def test_one_pion_in_a_faultless_detector(tau_to: str) -> None:
    """Every decay is a candidate of the pion category; its energy is that of the pion in the B frame."""
    chain = channel("B0", "D*", "tau", tau_to=tau_to, soft="charged_pion")
    truth, seen = recorded(chain, bench(**with_pions(**named(pi=1.0))), N)
    assert len(seen["mm2"]) == N
    assert set(seen["category"]) == {category_code("D*+", "pi")}
    np.testing.assert_allclose(seen["el"], vectors(truth, "lepton").E, atol=1e-9)
    np.testing.assert_allclose(seen["q2"], truth["q2"], atol=1e-8)


def test_three_pions_in_a_faultless_detector() -> None:
    """All three together: their energy, and what is missing are two neutrinos."""
    chain = channel("B0", "D*", "tau", tau_to="a1", soft="charged_pion")
    truth, seen = recorded(chain, bench(**with_pions(**named(pi=1.0))), N)
    assert len(seen["mm2"]) == N
    assert set(seen["category"]) == {category_code("D*+", "3pi")}
    first, second, third = pions(truth, "a1")
    together = first + second + third
    np.testing.assert_allclose(seen["el"], together.E, atol=1e-8)
    missing = -(vectors(truth, "D") + vectors(truth, "soft") + together)
    mm2 = (missing.E + chain.decay.m_parent) ** 2 - missing.p**2
    np.testing.assert_allclose(seen["mm2"], mm2, atol=1e-7)
    assert seen["mm2"].min() > -1e-7


@pytest.mark.parametrize("tau_to", ["pi", "rho", "a1_1prong"])
def test_names_of_a_pion(tau_to: str) -> None:
    chances = {"pi": 0.5, "hadron_as_e": 0.1, "hadron_as_mu": 0.2}
    chain = channel("B+", "D", "tau", tau_to=tau_to)
    _, seen = recorded(chain, bench(**with_pions(**named(**chances))), 4 * N)
    for lepton, chance in (("e", 0.1), ("mu", 0.2), ("pi", 0.5)):
        found = np.zeros(4 * N, dtype=bool)
        found[: np.count_nonzero(seen["category"] == category_code("D0", lepton))] = True
        expect_share(found, chance)


@pytest.mark.parametrize("lepton", ["e", "mu"])
def test_leptons_called_pions(lepton: str) -> None:
    other = {"e": "mu", "mu": "e"}[lepton]
    chances = {lepton: 0.6, f"{lepton}_as_{other}": 0.1, f"{lepton}_as_pi": 0.2}
    chain = channel("B+", "D", lepton)
    _, seen = recorded(chain, bench(**with_pions(**named(**chances))), 4 * N)
    for name, chance in ((lepton, 0.6), (other, 0.1), ("pi", 0.2)):
        found = np.zeros(4 * N, dtype=bool)
        found[: np.count_nonzero(seen["category"] == category_code("D0", name))] = True
        expect_share(found, chance)


def test_nothing_is_called_a_pion_without_such_a_category() -> None:
    chain = channel("B+", "D", "mu")
    changes = PERFECT | named(mu=0.5, mu_as_pi=0.5)
    _, seen = recorded(chain, bench(**changes), N)
    assert set(seen["category"]) == {category_code("D0", "mu")}
    found = np.zeros(N, dtype=bool)
    found[: len(seen["mm2"])] = True
    expect_share(found, 0.5)


def test_three_tracks_seen_or_lost() -> None:
    """Tracks are seen with chance e, those of the D among them: e³·p³ come as three, 2e(1-e)² alone (the pion of the
    other charge never), and nothing with two."""
    e, p, as_mu = 0.6, 0.8, 0.1
    chain = channel("B0", "D", "tau", tau_to="a1")  # D+ -> K pi pi
    changes = with_pions(**named(pi=p, hadron_as_mu=as_mu))
    changes |= {"detector__tracks": PERFECT["detector__tracks"] | {"efficiency": e}}
    n = 20 * N
    _, seen = recorded(chain, bench(**changes), n)
    for lepton, chance in (
        ("3pi", e**3 * p**3),
        ("pi", 2 * e * (1 - e) ** 2 * p),
        ("mu", 2 * e * (1 - e) ** 2 * as_mu),
    ):
        found = np.zeros(n, dtype=bool)
        found[: np.count_nonzero(seen["category"] == category_code("D+", lepton))] = True
        expect_share(found, e**3 * chance)
    assert set(seen["category"]) == {category_code("D+", name) for name in ("mu", "pi", "3pi")}


def test_neutral_pions_leave_their_energy() -> None:
    """Each with the chance of lost neutrals, in the laboratory: here 1, so nothing but the pi0 is left over."""
    residual = {"noise_mean": 0.1, "clean_fraction": 1.0, "wrong_tag_mean": 0.1}
    for tau_to, number in (("pi", 0), ("rho", 1), ("a1_1prong", 2)):
        chain = channel("B+", "D", "tau", tau_to=tau_to)
        changes = with_pions(**named(pi=1.0))
        changes["detector__residual_energy"] = residual | {"lost_neutral_probability": 1.0}
        truth, seen = recorded(chain, bench(**changes), N)
        energy = sum(p.E for p in pions(truth, tau_to)[1:]) if number else np.zeros(N)
        beams = bench(**changes).detector.beams
        # the boost to the laboratory is an average factor of gamma, with the small motion of the B on top
        assert seen["e_res"].mean() == pytest.approx(beams.gamma * np.mean(energy), rel=0.02, abs=1e-12)
        changes["detector__residual_energy"] = residual | {"lost_neutral_probability": 0.0}
        assert np.all(recorded(chain, bench(**changes), N)[1]["e_res"] == 0.0)


def test_measured_three_pions_have_the_resolution_of_tracks() -> None:
    """Energy of the three in the B frame, tag perfect: sigma(pt)/pt of 0.3% to 0.4% a track."""
    chain = channel("B+", "D", "tau", tau_to="a1")
    changes = with_pions(**named(pi=1.0))
    changes["detector__tracks"] = PERFECT["detector__tracks"] | {"momentum_resolution": [0.0015, 0.003]}
    truth, seen = recorded(chain, bench(**changes), N)
    first, second, third = pions(truth, "a1")
    ratio = seen["el"] / (first + second + third).E
    assert 0.0005 < np.std(ratio) < 0.005
    assert abs(np.mean(ratio) - 1.0) < 5e-4


def test_expected_decays_follow_the_branching_fractions() -> None:
    """Particle data tables: 10.82, 25.49, 9.02 and 9.26% (written from memory in the constants)."""
    made = study(**with_pions())
    expected: dict[str, float] = {}
    for plan in plan_channels(made):
        if plan.mode == "D_tau":
            key = str(plan.channel.tau_to)
            expected[key] = expected.get(key, 0.0) + plan.expected
    tables = BRANCHING_FRACTION["tau"]
    assert {k: v / expected["e"] for k, v in expected.items()} == pytest.approx(
        {k: tables[k] / tables["e"] for k in ALL_TAUS}
    )
    # published: 10.82, 25.49, 9.02, 9.26 per cent
    for name, value in (("pi", 0.1082), ("rho", 0.2549), ("a1", 0.0902), ("a1_1prong", 0.0926)):
        assert tables[name] == pytest.approx(value, rel=0.01)


def test_misidentification_acts_on_pions_of_a_tau() -> None:
    variation = [{"name": "fakes", "kind": "misidentification", "lepton": "mu", "relative": 0.2}]
    made = study(**with_pions(variation=variation))
    for plan in plan_channels(made):
        hadronic = plan.channel.tau_to in ALL_TAUS[2:]
        assert (("fakes", 1) in plan.variations.factors) == hadronic
        if hadronic:
            leptons = [category.lepton for category in made.categories]
            expected = [1.2 if lepton == "mu" else 1.0 for lepton in leptons]
            np.testing.assert_allclose(plan.variations.factors["fakes", 1], expected)


def test_mass_of_the_pion_counts() -> None:
    """At rest a pion has its mass: el never falls below it, and comes near (a1 with two pi0 has soft ones)."""
    chain = channel("B+", "D", "tau", tau_to="a1_1prong")
    _, seen = recorded(chain, bench(**with_pions(**named(pi=1.0))), N)
    assert MASS["pi+"] < seen["el"].min() < MASS["pi+"] + 0.05


@pytest.mark.parametrize(
    ("changes", "message"),
    [
        ({"mode": None}, "has 3pi, but no mode has a tau that goes there"),
        (named(e=0.9, e_as_pi=0.2), "add up to more than 1"),
        (named(pi=0.9, hadron_as_mu=0.2), "add up to more than 1"),
    ],
)
def test_mistakes(changes: dict[str, Any], message: str) -> None:
    tables = with_pions()
    if "mode" in changes:
        changes = {"mode": [mode | ({"tau_to": ["mu", "rho"]} if "tau_to" in mode else {}) for mode in tables["mode"]]}
    with pytest.raises(ValidationError, match=message):
        study(**(tables | changes))


def test_decays_of_a_tau_without_a_tau() -> None:
    tables = with_pions()
    tables["mode"][-1] = tables["mode"][-1] | {"tau_to": ["rho"]}
    with pytest.raises(ValidationError, match="has tau_to but no tau"):
        study(**tables)


def test_misidentified_background_in_a_category_of_pions() -> None:
    shapes = {name: {"law": "uniform", "range": [0.1, 2.5]} for name in ("mm2", "el", "p_lepton")}
    background = {
        "component": "fakes",
        "events": 1000,
        "misidentified": True,
        "expected": {"D0_pi": 3},
        "shape": shapes,
    }
    with pytest.raises(ValidationError, match="holds no lepton that a hadron could be taken for"):
        study(**with_pions(background=[background]))
