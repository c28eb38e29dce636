"""What a fit is given can be wrong in many ways; each is told with its place and what to do."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from semitau.core.errors import InputError, SemitauError
from semitau.core.templates import Template, TemplateSet
from semitau.fit import Model, interval_coverage, maximise, run_toys, toy_interval

from . import problems
from .test_newton import twins


def changed(name: str, make: Callable[[Template], Template]) -> TemplateSet:
    templates = problems.linear(100.0)
    return replace(
        templates, templates={**templates.templates, ("wide", name): make(templates.templates["wide", name])}
    )


def expected() -> np.ndarray:
    return Model(problems.linear(100.0)).expected_counts().round()


def with_count(value: float) -> np.ndarray:
    counts = expected()
    counts[3] = value
    return counts


BAD: dict[str, tuple[Callable[[], object], str]] = {
    "mismatched axes": (
        lambda: changed("b", lambda t: Template(t.nominal[:-1], t.variance[:-1])),
        r"wide/b: shape differs from the axes \(got \(11,\), allowed \(12,\)\)",
    ),
    "variance of another shape": (
        lambda: Template(np.ones(3), np.ones(4)),
        r"variance: shape differs from the nominal \(got \(4,\), allowed \(3,\)\)",
    ),
    "missing side": (
        lambda: Template(np.ones(3), np.ones(3), {"tilt": np.ones(3)}, {}),
        r"minus/tilt: one side of a variation is missing. Add it beside plus/tilt.",
    ),
    "component without events": (
        lambda: Model(changed("b", lambda t: Template(0 * t.nominal, t.variance * 0))),
        r"parameter yield_b: no template depends on this free parameter",
    ),
    "template not finite": (lambda: Template(np.array([1.0, np.nan]), np.ones(2)), r"nominal bin \[1\]: not finite"),
    "negative variance": (
        lambda: Template(np.ones(2), np.array([1.0, -1.0])),
        r"variance bin \[1\]: negative variance",
    ),
    "negative expectation": (
        lambda: Model(changed("b", lambda t: Template(t.nominal - 1000, t.variance))),
        r"category wide, bin \[0\]: the components together expect a negative number",
    ),
    "negative count": (
        lambda: maximise(Model(problems.linear(100.0)), with_count(-1)),
        r"bin \[3\]: the count is negative",
    ),
    "count not finite": (
        lambda: maximise(Model(problems.linear(100.0)), with_count(np.nan)),
        r"bin \[3\]: the count is not finite",
    ),
    "counts of another shape": (
        lambda: maximise(Model(problems.linear(100.0)), expected()[:-1]),
        r"the counts have the wrong shape \(got \(11,\), allowed \(12,\)\)",
    ),
    "no toys": (lambda: run_toys(Model(problems.linear()), 0, 1), "number of toys must be a whole number"),
    "coverage of no toys": (
        lambda: interval_coverage(Model(problems.linear()), "yield_a", 0, 1),
        "number of toys must be a whole number",
    ),
    "too few toys": (
        lambda: toy_interval(Model(problems.linear(100.0)), expected(), "yield_a", toys=30, precision=1e-3),
        r"too few toys for the asked precision .*Ask for \d+ toys",
    ),
}


@pytest.mark.parametrize("case", list(BAD))
def test_told_with_its_place(case: str) -> None:
    make, message = BAD[case]
    with pytest.raises(SemitauError, match=message) as caught:
        make()
    assert isinstance(caught.value, InputError)


def test_components_that_look_alike_are_named_with_their_direction() -> None:
    """Two identical templates: only the sum is known, so the direction is (1, -1) in events."""
    model = Model(twins())
    result = maximise(model, model.expected_counts())
    assert not result.valid
    (reason,) = result.reasons
    assert reason.what == "the data cannot tell these parameters apart"
    names = reason.where.split(", ")
    assert len(names) == 2
    assert all(name in reason.got for name in names)
    assert "-" in reason.got
    assert "Fix or constrain one of them" in reason.remedy
