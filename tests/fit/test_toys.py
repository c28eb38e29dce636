"""Toys: the same for any number of workers, drawn as they should be, and right where the answer is known."""

from __future__ import annotations

import numpy as np
import pytest
from numba import njit
from numpy.typing import NDArray
from scipy.stats import binomtest, chisquare, kstest, norm, poisson
from semitau.core.errors import InputError
from semitau.core.streams import event_key, stream_key
from semitau.fit import Model, linearity, run_toys
from semitau.fit.toys.poisson import log_factorial
from semitau.fit.toys.poisson import poisson as draw
from semitau.fit.toys.toys import draw_toy

from . import problems
from .test_newton import twins


def key(stream: np.uint64, i: int) -> np.uint64:
    return np.uint64(event_key(stream, np.uint64(i)))


@njit
def many(mean: float, stream: np.uint64, n: int) -> NDArray[np.float64]:
    out = np.empty(n)
    for i in range(n):
        out[i] = draw(mean, event_key(stream, np.uint64(i)), np.uint64(2))
    return out


@pytest.fixture(scope="module")
def model() -> Model:
    return Model(problems.small(factor=5.0))


def test_same_bits_for_any_number_of_workers(model: Model) -> None:
    one = run_toys(model, 150, 3, workers=1)
    for workers in (2, 3):
        other = run_toys(model, 150, 3, workers=workers)
        for name in ("values", "errors", "statistics", "statuses", "steps"):
            np.testing.assert_array_equal(getattr(one, name), getattr(other, name))
    fewer = run_toys(model, 41, 3)
    np.testing.assert_array_equal(fewer.values, one.values[:41])
    assert not np.array_equal(run_toys(model, 41, 4).values, fewer.values)


@pytest.mark.parametrize("mean", [1e-3, 0.4, 3.0, 9.99, 10.0, 11.5, 40.0, 1000.0])
def test_poisson_numbers(mean: float) -> None:
    """χ² against scipy's probabilities; fails by chance once in 1e5 seeds."""
    stream = stream_key(problems.SEED, "poisson test")
    numbers = many(mean, stream, 400_000)
    edges = np.unique(poisson.ppf(np.linspace(0.01, 0.99, 25), mean))  # every class, ends included, is well filled
    expected = np.diff(np.concatenate([[0.0], poisson.cdf(edges, mean), [1.0]])) * numbers.size
    observed = np.bincount(np.searchsorted(edges, numbers), minlength=edges.size + 1)
    assert expected.min() > 5 or expected.size == 2
    assert chisquare(observed, expected).pvalue > 1e-5


def test_poisson_far_out() -> None:
    """Means of 0 and a million: nothing, and the first two moments within five of their errors (1e-6)."""
    stream = stream_key(problems.SEED, "poisson test")
    assert draw(0.0, key(stream, 0), np.uint64(2)) == 0.0
    numbers = many(1e6, stream, 100_000)
    assert abs(numbers.mean() - 1e6) < 5 * 1e3 / np.sqrt(100_000)
    assert abs(numbers.var() / 1e6 - 1) < 5 * np.sqrt(2 / 100_000)


def test_log_factorial() -> None:
    """Against scipy.special.gammaln."""
    from scipy.special import gammaln

    for k in (0, 1, 5, 15, 16, 17, 100, 12345, 10**9):
        assert log_factorial(float(k)) == pytest.approx(gammaln(k + 1.0), rel=1e-13, abs=1e-14)


def test_auxiliary_measurements_fluctuate(model: Model) -> None:
    """Pooled over toys, all centres are normal with their widths. Each of five checks fails once in 1e5 seeds."""
    arrays, truth = model.layout.arrays, model.values({"R_D": 0.4, "R0": 0.5})
    means = np.where(model.layout.lane_bin >= 0, model.lane_expectations(truth), 0.0)
    stream = stream_key(problems.SEED, "draw test")
    gammas, centres, counts = [], [], []
    constrained = arrays.inverse_variance > 0
    filled = arrays.template_variance > 0
    for i in range(400):
        n, gamma, centre = np.zeros(means.size), np.zeros(means.size), np.zeros(truth.size)
        draw_toy(arrays, key(stream, i), truth, means, n, gamma, centre)
        gammas.append((gamma[filled] - 1) / np.sqrt(arrays.template_variance[filled]))
        centres.append(((centre - truth) * np.sqrt(arrays.inverse_variance))[constrained])
        counts.append(((n - means) / np.sqrt(np.where(means > 0, means, 1)))[means > 0])
        np.testing.assert_array_equal(centre[~constrained], truth[~constrained])
    assert kstest(np.concatenate(gammas), norm.cdf).pvalue > 1e-5
    assert kstest(np.concatenate(centres), norm.cdf).pvalue > 1e-5
    for pulls in (np.concatenate(gammas), np.concatenate(centres)):
        assert abs(pulls.var() - 1) < 4.5 * np.sqrt(2 / pulls.size)
    assert abs(np.concatenate(counts).var() - 1) < 4.5 * np.sqrt(2.5 / np.concatenate(counts).size)
    assert len({tuple(row) for row in np.round(gammas, 9)}) == 400


