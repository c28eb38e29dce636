"""What a set of toys says of one parameter: bias, pulls, coverage, each with its own error."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.stats import beta, norm
from semitau.core.templates import Floats

LEVELS = {1: float(2.0 * norm.cdf(1.0) - 1.0), 2: float(2.0 * norm.cdf(2.0) - 1.0)}
"""Half-width of an interval in errors -> the share of true values it should hold: 68.3% and 95.4%."""


@dataclass(frozen=True)
class Coverage:
    """How often the injected value lies within fitted ± half_width errors.

    nominal : what it should be; fraction : what it is, `inside` of `number` toys;
    low, high : its exact binomial interval at 68.3% confidence (Clopper and Pearson, Biometrika 26 (1934) 404).
    """

    half_width: int
    nominal: float
    inside: int
    number: int
    fraction: float
    low: float
    high: float


@dataclass(frozen=True)
class Summary:
    """Toys of one parameter; every `..._error` is one standard deviation from the finite number of toys.

    bias : mean of fitted minus injected. mean_error : mean error that the fits gave. spread : standard deviation of
    the fitted values. pull : (fitted - injected)/error. toys counts all, failures those whose fit failed; all else is
    from the others. Numbers that too few toys leave undefined are NaN.
    """

    parameter: str
    injected: float
    toys: int
    failures: int
    bias: float
    bias_error: float
    mean_error: float
    spread: float
    pull_mean: float
    pull_mean_error: float
    pull_width: float
    pull_width_error: float
    coverage: tuple[Coverage, ...]

    @property
    def fitted(self) -> int:
        """Toys whose fit succeeded."""
        return self.toys - self.failures


def summarise(parameter: str, injected: float, values: Floats, errors: Floats, toys: int) -> Summary:
    """values, errors : (valid toys,) of the toys whose fit succeeded; toys : number of all of them."""
    pulls = (values - injected) / errors
    spread, _ = _spread(values)
    pull_width, pull_width_error = _spread(pulls)
    root = np.sqrt(max(1, values.size))
    return Summary(
        parameter=parameter,
        injected=injected,
        toys=toys,
        failures=toys - values.size,
        bias=_mean(values) - injected,
        bias_error=float(spread / root),
        mean_error=_mean(errors),
        spread=spread,
        pull_mean=_mean(pulls),
        pull_mean_error=float(pull_width / root),
        pull_width=pull_width,
        pull_width_error=pull_width_error,
        coverage=tuple(coverage(width, int(np.sum(np.abs(pulls) < width)), pulls.size) for width in LEVELS),
    )


def coverage(half_width: int, inside: int, number: int) -> Coverage:
    """Coverage of fitted ± half_width errors that held the injected value `inside` times of `number`."""
    low, high = binomial_interval(inside, number, LEVELS[1])
    fraction = inside / number if number else float("nan")
    return Coverage(half_width, LEVELS[half_width], inside, number, fraction, low, high)


def binomial_interval(k: int, n: int, confidence: float) -> tuple[float, float]:
    """Exact interval (Clopper and Pearson) for a probability after k successes in n; (0, 1) for n = 0."""
    tail = 0.5 * (1.0 - confidence)
    low = float(beta.ppf(tail, k, n - k + 1)) if k > 0 else 0.0
    high = float(beta.isf(tail, k + 1, n - k)) if k < n else 1.0
    return low, high


def _mean(values: Floats) -> float:
    return float(values.mean()) if values.size else float("nan")


def _spread(values: Floats) -> tuple[float, float]:
    """Standard deviation and its error, from the fourth moment: no distribution is assumed."""
    if values.size < 2:
        return float("nan"), float("nan")
    width = float(values.std(ddof=1))
    fourth = float(np.mean((values - values.mean()) ** 4))
    if not width > 0:
        return width, 0.0
    return width, float(np.sqrt(max(0.0, fourth - width**4) / values.size) / (2.0 * width))
