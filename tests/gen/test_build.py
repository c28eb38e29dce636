"""Templates of a whole study: sums, variations against events generated anew, variances, pseudo-data, bits.

Statistical tests use the study's seed, which SEMITAU_TEST_SEED replaces. A chi² test asks for a p-value above 1e-6, and
a pull for less than five standard deviations: with about twenty of them a fresh seed fails with a chance below 1e-4.
"""

from __future__ import annotations

import os
from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pytest
from scipy import stats
from semitau.core.errors import InputError
from semitau.core.streams import stream_key
from semitau.core.templates import TemplateSet
from semitau.gen.decays.chains import Channel
from semitau.gen.decays.rates import ratio
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates import build as build_module
from semitau.gen.templates.build import Build, build_templates
from semitau.gen.templates.chunk_tasks import (
    NOMINAL,
    Bench,
    channel_columns,
    channel_inputs,
    channel_tasks,
    make_bench,
)
from semitau.gen.templates.component_plan import (
    LEAST_EVENTS,
    ChannelPlan,
    expected_decays,
    plan_channels,
    predicted_ratio,
    shared_out,
)
from semitau.gen.templates.fit_components import components_and_parameters
from semitau.gen.templates.pseudo_data import pseudo_data
from semitau.gen.templates.variations import varied_set

from .blocks import channel, plan
from .marlow_study import study

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-6


def seeded(**changes: Any) -> StudyConfig:
    return study(study__seed=SEED, **changes)


@cache
def built() -> Build:
    return build_templates(seeded(), workers=1)


def contents(templates: TemplateSet) -> dict[str, np.ndarray]:
    """All arrays of a template set by name."""
    found = {}
    for (category, component), template in templates.templates.items():
        place = f"{category}/{component}"
        found |= {f"{place}/nominal": template.nominal, f"{place}/variance": template.variance}
        found |= {f"{place}/plus/{name}": values for name, values in template.plus.items()}
        found |= {f"{place}/minus/{name}": values for name, values in template.minus.items()}
    return found


# --- sums and bits --------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("workers", [2, 3])
def test_the_same_bits_for_any_number_of_workers(workers: int) -> None:
    one, many = built(), build_templates(seeded(), workers=workers)
    first, second = contents(one.templates), contents(many.templates)
    assert first.keys() == second.keys()
    for name in first:
        assert first[name].tobytes() == second[name].tobytes(), name
    assert one.cut_flow.events.tobytes() == many.cut_flow.events.tobytes()


def test_templates_hold_what_the_cut_flow_says() -> None:
    """Sum over categories and bins of a component is the last step of its cut flow; no step adds events."""
    flow = built().cut_flow
    for c, name in enumerate(flow.components):
        total = sum(t.nominal.sum() for (_, component), t in built().templates.templates.items() if component == name)
        assert total == pytest.approx(flow.events[-1, c], rel=1e-12)
    for k, category in enumerate(flow.categories):
        total = sum(t.nominal.sum() for (place, _), t in built().templates.templates.items() if place == category)
        assert total == pytest.approx(flow.by_category[-1, k].sum(), rel=1e-12)
    assert np.all(np.diff(flow.events, axis=0) <= 1e-9)
    assert np.all(np.diff(flow.generated, axis=0) <= 0)
    assert built().events == flow.generated[0].sum()


def test_reports_every_event() -> None:
    told: list[tuple[str, int, int | None]] = []
    made = build_templates(seeded(), workers=2, report=lambda *words: told.append(words))
    assert [done for _, done, _ in told] == sorted(done for _, done, _ in told)
    assert told[-1][1:] == (made.events, made.events)
    assert {what for what, _, _ in told} == {component.name for component in made.templates.components}


def test_costs_count_every_event_and_take_time() -> None:
    made = built()
    assert list(made.costs) == [component.name for component in made.templates.components]
    assert sum(cost.events for cost in made.costs.values()) == made.events
    generated = dict(zip(made.cut_flow.components, made.cut_flow.generated[0].tolist(), strict=True))
    assert {name: cost.events for name, cost in made.costs.items()} == generated
    assert all(cost.seconds > 0.0 for cost in made.costs.values())


