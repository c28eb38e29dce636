"""Interval of one parameter from toys: Neyman construction ordered by the likelihood ratio.

A value belongs to the interval if the data's likelihood ratio there is not among the largest 1 - CL of toys drawn at
that value (J. Neyman, Phil. Trans. R. Soc. A 236 (1937) 333; ordering by the ratio: PRD 57 (1998) 3873). The other
parameters of the toys are those fitted to the data at that value (profile construction, Stat. Sinica 19 (2009) 301), so
coverage is exact for these and approximate elsewhere.

The p-value is found at a few values around where the likelihood curve puts the end. Its normal quantile is close to a
straight line in the parameter; a weighted parabola through it gives the end and its error from the number of toys.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from scipy.stats import chi2, norm
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.streams import stream_key
from semitau.core.templates import Floats

from ..fitting.data import Source
from ..fitting.model import Model
from ..fitting.result import FitResult
from ..uncertainty.curves import Conditional, crossing
from .pulls import LEVELS
from .ratio_toys import ratio_toys, shares_above

Report = Callable[[str, int, int], None]

REACH = (0.6, 0.8, 1.0, 1.2, 1.4)
"""Where p-values are found, in distances of the likelihood curve's end from the fitted value."""

FAILURES_AT_MOST = 0.05


@dataclass(frozen=True, eq=False)
class ToyInterval:
    """Interval of one parameter from toys.

    low, high : its ends; low_error, high_error : their standard errors from the finite number of toys.
    points, p_values, p_errors : where toys were drawn, and the share of them with a larger likelihood ratio than the
    data. toys : at each point. failures : toys whose fit failed.
    """

    parameter: str
    confidence: float
    value: float
    low: float
    high: float
    low_error: float
    high_error: float
    points: Floats
    p_values: Floats
    p_errors: Floats
    toys: int
    failures: int


def toy_interval(
    model: Model,
    data: Source,
    name: str,
    *,
    confidence: float = LEVELS[1],
    toys: int = 1000,
    seed: int = 1,
    precision: float = 0.1,
    workers: int | None = None,
    report: Report | None = None,
    result: FitResult | None = None,
) -> ToyInterval:
    """The interval of one parameter.

    toys : at each of ten values. precision : largest error of an end that is accepted, in errors of the parameter.
    result : the fit to these data if it is there already. report : called as report(label, done, total).

    Raises InputError for arguments that make no sense, and for too few toys for the precision (it says how many would
    do); RunError when the fit fails, the likelihood curve has no end, or too many toys fail.
    """
    _check(confidence, toys, precision)
    conditional = Conditional(model, data, [name], result)
    value, error = conditional.best.value(name), conditional.best.error(name)
    index, level = model.index(name), float(chi2.ppf(confidence, 1))
    points, shares, errors, ends, failures = list[float](), list[float](), list[float](), list[tuple[float, float]](), 0
    for side in (-1.0, 1.0):
        end = crossing(conditional, value, side * error, level)
        if not np.isfinite(end):
            raise RunError(
                Problem(
                    "the likelihood curve does not end on one side",
                    f"interval of {name}",
                    remedy="Fix or constrain other parameters, or use more data.",
                )
            )
        here = value + (end - value) * np.array(REACH)
        conditional.back()
        for number, at in enumerate(here.tolist()):
            observed = conditional.height(at)
            stream = stream_key(seed, "interval", name, int(side > 0), number)
            drawn = ratio_toys(model, index, conditional.x, toys, stream, workers)
            share, valid = shares_above(drawn, observed)
            failures += toys - valid
            points.append(at)
            # Half a toy on either side keeps the quantile of a share of 0 or 1 finite.
            shares.append((share * valid + 0.5) / (valid + 1.0) if valid else float("nan"))
            errors.append(float(np.sqrt(shares[-1] * (1.0 - shares[-1]) / max(1, valid))))
            if report is not None:
                report("interval", len(points), 2 * len(REACH))
        first = len(points) - len(REACH)
        ends.append(_end(here, np.array(shares[first:]), np.array(errors[first:]), confidence, value, end))
    if failures > FAILURES_AT_MOST * toys * len(points):
        raise RunError(
            Problem(
                "too many toys cannot be fitted",
                f"interval of {name}",
                f"{failures} of {toys * len(points)}",
                remedy="Merge bins, or fix or constrain parameters.",
            )
        )
    (low, low_error), (high, high_error) = ends
    worst = max(low_error, high_error) / error
    if not worst <= precision:
        needed = int(np.ceil(toys * (worst / precision) ** 2 * 1.2)) if np.isfinite(worst) else 10 * toys
        raise InputError(
            Problem(
                "too few toys for the asked precision",
                where=f"interval of {name}",
                got=f"{toys} toys, which give an end to {worst:.2g} of the error",
                wanted=f"{precision:g} of the error",
                remedy=f"Ask for {needed} toys, or for less precision.",
            )
        )
    return ToyInterval(
        name, confidence, value, low, high, low_error, high_error,
        np.array(points), np.array(shares), np.array(errors), toys, failures,
    )  # fmt: skip


def _end(
    points: Floats, shares: Floats, errors: Floats, confidence: float, value: float, end: float
) -> tuple[float, float]:
    """Where the p-value falls to 1 - confidence, and the error of that place; NaN if it does not within reach."""
    if not np.isfinite(shares).all():
        return float("nan"), float("nan")
    distance = (points - value) / (end - value)
    quantile = norm.isf(shares / 2.0)
    spread = np.maximum(errors, 1e-6) / (2.0 * norm.pdf(quantile))
    design = np.stack([np.ones_like(distance), distance - 1.0, (distance - 1.0) ** 2], axis=1)
    precision = design.T @ (design / spread[:, None] ** 2)
    covariance = np.linalg.inv(precision)
    level, slope, bend = covariance @ design.T @ (quantile / spread**2)
    goal = norm.isf((1.0 - confidence) / 2.0)
    roots = np.roots([bend, slope, level - goal]) if abs(bend) > 1e-12 else np.array([(goal - level) / slope])
    real = roots[np.isreal(roots)].real
    if real.size == 0:
        return float("nan"), float("nan")
    at = float(real[np.argmin(np.abs(real))])
    if not REACH[0] - 1.2 < at < REACH[-1] - 0.8:
        return float("nan"), float("nan")
    row = np.array([1.0, at, at * at])
    tilt = slope + 2.0 * bend * at
    error = float(np.sqrt(row @ covariance @ row) / abs(tilt)) if tilt > 0 else float("nan")
    return value + (end - value) * (1.0 + at), abs(end - value) * error


def _check(confidence: float, toys: int, precision: float) -> None:
    problems = []
    if not 0.0 < confidence < 1.0:
        problems.append(Problem("a confidence lies between 0 and 1", "confidence", got=repr(confidence)))
    if isinstance(toys, bool) or not isinstance(toys, int | np.integer) or toys < 1:
        problems.append(Problem("the number of toys is a whole number", "toys", got=repr(toys), wanted="1 or more"))
    if not precision > 0.0:
        problems.append(Problem("a precision is positive", "precision", got=repr(precision)))
    if problems:
        raise InputError(*problems)
