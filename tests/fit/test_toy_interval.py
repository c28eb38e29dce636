"""Intervals from toys against exact Poisson intervals, and measured coverage against exact sums over all counts."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import chi2, poisson
from semitau.core.errors import InputError
from semitau.fit import Model, interval_coverage, maximise, profile, region_coverage, toy_interval

from . import problems

N = np.arange(400)


def height(n: np.ndarray, mu: float) -> np.ndarray:
    """-2 ln of the likelihood ratio of one bin, whose best μ is n; from the Poisson formula."""
    return 2 * (mu - n + np.where(n > 0, n * np.log(np.maximum(n, 1) / mu), 0.0))


def share_above(observed: int, mu: float) -> float:
    """Exact chance of a likelihood ratio at least as large as observed."""
    return float(poisson.pmf(N, mu)[height(N, mu) >= height(np.array([observed]), mu)[0] - 1e-9].sum())


def test_interval_of_one_bin() -> None:
    """Exact p-value summed over all counts, where it equals 1 - CL after smoothing its steps; 4 σ of the toys."""
    model, n = Model(problems.one_bin()), 117
    found = toy_interval(model, np.array([float(n)]), "R_D", toys=4000, seed=problems.SEED % 2**31)
    for at, share, error in zip(found.points, found.p_values, found.p_errors, strict=True):
        assert share == pytest.approx(share_above(n, 60 + 40 * at / 0.3), abs=4.5 * error + 1e-3)
    curve = profile(model, np.array([float(n)]), "R_D")
    # 117 events: the asymptotic ends are good to a few percent of the error, and the steps of p are of that size.
    error = maximise(model, np.array([float(n)])).error("R_D")
    assert abs(found.low - curve.low) < 0.08 * error + 4 * found.low_error
    assert abs(found.high - curve.high) < 0.08 * error + 4 * found.high_error


def test_interval_in_the_gaussian_limit() -> None:
    """Many events, exact templates: value ± error."""
    model = Model(problems.linear(1e6))
    result = maximise(model, model.expected_data())
    found = toy_interval(model, model.expected_data(), "yield_b", toys=2000, confidence=0.954499736)
    for end, error, sign in ((found.low, found.low_error, -1), (found.high, found.high_error, 1)):
        assert end == pytest.approx(result.value("yield_b") + 2 * sign * result.error("yield_b"), abs=4 * error)
        assert error < 0.1 * result.error("yield_b")


def test_same_seed_same_interval() -> None:
    model = Model(problems.small())
    once, again = (
        toy_interval(model, model.expected_data(), "R_D", toys=300, precision=1, workers=workers) for workers in (1, 2)
    )
    assert (once.low, once.high) == (again.low, again.high)
    np.testing.assert_array_equal(once.p_values, again.p_values)


def test_coverage_of_one_bin_is_that_of_a_sum_over_counts() -> None:
    """Exact coverage from Poisson probabilities; 2000 toys, 4 σ."""
    model, mu = Model(problems.one_bin(4.0, 5.0)), 9.0
    found = interval_coverage(model, "R_D", 2000, problems.SEED, inner=0)
    weights = poisson.pmf(N, mu)
    for held, level in zip(found.profile, (0.6826894921, 0.9544997361), strict=True):
        exact = float(weights[height(N, mu) < chi2.ppf(level, 1)].sum())
        assert held.fraction == pytest.approx(exact, abs=4 * np.sqrt(exact * (1 - exact) / 2000))
    for held, width in zip(found.curvature, (1, 2), strict=True):
        exact = float(weights[np.abs(N - mu) < width * np.sqrt(np.maximum(N, 1e-9))].sum())
        assert held.fraction == pytest.approx(exact, abs=4 * np.sqrt(exact * (1 - exact) / 2000))


def test_toy_intervals_cover() -> None:
    """Never less than nominal in one bin (Neyman); 300 toys of 400, 4 σ below."""
    found = interval_coverage(Model(problems.one_bin(4.0, 5.0)), "R_D", 300, problems.SEED, inner=400)
    for held, level in zip(found.toys, (0.6827, 0.9545), strict=True):
        assert held.fraction > level - 4 * np.sqrt(level * (1 - level) / 300)


def test_regions_cover_in_the_gaussian_limit() -> None:
    """χ² of two degrees of freedom: 39.3, 68.3, 95.4, 99.7%; 2000 toys, 4 σ each."""
    found = region_coverage(Model(problems.linear(1e5)), ("yield_a", "yield_c"), 2000, problems.SEED)
    for held, level in zip(found.values(), (0.393469, 0.682689, 0.9545, 0.9973), strict=True):
        assert held.confidence == pytest.approx(level, abs=1e-4)
        assert held.fraction == pytest.approx(level, abs=4 * np.sqrt(level * (1 - level) / 2000))


def test_crossings_to_a_thousandth_of_the_error() -> None:
    """One bin, μ = b + s R/R0: where 2[μ - n + n ln(n/μ)] is 1 and 4, by scipy."""
    n = 117.0
    curve = profile(Model(problems.one_bin()), np.array([n]), "R_D")
    error = 0.3 / 40 * np.sqrt(n)
    for level, low, high in ((1.0, curve.low, curve.high), (4.0, curve.low_two, curve.high_two)):
        for found, ends in ((low, (60, n)), (high, (n, 250))):
            mu = brentq(lambda mu, level=level: height(np.array([n]), mu)[0] - level, *ends, xtol=1e-10)
            assert found == pytest.approx(0.3 * (mu - 60) / 40, abs=1e-5 * error)


def test_too_few_toys_for_the_precision() -> None:
    model = Model(problems.small())
    with pytest.raises(InputError, match=r"too few toys for the asked precision .*Ask for \d+ toys"):
        toy_interval(model, model.expected_data(), "R_D", toys=50, precision=0.001)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"toys": 0}, "number of toys"),
        ({"confidence": 1.0}, "between 0 and 1"),
        ({"precision": 0.0}, "precision is positive"),
    ],
)
def test_arguments(arguments: dict[str, Any], message: str) -> None:
    model = Model(problems.small())
    with pytest.raises(InputError, match=message):
        toy_interval(model, model.expected_data(), "R_D", **arguments)


def test_fixed_parameters_have_no_interval() -> None:
    model = Model(problems.small(), fixed={"R_D": 0.3})
    with pytest.raises(InputError, match="fixed parameter"):
        interval_coverage(model, "R_D", 10, 1)