def test_another_purpose_gives_independent_events() -> None:
    """Two independent Poisson numbers of one mean: (a - b)²/(a + b) has mean 1 where a bin holds many events, and the
    sum of m of them variance of about 2m."""
    one, two = built().templates, build_templates(seeded(), workers=1, purpose="another").templates
    squares, bins = 0.0, 0
    for key, template in one.templates.items():
        other = two.templates[key]
        filled = (template.nominal**2 > 25 * template.variance) & (other.nominal**2 > 25 * other.variance)
        difference = (template.nominal - other.nominal)[filled]
        squares += float((difference**2 / (template.variance + other.variance)[filled]).sum())
        bins += int(filled.sum())
    assert bins > 100
    assert min(stats.chi2.cdf(squares, bins), stats.chi2.sf(squares, bins)) > UNLIKELY


def test_expected_numbers_follow_from_rates() -> None:
    """Events before the detector: 2 N share B ε ε, summed over the chains of a component; R from the rates."""
    made = seeded()
    flow = built().cut_flow
    for name, family in (("D_tau", "D"), ("Dst_tau", "D*")):
        tau, light = (sum(p.expected for p in plan_channels(made) if p.mode == m) for m in (name, f"{name[:-3]}light"))
        assert flow.events[0, flow.components.index(name)] == pytest.approx(tau, rel=1e-12)
        # Each tau ends in e or mu by its branching fractions (particle data tables), each light lepton is one of two.
        r = tau / (0.1782 + 0.1739) / (light / 2.0)
        neutral, charged = ratio("B0", family + "-"), ratio("B+", family + "0")
        assert min(neutral, charged) * 0.999 < r < max(neutral, charged) * 1.001
    chain = channel("B+", "D", "mu")
    assert expected_decays(made, chain) == pytest.approx(
        2 * 700e6 * 0.514 * chain.branching_fraction * 0.0035 * 0.3, rel=1e-12
    )


def test_events_are_shared_by_expectation() -> None:
    assert shared_out(1000, [1.0, 1.0, 1.0]) == [334, 333, 333]
    assert shared_out(10_000, [7.0, 3.0, 0.0]) == [7000, 3000, 0]
    assert shared_out(10_000, [1.0, 1e-6]) == [10_000, LEAST_EVENTS]


def test_injected_ratio_scales_the_tau_templates() -> None:
    made = seeded(fit={"injected": {"R_Dst": 0.3}})
    other = build_templates(made, workers=1)
    parameters = {p.name: p for p in other.templates.parameters}
    assert parameters["R_Dst"].injected == 0.3
    factor = 0.3 / predicted_ratio(made, "R_Dst", ["B+", "B0"])
    for (category, component), template in built().templates.templates.items():
        expected = template.nominal * (factor if component == "Dst_tau" else 1.0)
        np.testing.assert_allclose(other.templates.templates[category, component].nominal, expected, rtol=1e-12)


def test_separate_ratios_take_components_apart() -> None:
    made = seeded(fit={"ratios": "separate"})
    components, parameters = components_and_parameters(made)
    by_name = {component.name: component for component in components}
    assert by_name["D_tau_B0"].scales_with == ("R_D_B0", "yield_D_light_B0")
    assert by_name["Dss_light"].scales_with == ("yield_Dss_light",)
    assert {p.name for p in parameters if p.kind == "ratio"} == {"R_D_Bp", "R_D_B0", "R_Dst_Bp", "R_Dst_B0"}
    injected = {p.name: p.injected for p in parameters}
    assert injected["R_D_B0"] == pytest.approx(ratio("B0", "D-"), rel=1e-12)
    apart = build_templates(made, workers=1).templates
    for (category, component), template in built().templates.templates.items():
        parts = [apart.templates.get((category, component + end)) for end in ("", "_Bp", "_B0")]
        total = sum(part.nominal for part in parts if part is not None)
        np.testing.assert_allclose(total, template.nominal, rtol=1e-10)


# --- variations -----------------------------------------------------------------------------------------------------


