"""How far an average lies from a prediction, ratio by ratio and together; regions of an average."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from scipy import optimize, special, stats
from semitau.core.errors import InputError, Problem

from .combination import Average, chi2_at, lowest_point
from .input_vector import Floats


@dataclass(frozen=True)
class Prediction:
    """Predicted ratios: ratio -> (value, error), and the correlation of two errors. Errors may be zero.

    InputError if an error is negative or the correlation beyond ±1.
    """

    ratios: Mapping[str, tuple[float, float]]
    correlation: float = 0.0

    def __post_init__(self) -> None:
        for ratio, (_, error) in self.ratios.items():
            if not error >= 0.0:
                raise InputError(Problem("is no error", f"prediction: {ratio}", f"{error:g}", "not below 0"))
        if not -1.0 <= self.correlation <= 1.0:
            raise InputError(Problem("is no correlation", "prediction", f"{self.correlation:g}", "-1 to 1"))

    def covariance(self, ratios: tuple[str, ...]) -> Floats:
        """(ratios, ratios)."""
        errors = np.array([self.ratios[ratio][1] for ratio in ratios])
        off = self.correlation * (1.0 - np.eye(len(ratios)))
        return np.asarray(np.outer(errors, errors) * (np.eye(len(ratios)) + off))


@dataclass(frozen=True)
class Tension:
    """Average against prediction.

    each : ratio -> average minus prediction in standard deviations of the difference, the other ratio ignored.
    chi2, degrees_of_freedom, p_value : of all ratios together.
    sigmas : the Gaussian deviation, two-sided, with this p-value.
    """

    each: Mapping[str, float]
    chi2: float
    degrees_of_freedom: int
    p_value: float
    sigmas: float


def tension(average: Average, prediction: Prediction) -> Tension | None:
    """Tension in the ratios that both have; None if they share none.

    For the likelihood form chi^2 is the growth of the lowest chi^2 when the prediction joins with its own errors, and
    `each` takes the error of the average on the side of the prediction.
    """
    shared = tuple(ratio for ratio in average.ratios if ratio in prediction.ratios)
    if not shared:
        return None
    rows = [average.ratios.index(ratio) for ratio in shared]
    own = prediction.covariance(shared)
    difference = average.values[rows] - np.array([prediction.ratios[ratio][0] for ratio in shared])
    towards = np.where(difference > 0.0, average.down[rows], average.up[rows])
    each = difference / np.sqrt(towards**2 + np.diag(own))
    if average.form == "linear":
        covariance = average.covariance[np.ix_(rows, rows)] + own
        chi2 = float(difference @ np.linalg.solve(covariance, difference))
    else:
        chi2 = _growth(average, rows, difference, own)
    return Tension(
        dict(zip(shared, each.tolist(), strict=True)), chi2, len(shared),
        float(stats.chi2.sf(chi2, len(shared))), standard_deviations(chi2, len(shared)),
    )  # fmt: skip


def _growth(average: Average, rows: list[int], difference: Floats, own: Floats) -> float:
    """How much the lowest chi^2 of the inputs grows when true ratios must fit the prediction, too."""
    widths, axes = np.linalg.eigh(own)
    root = axes * np.sqrt(np.maximum(widths, 0.0))
    free = [k for k in range(len(average.values)) if k not in rows]

    def height(point: Floats) -> float:
        values = average.values.copy()
        values[rows] += -difference + root @ point[: len(rows)]
        values[free] += average.errors[free] * point[len(rows) :]
        return chi2_at(average.inputs, values) + float((point[: len(rows)] ** 2).sum())

    return max(lowest_point(height, np.zeros(len(average.values)))[1] - average.chi2, 0.0)


def standard_deviations(chi2: float, degrees_of_freedom: int) -> float:
    """The Gaussian deviation z, two-sided, with the p-value of a chi^2; also where the p-value underflows."""
    if degrees_of_freedom == 1:
        return float(np.sqrt(chi2))
    log_p = -0.5 * chi2 if degrees_of_freedom == 2 else float(stats.chi2.logsf(chi2, degrees_of_freedom))
    if log_p == -np.inf:  # first term of the tail of the incomplete gamma function
        half = 0.5 * degrees_of_freedom
        log_p = (half - 1.0) * np.log(0.5 * chi2) - 0.5 * chi2 - special.gammaln(half)
    if log_p > -1e-15:
        return 0.0
    most = np.sqrt(-2.0 * log_p) + 1.0
    return float(optimize.brentq(lambda z: np.log(2.0) + stats.norm.logsf(z) - log_p, 0.0, most, xtol=1e-12))


def contour(average: Average, confidence: float, points: int = 181) -> Floats:
    """(points, 2): the closed line around the first two ratios that holds them with this probability.

    An ellipse for the linear form; for the likelihood form where chi^2 has grown by the quantile of its distribution
    with two degrees of freedom, looked for along rays from the best point.
    """
    level = float(stats.chi2.ppf(confidence, 2))
    if average.form == "linear" or len(average.ratios) != 2:
        return ellipse(average.values[:2], average.covariance[:2, :2], level, points)
    rays = ellipse(np.zeros(2), average.covariance, level, points)

    def reach(ray: Floats) -> float:
        def excess(stretch: float) -> float:
            return chi2_at(average.inputs, average.values + stretch * ray) - average.chi2 - level

        far = 1.0
        while excess(far) < 0.0 and far < 50.0:
            far *= 1.3
        return float(optimize.brentq(excess, 0.0, far, xtol=1e-6)) if far < 50.0 else far

    return np.asarray(average.values + np.array([reach(ray) for ray in rays])[:, None] * rays)


def ellipse(centre: Floats, covariance: Floats, level: float, points: int = 181) -> Floats:
    """(points, 2): where the chi^2 of two Gaussian quantities is `level`; with 1 its shadows are the errors."""
    angle = np.linspace(0.0, 2.0 * np.pi, points)
    widths, axes = np.linalg.eigh(covariance)
    root = axes * np.sqrt(np.maximum(widths, 0.0))  # errors of zero make a line
    return np.asarray(centre + np.sqrt(level) * np.stack([np.cos(angle), np.sin(angle)], 1) @ root.T)
