"""Pulls, constraints, shifts and the budget by holding in turn, against fits by iminuit and closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from semitau.core.templates import Nuisance, Template, TemplateSet
from semitau.fit import Model, held_in_turn, maximise, nuisance_shifts

from . import problems


def two_bins() -> TemplateSet:
    """A free signal in both bins, a background whose size a nuisance shifts by 20%: linear, so all is closed form."""
    base = problems.one_bin()
    background = np.array([400.0, 900.0])
    templates = {
        ("only", "signal"): Template(np.array([300.0, 100.0]), np.array([30.0, 10.0])),
        ("only", "rest"): Template(
            background, np.array([0.0, 0.0]), {"size": 1.2 * background}, {"size": 0.8 * background}
        ),
    }
    nuisances = (Nuisance("size", "size of the background", "backgrounds"),)
    return TemplateSet((problems.axes("only", 2),), base.components, base.parameters, nuisances, templates)


def information(variances: np.ndarray) -> np.ndarray:
    jacobian = np.array([[300 / 0.3, 100 / 0.3], [80.0, 180.0]])
    matrix: np.ndarray = (jacobian / variances) @ jacobian.T
    return matrix


def test_holding_in_turn_in_closed_form() -> None:
    """Gaussian errors of two parameters in two bins, from 2 by 2 matrices."""
    model = Model(two_bins())
    result = maximise(model, model.expected_data())
    rows = held_in_turn(model, result, "R_D")
    mu, templates = np.array([700.0, 1000.0]), np.array([30.0, 10.0])
    total = np.linalg.inv(information(mu + templates) + np.diag([0, 1]))[0, 0]
    no_templates = np.linalg.inv(information(mu) + np.diag([0, 1]))[0, 0]
    expected = {
        "statistical": 1 / information(mu)[0, 0],
        "template statistics": total - no_templates,
        "backgrounds": total - 1 / information(mu + templates)[0, 0],
    }
    assert result.error("R_D") ** 2 == pytest.approx(total, rel=1e-3)
    assert {source: part**2 for source, part in rows.items()} == pytest.approx(expected, rel=5e-3)


def test_pull_constraint_and_shift_in_closed_form() -> None:
    """Counts at θ = 0.7 as expected there: the fit finds a weighted mean with the auxiliary measurement at 0."""
    model = Model(two_bins())
    counts = model.expected_counts({"size": 0.7})
    result = maximise(model, counts)
    (shift,) = nuisance_shifts(model, counts, result)
    assert shift.pull == pytest.approx(result.value("size"))
    assert shift.constraint == pytest.approx(result.error("size"))
    assert 0 < shift.constraint < 1
    # Linear model: the conditional value moves by covariance over error.
    expected = result.correlation("R_D", "size") * result.error("R_D")
    low, high = shift.shifts["R_D"]
    assert high == pytest.approx(expected, rel=0.05)
    assert low == pytest.approx(-expected, rel=0.05)


def test_shifts_against_fits_with_the_nuisance_held() -> None:
    model = Model(problems.small())
    counts = np.random.default_rng(3).poisson(model.expected_counts()).astype(float)
    result = maximise(model, counts)
    shifts = nuisance_shifts(model, counts, result)
    assert {shift.name for shift in shifts} == {"slow_pion", "lepton_id", "R0", "yield_other"}
    sizes = [max(max(map(abs, ends)) / result.error(r) for r, ends in s.shifts.items()) for s in shifts]
    assert sizes == sorted(sizes, reverse=True)
    for shift in shifts:
        at = result.value(shift.name) + result.error(shift.name)
        held = maximise(Model(problems.small(), fixed={shift.name: at}), counts)
        for ratio, (_, high) in shift.shifts.items():
            assert high == pytest.approx(held.value(ratio) - result.value(ratio), abs=1e-5 * result.error(ratio))