def histogram(bench: Bench, chosen: ChannelPlan, events: int, word: str) -> np.ndarray:
    """All columns of a channel from its own stream, divided by the events."""
    stream = stream_key(SEED, "test build", word)
    return (
        sum(task().histogram for task in channel_tasks(channel_inputs(chosen, bench, stream), bench, 0, events))
        / events
    )


def expect_alike(weighted: np.ndarray, events: int, anew: np.ndarray, events_anew: int) -> None:
    """Two samples of independent events: chi² over bins with at least 25 events in both. Weights near 1 are taken to
    leave the variance of the first sample at its Poisson value."""
    filled = (weighted * events > 25) & (anew * events_anew > 25)
    assert filled.sum() >= 5
    square = (weighted - anew)[filled] ** 2 / (weighted / events + anew / events_anew)[filled]
    assert stats.chi2(filled.sum()).sf(square.sum()) > UNLIKELY


def one_channel(made: StudyConfig, chain: Channel) -> ChannelPlan:
    """The plan of the study for this chain."""
    return next(p for p in plan_channels(made) if p.channel.name == chain.name)


@pytest.mark.parametrize("sign", [1, -1])
@pytest.mark.parametrize(
    ("name", "chain"),
    [
        ("Dst_R0", channel("B+", "D*", "tau", tau_to="mu", soft="neutral_pion")),
        ("D_first", channel("B+", "D", "mu")),
    ],
    ids=["R0", "direction"],
)
def test_form_factor_weights_are_events_of_the_other_form_factors(name: str, chain: Channel, sign: int) -> None:
    """Weighted events against events that were drawn with the changed parameter; shifts enlarged to be seen."""
    large = {"shift": 1.0} if name == "Dst_R0" else {}
    table = next(v for v in study().model_dump(by_alias=True)["variation"] if v["name"] == name)
    kept = {k: v for k, v in table.items() if v is not None and k in ("name", "kind", "set", "parameter", "direction")}
    made = seeded(variation=[kept | large])
    bench, chosen, events = make_bench(made, variations=True), one_channel(made, chain), 200_000
    column = 1 + channel_columns(chosen, bench).index((name, sign))
    whole = histogram(bench, chosen, events, "drawn")
    other = replace(chosen.channel.decay, form_factors=varied_set(made, made.variations[0], sign))
    anew = histogram(make_bench(made, variations=False), plan(replace(chosen.channel, decay=other)), events, "anew")
    expect_alike(whole[:, column], events, anew[:, 0], events)
    if name == "Dst_R0" and sign == 1:  # the nominal templates must be told apart, or the test says nothing
        with pytest.raises(AssertionError):
            expect_alike(whole[:, 0], events, anew[:, 0], events)


@pytest.mark.parametrize("sign", [1, -1])
def test_soft_efficiency_weights_are_events_of_the_other_efficiency(sign: int) -> None:
    """Found and lost ones, in the D* and in the D category."""
    nominal = {"momentum": [0.03, 0.4], "value": [0.2, 0.6]}
    table = {"name": "soft", "kind": "soft_pion_efficiency", "particle": "neutral", "relative": 0.3}
    made = seeded(variation=[table], detector__soft_pion__neutral=nominal)
    chain = channel("B+", "D*", "mu", soft="neutral_pion")
    bench, chosen, events = make_bench(made, variations=True), one_channel(made, chain), 200_000
    column = 1 + channel_columns(chosen, bench).index(("soft", sign))
    whole = histogram(bench, chosen, events, "drawn")
    changed = nominal | {"value": [v * (1 + 0.3 * sign) for v in nominal["value"]]}
    other = make_bench(seeded(detector__soft_pion__neutral=changed), variations=False)
    anew = histogram(other, plan(chain), events, "anew")
    expect_alike(whole[:, column], events, anew[:, 0], events)
    with pytest.raises(AssertionError):
        expect_alike(whole[:, 0], events, anew[:, 0], events)