def test_known_answer_in_one_bin() -> None:
    """R = R0 (n - b)/s with error R0 √n/s: pulls and coverage are sums over the Poisson distribution of scipy.

    Each of the four comparisons fails by chance about once in 1e5 seeds.
    """
    toys = run_toys(Model(problems.one_bin()), 4000, problems.SEED)
    summary = toys.summary("R_D")
    n = np.arange(1, 400)
    weight, pull = poisson.pmf(n, 100.0), (n - 100.0) / np.sqrt(n)
    mean = float(weight @ pull)
    width = float(np.sqrt(weight @ (pull - mean) ** 2))
    assert abs(summary.pull_mean - mean) < 4.4 * summary.pull_mean_error
    assert abs(summary.pull_width - width) < 4.4 * summary.pull_width_error
    for part in summary.coverage:
        exact = float(weight[np.abs(pull) < part.half_width].sum())
        assert binomtest(part.inside, part.number, exact).pvalue > 1e-5
        assert part.low < part.fraction < part.high


def test_pulls_and_coverage_with_everything(model: Model) -> None:
    """Ratios, yields, nuisances, template statistics in the limit of many events: width 1, coverage nominal.

    Fails by chance once in about 1e4 seeds; the asymptotic answer itself is good to 1% here, which is allowed for.
    """
    toys = run_toys(Model(problems.small(factor=50.0)), 4000, problems.SEED)
    assert toys.failures == {}
    for summary in toys.summaries().values():
        assert abs(summary.bias) < 4.2 * summary.bias_error + 0.01 * summary.mean_error
        assert abs(summary.pull_width - 1) < 4.2 * summary.pull_width_error + 0.01
        assert abs(summary.spread / summary.mean_error - 1) < 0.06
        for part in summary.coverage:
            assert abs(part.fraction - part.nominal) < 4.2 * np.sqrt(part.nominal * (1 - part.nominal) / 4000) + 0.005


def test_frozen_auxiliaries_would_be_seen(model: Model) -> None:
    """The test above has teeth: errors without template statistics do not cover toys that have them."""
    heavy = problems.small(factor=50.0, variance=60.0)
    wide = run_toys(Model(heavy), 500, problems.SEED).summary("R_D")
    without = Model(heavy, template_statistics=False)
    assert run_toys(without, 500, problems.SEED).summary("R_D").mean_error < 0.9 * wide.mean_error


def test_other_injected_value(model: Model) -> None:
    toys = run_toys(model, 400, problems.SEED, injected={"R_D": 0.5})
    summary = toys.summary("R_D")
    assert summary.injected == 0.5
    assert abs(summary.bias) < 5 * summary.bias_error + 0.1 * summary.mean_error  # once in 1e6
    assert toys.summary("R_Dst").injected == pytest.approx(0.254)


def test_linearity(model: Model) -> None:
    """Slope 1 within 4.4 of its errors (once in 1e5), and the line itself against numpy's polynomial fit."""
    done: list[tuple[str, int, int]] = []
    result = linearity(model, (0.7, 1.0, 1.4), 300, problems.SEED, report=lambda *at: done.append(at))
    for name, line in result.lines.items():
        assert line.injected == pytest.approx([f * model.injected[model.index(name)] for f in (0.7, 1.0, 1.4)])
        (slope, intercept), covariance = np.polyfit(
            line.injected, line.fitted, 1, w=1 / np.array(line.fitted_errors), cov="unscaled"
        )
        assert (line.slope, line.intercept) == pytest.approx((slope, intercept), rel=1e-6)
        assert (line.slope_error, line.intercept_error) == pytest.approx(np.sqrt(np.diag(covariance)), rel=1e-6)
        assert abs(line.slope - 1) < 4.4 * line.slope_error
        assert line.degrees_of_freedom == 1
        assert "slope" in line.text
    assert done[-1] == ("linearity, factor 1.4", 300, 300)
    with pytest.raises(InputError, match="different injected values"):
        linearity(model, (1.0, 1.0), 10, 1)
    with pytest.raises(InputError, match="no ratio is free"):
        linearity(Model(problems.linear(10.0)), (1.0, 2.0), 10, 1)


def test_failures_are_counted() -> None:
    toys = run_toys(Model(twins()), 40, 1)
    assert toys.failures == {"the likelihood is too flat for errors": 40}
    assert toys.summary("R_D").failures == 40
    assert "nothing can be said" in toys.verdict()["R_D"].text


def test_arguments(model: Model) -> None:
    with pytest.raises(InputError, match="number of toys"):
        run_toys(model, 0, 1)
    with pytest.raises(InputError, match="seed"):
        run_toys(model, 1, -1)
    with pytest.raises(InputError, match="no such parameter"):
        run_toys(model, 1, 1, injected={"R_Dstar": 0.3})
    with pytest.raises(InputError, match="Did you mean 'R_Dst'"):
        run_toys(model, 1, 1, injected={"R_Dstr": 0.3})
    with pytest.raises(InputError, match="number of workers"):
        run_toys(model, 1, 1, workers=0)


def test_report(model: Model) -> None:
    seen: list[tuple[str, int, int]] = []
    run_toys(model, 70, 1, report=lambda label, done, total: seen.append((label, done, total)))
    assert seen == [("toys", 32, 70), ("toys", 64, 70), ("toys", 70, 70)]


def test_what_is_held_takes_its_functions_along() -> None:
    """A yield held at 1.2 times the expectation, and another tied to it: both are 1.2, by hand."""
    model = Model(problems.small(), functions={"yield_Dst_light": "yield_D_light"}, fixed={"yield_D_light": 1.2})
    held = model.holding(model.values({"R_D": 0.4}))
    assert [held[model.index(name)] for name in ("R_D", "yield_D_light", "yield_Dst_light")] == [0.4, 1.2, 1.2]
    assert model.values()[model.index("yield_Dst_light")] == 1.0
