"""The overall verdict and the list of things to look at."""

from __future__ import annotations

from dataclasses import replace

import pytest
from semitau.fit.toys.straightness import Line
from semitau.study.parts.toy_parts import overall_verdict
from semitau.study.results import Results, Toys
from semitau.study.run.worth_a_look import worth_a_look

STRAIGHT = Line(
    parameter="R_D",
    injected=(0.2, 0.3),
    fitted=(0.2, 0.3),
    fitted_errors=(0.001, 0.001),
    slope=1.0,
    slope_error=0.01,
    intercept=0.0,
    intercept_error=0.003,
    chi2=0.0,
    degrees_of_freedom=0,
    p_value=None,
)


@pytest.fixture
def toys(results: Results) -> Toys:
    assert results.toys is not None
    return results.toys


def changed(toys: Toys, **changes: object) -> Toys:
    """The first ratio with other conclusions."""
    first = toys.ratios[0].model_copy(update=changes)
    return toys.model_copy(update={"ratios": (first, *toys.ratios[1:])})


@pytest.mark.parametrize(
    ("changes", "status"),
    [
        ({}, "sound"),
        ({"judgement": "undecided", "excluded": 0.3}, "undecided"),
        ({"covers": False}, "doubtful"),
        ({"judgement": "undecided", "covers": False}, "doubtful"),
        ({"judgement": "biased", "excluded": 0.08}, "doubtful"),
        ({"judgement": "biased", "excluded": 0.4}, "unsound"),
    ],
)
def test_the_worst_decides(changes: dict[str, object], status: str, toys: Toys) -> None:
    assert overall_verdict(changed(toys, **changes), (), {"R_D": STRAIGHT}).status == status


def test_a_slope_three_errors_from_one_is_doubtful(toys: Toys) -> None:
    assert overall_verdict(toys, (), {"R_D": replace(STRAIGHT, slope=1.029)}).status == "sound"
    assert overall_verdict(toys, (), {"R_D": replace(STRAIGHT, slope=0.969)}).status == "doubtful"


def test_many_failures_are_doubtful_and_said(toys: Toys) -> None:
    verdict = overall_verdict(toys.model_copy(update={"failures": 100}), (), {})
    assert verdict.status == "doubtful"
    assert "of the toy fits failed" in verdict.sentences[-1]


def test_without_toys_nothing_is_claimed(toys: Toys) -> None:
    for nothing in (None, toys.model_copy(update={"ratios": ()})):
        verdict = overall_verdict(nothing, (), {})
        assert verdict.status == "undecided"
        assert "Nothing is known" in verdict.sentences[0]


def looked(results: Results, **changes: object) -> tuple[str, ...]:
    given = {"fit": results.fit, "ratios": results.ratios, "data": results.data, "cut_flow": results.cut_flow}
    return worth_a_look(**{**given, "protected_bins": 0, **changes})  # type: ignore[arg-type]


def test_a_good_study_needs_no_look(results: Results) -> None:
    flow = [part.model_copy(update={"steps": part.steps[:2]}) for part in results.cut_flow]
    inside = [part.steps[-1].model_copy(update={"efficiency": 0.96}) for part in flow]
    whole = [part.model_copy(update={"steps": (part.steps[0], step)}) for part, step in zip(flow, inside, strict=True)]
    assert looked(results, cut_flow=whole) == ()


def test_each_sign_has_its_line(results: Results) -> None:
    fit = results.fit
    assert fit.goodness is not None
    bad = fit.model_copy(update={"goodness": fit.goodness.model_copy(update={"toy_p_value": 1e-4})})
    assert "does not describe the data" in looked(results, fit=bad)[0]
    expected = results.data.model_copy(update={"kind": "expected"})
    assert not any("describe" in line for line in looked(results, fit=bad, data=expected))
    far = fit.parameters[-1].model_copy(update={"value": -3.4})
    pulled = fit.model_copy(update={"parameters": (*fit.parameters[:-1], far)})
    assert "tag resolution is fitted −3.4 standard deviations" in looked(results, fit=pulled)[0]
    assert "2 bins have an expectation" in looked(results, protected_bins=2)[0]
    thin = results.ratios[0].model_copy(update={"template_statistics": 0.02})
    assert "generate more events" in looked(results, ratios=[thin])[0]
    assert any("outside the axes" in line for line in looked(results))
