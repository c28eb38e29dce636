"""Goodness of fit and budget against closed forms, simulation and brute force."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import chi2, kstest
from semitau.core.errors import RunError
from semitau.fit import Data, Model, budget, maximise, run_toys
from semitau.fit.uncertainty.decomposition import STATISTICAL, TEMPLATES, budget_of

from . import problems
from .test_newton import counts, twins


def test_statistic_of_exact_templates() -> None:
    """2 Σ [μ - n + n ln(n/μ)] (Baker and Cousins, NIM 221 (1984) 437, eq. for the Poisson case), by hand."""
    model = Model(problems.linear(100.0))
    n = counts(model)
    result = maximise(model, n)
    mu = model.expected_counts(result.values)
    assert result.goodness.statistic == pytest.approx(2 * np.sum(mu - n + n * np.log(n / mu)), rel=1e-10)
    assert result.goodness.degrees_of_freedom == 12 - 3
    assert result.goodness.p_value == pytest.approx(chi2.sf(result.goodness.statistic, 9))


def test_degrees_of_freedom() -> None:
    """21 bins; two ratios and two light yields are free; constrained parameters count neither way."""
    model = Model(problems.small())
    assert maximise(model, counts(model)).goodness.degrees_of_freedom == 21 - 4
    held = Model(problems.small(), fixed={"R_D": 0.3, "R0": 1.0})
    assert maximise(held, counts(model)).goodness.degrees_of_freedom == 21 - 3 + 1
    assert maximise(Model(problems.one_bin()), np.array([90.0])).goodness.p_value is None


@pytest.mark.parametrize("templates", [problems.linear(1000.0), problems.small(factor=20.0)])
def test_statistic_follows_chi_square(templates: problems.TemplateSet) -> None:
    """Where bins hold many events, with template statistics and constraints too. Fails by chance once in 1e4 seeds."""
    model = Model(templates)
    toys = run_toys(model, 2000, problems.SEED)
    degrees = maximise(model, model.expected_data()).goodness.degrees_of_freedom
    assert toys.valid.all()
    assert kstest(toys.statistics, chi2(degrees).cdf).pvalue > 1e-4
    middle = float(np.median(toys.statistics))
    assert toys.share_above(middle) == pytest.approx(0.5, abs=1e-3)


def test_budget_of_one_bin() -> None:
    """σ_R = R0/s √(n + V): √n from the counts, √V from the templates."""
    model = Model(problems.one_bin(variance=25.0))
    part = budget(model, maximise(model, model.expected_data()))["R_D"]
    assert part.rows[STATISTICAL] == pytest.approx(0.3 / 40.0 * np.sqrt(100.0))
    assert part.rows[TEMPLATES] == pytest.approx(0.3 / 40.0 * np.sqrt(25.0))
    assert part.systematic == 0.0
    assert part.total == pytest.approx(0.3 / 40.0 * np.sqrt(125.0))


def test_budget_against_refits() -> None:
    """Brute force: every count, auxiliary measurement and template factor is moved by part of its own error, refitted,
    and the shifts of the ratio are added in quadrature, source by source."""
    model = Model(problems.small())
    base = model.expected_data()
    result = maximise(model, base)
    step = 1e-3

    def slope(name: str, counts: np.ndarray, centres: np.ndarray, gammas: np.ndarray) -> float:
        values = []
        for sign in (1, -1):
            data = Data(base.counts + sign * counts, base.centres + sign * centres, base.gamma_centres + sign * gammas)
            values.append(maximise(model, data).value(name))
        return (values[0] - values[1]) / (2 * step)

    sigma = np.concatenate([part.ravel() for part in model.template_errors().values()])
    nothing, still = np.zeros(model.bins), np.zeros(len(model.names))
    for name in ("R_D", "R_Dst"):
        squares: dict[str, float] = {STATISTICAL: 0.0, TEMPLATES: 0.0}
        for i in range(model.bins):
            unit = np.eye(model.bins)[i] * step
            squares[STATISTICAL] += slope(name, unit * np.sqrt(base.counts), still, nothing) ** 2
            squares[TEMPLATES] += slope(name, nothing, still, unit * sigma) ** 2
        for k, parameter in enumerate(model.parameters):
            if parameter.constraint is not None:
                unit = np.eye(len(model.names))[k] * step * parameter.constraint
                squares[parameter.group] = squares.get(parameter.group, 0.0) + slope(name, nothing, unit, nothing) ** 2
        ours = budget(model, result)[name]
        assert set(ours.rows) == set(squares) == {STATISTICAL, TEMPLATES, "yields", "efficiency", "form factors"}
        for source, square in squares.items():
            assert ours.rows[source] == pytest.approx(np.sqrt(square), rel=2e-3), source


def test_budget_adds_up() -> None:
    model = Model(problems.real_size())
    result = maximise(model, counts(model))
    for name, part in budget(model, result).items():
        assert part.total == result.error(name)
        assert sum(row**2 for row in part.rows.values()) == pytest.approx(part.total**2, rel=1e-12)
        rest = [row for source, row in part.rows.items() if source not in (STATISTICAL, TEMPLATES)]
        assert part.systematic**2 == pytest.approx(sum(row**2 for row in rest))
        assert sum(row**2 for row in part.sources.values()) == pytest.approx(part.systematic**2)


def test_exact_templates_have_no_row() -> None:
    model = Model(problems.small(), template_statistics=False)
    part = budget_of(model, maximise(model, model.expected_data()), "R_D")
    assert part.rows[TEMPLATES] == 0.0


def test_no_budget_without_errors() -> None:
    model = Model(twins())
    with pytest.raises(RunError, match="no error to take apart"):
        budget(model, maximise(model, counts(model)))
    held = Model(problems.small(), fixed={"R_D": 0.3})
    result = maximise(held, held.expected_data())
    assert set(budget(held, result)) == {"R_Dst"}
    with pytest.raises(RunError, match="held fixed"):
        budget_of(held, result, "R_D")