@pytest.mark.parametrize(("name", "change"), [("tag_width", 0.8), ("scale", 0.01)])
def test_shifted_scenarios_are_other_detectors(name: str, change: float) -> None:
    """Tag: a detector with the other widths, independent events. Either: plus and minus move bins oppositely.

    What the momentum scale does to single events is in test_reconstruction.py."""
    kind = "tag_resolution" if name == "tag_width" else "momentum_scale"
    made, events = seeded(variation=[{"name": name, "kind": kind, "relative": change}]), 200_000
    chain = channel("B+", "D", "mu")
    bench, chosen = make_bench(made, variations=True), one_channel(made, chain)
    whole = histogram(bench, chosen, events, "drawn")
    columns = channel_columns(chosen, bench)
    up, down = (whole[:, 1 + columns.index((name, sign))] for sign in (1, -1))
    if name == "tag_width":
        tag = made.detector.tag
        wide = seeded(
            detector__tag__momentum_resolution=tag.momentum_resolution * (1 + change),
            detector__tag__wrong_momentum_resolution=tag.wrong_momentum_resolution * (1 + change),
        )
        other = histogram(make_bench(wide, variations=False), plan(chain), events, "anew")
        expect_alike(up, events, other[:, 0], events)
        with pytest.raises(AssertionError):
            expect_alike(whole[:, 0], events, other[:, 0], events)
    moved = (up - whole[:, 0]) * (down - whole[:, 0]) * events**2
    assert moved.sum() < 0.0


def test_nominal_scenario_is_the_detector_as_it_is() -> None:
    assert NOMINAL == (1.0, 1.0, 1.0)


def test_constant_factors() -> None:
    """Identification: 2% in the muon categories for true muons. Misidentification: muon categories of fakes alone."""
    templates = built().templates.templates
    for (category, component), template in templates.items():
        if component == "continuum":
            assert not template.plus
        elif component == "fakes":
            assert set(template.plus) == ({"muon_fakes"} if category == "D0_mu" else set())
            if category == "D0_mu":
                np.testing.assert_allclose(template.plus["muon_fakes"], 1.2 * template.nominal, rtol=1e-12)
        elif category.endswith("mu") and component.endswith("light"):
            change = template.plus["muon_id"].sum() / template.nominal.sum()
            assert 1.019 < change < 1.02 + 1e-9  # a few are electrons taken for muons
            down = template.minus["muon_id"].sum() / template.nominal.sum()
            assert change + down == pytest.approx(2.0, abs=1e-12)


def test_fractions_keep_the_total() -> None:
    """D1 up by 20%, the other three down: the expected decays stay; templates follow from those of single states."""
    made = seeded()
    plans = [p for p in plan_channels(made) if p.mode == "Dss_light"]
    for sign in (1, -1):
        factors = [p.variations.factors["D1_share", sign][0] for p in plans]
        expected = np.array([p.expected for p in plans])
        assert (expected * factors).sum() == pytest.approx(expected.sum(), rel=1e-12)
        mine = {f for p, f in zip(plans, factors, strict=True) if p.channel.family == "D1(2420)"}
        assert mine == {1.0 + 0.2 * sign}


def test_variations_that_do_not_act_are_absent() -> None:
    for (_, component), template in built().templates.templates.items():
        assert "Dst_R0" not in template.plus or component.startswith("Dst")
        assert "D_first" not in template.plus or component.startswith("D_")
        assert "D1_share" not in template.plus or component == "Dss_light"


def test_variance_is_that_of_repeated_generation() -> None:
    """The scatter of 60 independent samples of one channel is what Σw² says: its ratio is chi² over its degrees.

    That templates hold Σw² is in test_event_files.py."""
    made, events, repeats = seeded(), 4000, 60
    bench, chain = make_bench(made, variations=False), channel("B+", "D", "mu")
    samples = np.array([histogram(bench, plan(chain), events, f"repeat {k}")[:, 0] for k in range(repeats)]) * events
    mean = samples.mean(axis=0)
    filled = (mean > 20) & (mean < 0.05 * events)  # Poisson holds for a small share of a fixed number
    square = (samples[:, filled].var(axis=0, ddof=1) / (mean * (1 - mean / events))[filled]).sum() * (repeats - 1)
    degrees = (repeats - 1) * filled.sum()
    assert filled.sum() >= 5
    assert UNLIKELY < stats.chi2(degrees).cdf(square) < 1.0 - UNLIKELY


