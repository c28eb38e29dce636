"""Goodness of fit in parts: against Poisson formulas, uniform p-values of good fits, and a defect that is put in."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import kstest
from semitau.fit import Model, maximise, quality, run_toys

from . import problems


@pytest.fixture(scope="module")
def model() -> Model:
    return Model(problems.small(factor=3.0))


def test_contributions_are_baker_cousins_terms() -> None:
    """Exact templates: 2[μ - n + n ln(n/μ)] bin by bin (NIM 221 (1984) 437)."""
    model = Model(problems.linear(100.0))
    n = np.random.default_rng(1).poisson(model.expected_counts()).astype(float)
    result = maximise(model, n)
    found = quality(model, n, result, run_toys(model, 40, 1))
    mu = model.expected_counts(result.values)
    expected = 2 * (mu - n + np.where(n > 0, n * np.log(np.maximum(n, 1) / mu), 0))
    np.testing.assert_allclose(found.contributions["wide"], expected, rtol=1e-9, atol=1e-12)
    assert found.bins == pytest.approx(found.statistic)
    assert found.constraints == pytest.approx(0, abs=1e-9)
    worst = found.worst[0]
    assert worst.significance**2 == pytest.approx(expected.max())
    assert worst.place == (int(np.argmax(expected)),)


def test_parts_add_up(model: Model) -> None:
    """Bins, the constraints' pulls and nothing else make the statistic; template factors included."""
    n = np.random.default_rng(2).poisson(model.expected_counts()).astype(float)
    result = maximise(model, n)
    found = quality(model, n, result, run_toys(model, 40, 1))
    pulls = sum(
        ((result.value(p.name) - p.injected) / p.constraint) ** 2 for p in model.parameters if p.constraint is not None
    )
    assert found.constraints == pytest.approx(pulls, rel=1e-6)
    assert sum(category.statistic for category in found.categories) == pytest.approx(found.bins)
    assert sum(category.bins for category in found.categories) == 21


def test_p_values_of_good_fits_are_uniform() -> None:
    """40 data sets from a model of exact templates: Kolmogorov test of three p-values; fails once in 3000."""
    model = Model(problems.small(factor=3.0), template_statistics=False)
    toys = run_toys(model, 200, problems.SEED)
    rng = np.random.default_rng(problems.SEED)
    found = []
    for _ in range(40):
        n = rng.poisson(model.expected_counts()).astype(float)
        part = quality(model, n, maximise(model, n), toys)
        found.append([part.categories[0].p_value, part.projections[0].p_value, part.projections[2].p_value])
    for p_values in np.array(found).T:
        assert kstest(p_values, "uniform").pvalue > 1e-4


def test_a_defect_is_found(model: Model) -> None:
    """One bin with six standard deviations too many events."""
    counts = model.expected_counts().round()
    counts[15] += 6 * np.sqrt(counts[15] + 1)
    found = quality(model, counts.round(), maximise(model, counts.round()), run_toys(model, 300, 1))
    assert found.worst[0].category == "Dst"
    assert found.worst[0].place == (2, 0)
    assert found.worst[0].significance > 3
    assert found.worst_p_value < 0.1
    assert found.categories[1].p_value < found.categories[0].p_value
