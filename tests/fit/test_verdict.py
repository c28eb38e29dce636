"""The verdict says no more than the toys do."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import binom
from semitau.fit.toys.pulls import Summary, binomial_interval, coverage, summarise
from semitau.fit.toys.verdict import judge

from .problems import SEED


def toys(n: int, *, bias: float = 0.0, width: float = 1.0, error: float = 0.05, seed: int = SEED) -> Summary:
    """Normal pulls about `bias` errors, scaled so that their mean is exactly that: no luck in these tests."""
    pulls = np.random.default_rng(seed).normal(size=n)
    pulls = (pulls - pulls.mean()) / pulls.std() * width + bias
    return summarise("R_D", 0.3, 0.3 + error * pulls, np.full(n, error), n)


def test_too_few_toys_are_undecided() -> None:
    verdict = judge(toys(50))
    assert verdict.judgement == "undecided"
    assert verdict.excluded == pytest.approx(2.010 / np.sqrt(50), rel=0.03)  # Student, 49 degrees (handbook table)
    assert verdict.toys_needed == pytest.approx(385, abs=10)  # (1.96/0.1)²
    assert "only exclude a bias beyond 0.29" in verdict.text
    assert "no bias" not in verdict.text


def test_many_toys_bound_the_bias() -> None:
    verdict = judge(toys(2000))
    assert verdict.judgement == "unbiased"
    assert "2000 toys exclude a bias beyond 0.044" in verdict.text
    assert verdict.covers


def test_bias_is_found() -> None:
    verdict = judge(toys(2000, bias=0.15))
    assert verdict.judgement == "biased"
    assert verdict.significance == pytest.approx(0.15 * np.sqrt(2000), rel=1e-2)
    assert "biased by +0.0075 ± 0.0011, +0.150 of the fit's error" in verdict.text


@pytest.mark.parametrize(("width", "way"), [(1.2, "too small"), (0.8, "too large")])
def test_wrong_errors_are_found(width: float, way: str) -> None:
    verdict = judge(toys(2000, width=width))
    assert not verdict.covers
    assert f"they look {way}" in verdict.text


def test_no_toys() -> None:
    for n in (0, 1):
        verdict = judge(summarise("R_D", 0.3, np.full(n, 0.31), np.full(n, 0.05), 1))
        assert verdict.judgement == "undecided"
        assert "nothing can be said" in verdict.text


@pytest.mark.parametrize("n", [2, 3, 5, 10])
def test_few_toys_raise_no_false_alarm(n: int) -> None:
    """Normal values: |t| of n - 1 degrees of freedom (textbook law of the mean of few), as rare as for many; by the
    binomial law with p = 0.0027 more than 20 of 2000 are "biased" once in 1e6 seeds. Errors are not judged."""
    rng = np.random.default_rng(SEED)
    verdicts = [judge(summarise("R_D", 0.3, 0.3 + 0.05 * rng.normal(size=n), np.full(n, 0.05), n)) for _ in range(2000)]
    assert sum(verdict.judgement == "biased" for verdict in verdicts) <= 20
    assert sum(not verdict.covers for verdict in verdicts) <= 20


def test_failures_are_told() -> None:
    summary = summarise("R_D", 0.3, np.linspace(0.2, 0.4, 90), np.full(90, 0.05), 100)
    assert "10 of 100 fits failed" in judge(summary).text


def test_false_alarms_are_as_rare_as_said() -> None:
    """Unbiased sets called biased: binomial with p = 0.0027. More than 12 of 1000 come once in 1e5 seeds."""
    rng = np.random.default_rng(SEED)
    calls = 0
    for _ in range(1000):
        values = 0.3 + 0.05 * rng.normal(size=200)
        calls += judge(summarise("R_D", 0.3, values, np.full(200, 0.05), 200)).judgement == "biased"
    assert calls <= 12


def test_coverage_interval() -> None:
    """Clopper and Pearson's definition: the tails at the ends hold half of what is left, by scipy's binomial."""
    low, high = binomial_interval(683, 1000, 0.6827)
    assert binom.sf(682, 1000, low) == pytest.approx(0.15865, abs=1e-6)
    assert binom.cdf(683, 1000, high) == pytest.approx(0.15865, abs=1e-6)
    assert binomial_interval(0, 10, 0.9)[0] == 0.0
    assert binomial_interval(10, 10, 0.9)[1] == 1.0
    part = coverage(2, 95, 100)
    assert (part.nominal, part.fraction) == (pytest.approx(0.9545, abs=1e-4), 0.95)


def test_summary_of_known_numbers() -> None:
    """Mean, standard deviation and their errors against numpy on the same numbers."""
    values, errors = np.array([0.28, 0.31, 0.36, 0.33]), np.array([0.04, 0.05, 0.06, 0.05])
    summary = summarise("R_D", 0.3, values, errors, 5)
    assert summary.bias == pytest.approx(values.mean() - 0.3)
    assert summary.bias_error == pytest.approx(values.std(ddof=1) / 2)
    pulls = (values - 0.3) / errors
    assert summary.pull_width == pytest.approx(pulls.std(ddof=1))
    assert (summary.fitted, summary.failures) == (4, 1)


def test_error_of_the_width() -> None:
    """Against the spread over many sets, for normal numbers (where it is σ/√(2(n-1))) and for flat ones."""
    rng = np.random.default_rng(SEED)
    for draw in (rng.standard_normal, lambda size: rng.uniform(-1, 1, size)):
        widths, errors = [], []
        for _ in range(400):
            summary = summarise("x", 0.0, draw(300), np.ones(300), 300)
            widths.append(summary.pull_width)
            errors.append(summary.pull_width_error)
        assert np.std(widths) == pytest.approx(np.mean(errors), rel=0.2)  # 1/√800 = 3.5%: five of these