# --- pseudo-data ----------------------------------------------------------------------------------------------------


def test_pseudo_data_are_independent_events_of_the_same_expectation() -> None:
    """Whole numbers, Poisson about the templates (whose own variance adds), another set for another replica."""
    data, again, other = (pseudo_data(seeded(), workers=w, replica=r) for w, r in ((1, 0), (2, 0), (1, 1)))
    square, degrees = 0.0, 0
    for category in built().templates.categories:
        parts = [t for (place, _), t in built().templates.templates.items() if place == category.name]
        expected, variance = sum(t.nominal for t in parts), sum(t.variance for t in parts)
        observed = data[category.name]
        assert observed.shape == category.shape
        assert np.all(observed == np.round(observed))
        np.testing.assert_array_equal(observed, again[category.name])
        assert not np.array_equal(observed, other[category.name])
        filled = expected > 10
        square += ((observed - expected)[filled] ** 2 / (expected + variance)[filled]).sum()
        degrees += filled.sum()
    assert degrees > 50
    assert UNLIKELY < stats.chi2(degrees).cdf(square) < 1.0 - UNLIKELY


def test_pseudo_data_with_another_ratio() -> None:
    """Twice the tau events: the excess is that of the templates, within its Poisson error."""
    plain, more = pseudo_data(seeded(), 1), pseudo_data(seeded(), 1, factors={"D_tau": 2.0, "Dst_tau": 2.0})
    excess = sum(counts.sum() for counts in more.values()) - sum(counts.sum() for counts in plain.values())
    tau = sum(t.nominal.sum() for (_, name), t in built().templates.templates.items() if name.endswith("_tau"))
    assert abs(excess - tau) < 5.0 * np.sqrt(3.0 * tau)


# --- bad input ------------------------------------------------------------------------------------------------------


def test_a_cut_that_removes_everything() -> None:
    with pytest.raises(InputError, match="category D0_e: the cut on e_res removes everything"):
        build_templates(seeded(selection={"e_res": {"min": 100.0}}, background=[], variation=[]), workers=1)


def test_a_window_without_stars() -> None:
    with pytest.raises(InputError, match=r"category Dst0_e: no event is reconstructed.*Widen the delta_m cut"):
        build_templates(seeded(selection={"delta_m": {"min": 0.5}}, background=[], variation=[]), workers=1)


def test_a_component_without_events() -> None:
    """A background that lies outside the cuts; the message names the component and the step."""
    shape = {
        "mm2": {"law": "uniform", "range": [-1.0, 1.0]},
        "el": {"law": "uniform", "range": [0.3, 1.0]},
        "q2": {"law": "uniform", "range": [1.0, 3.0]},
    }
    background = {"component": "junk", "events": 1000, "expected": {"D0_e": 5.0}, "shape": shape}
    with pytest.raises(InputError, match='component junk: the component has no events left after "cut on q2"'):
        build_templates(seeded(background=[background], variation=[]), workers=1)


def test_an_efficiency_beyond_one() -> None:
    table = {"name": "soft", "kind": "soft_pion_efficiency", "particle": "charged", "relative": 0.5}
    with pytest.raises(InputError, match=r"variation soft: the varied efficiency passes 1 \(got 0.8 × 1.5"):
        build_templates(seeded(variation=[table]), workers=1)


def test_a_failing_task_stops_the_build(monkeypatch: pytest.MonkeyPatch) -> None:
    """What a chunk raises comes out as it is, whatever the workers."""

    def broken(*_: object) -> None:
        raise RuntimeError("out of coffee")

    monkeypatch.setattr("semitau.gen.templates.chunk_tasks.fill_chunk", broken)
    assert build_module.NEGLIGIBLE > 0.0
    with pytest.raises(RuntimeError, match="out of coffee"):
        build_templates(seeded(), workers=2)
