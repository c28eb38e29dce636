"""Linearity: toys at several injected ratios, and a straight line through what the fit makes of them."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
from scipy.stats import chi2, norm
from semitau.core.errors import InputError, Problem
from semitau.core.kept import Kept
from semitau.core.streams import stream_key
from semitau.core.true_minus import formatted

from ..fitting.model import Model
from .toys import Report, ToyResults, run_toys, toys_kept
from .verdict import AT_95, SIGNIFICANT


@dataclass(frozen=True)
class Line:
    """Weighted least-squares line fitted = intercept + slope × injected, for one ratio.

    injected, fitted, fitted_errors : the points: mean of the fitted values and its error at each injected value.
    chi2, degrees_of_freedom, p_value : how well a line describes them; p_value None for two points.
    """

    parameter: str
    injected: tuple[float, ...]
    fitted: tuple[float, ...]
    fitted_errors: tuple[float, ...]
    slope: float
    slope_error: float
    intercept: float
    intercept_error: float
    chi2: float
    degrees_of_freedom: int
    p_value: float | None

    @property
    def text(self) -> str:
        """What the line shows, in words."""
        slope = f"{self.parameter}: slope {self.slope:.4f} ± {self.slope_error:.4f}"
        away = (self.slope - 1.0) / self.slope_error
        intercept = f"intercept {formatted(self.intercept, '+.4f')} ± {self.intercept_error:.4f}"
        if abs(away) >= SIGNIFICANT:
            return f"{slope}, {abs(away):.1f} standard deviations from 1, {intercept}: not linear with slope 1."
        reach = abs(self.slope - 1.0) + AT_95 * self.slope_error
        text = (
            f"{slope} ({abs(away):.1f} standard deviations from 1), {intercept}; "
            f"a slope further than {reach:.1%} from 1 is excluded at 95% confidence."
        )
        if self.p_value is not None and self.p_value < 2.0 * norm.sf(SIGNIFICANT):
            text += f" The points do not lie on a line (p = {formatted(self.p_value, '.1g')})."
        return text


@dataclass(frozen=True, eq=False)
class Linearity:
    """factors : what all ratios were multiplied with; points : the toys of each; lines : ratio -> its line."""

    factors: tuple[float, ...]
    points: tuple[ToyResults, ...]
    lines: dict[str, Line]


def linearity(
    model: Model,
    factors: Sequence[float],
    n: int,
    seed: int,
    workers: int | None = None,
    report: Report | None = None,
    kept: Kept | None = None,
) -> Linearity:
    """Draw and fit n toys at each of several injected values of the ratios.

    factors : at least two different positive numbers; each multiplies the injected value of every ratio.
    seed, workers, report, kept : as for run_toys; the points have toys of their own.

    Raises InputError for bad factors, or when no ratio is free.
    """
    checked = tuple(float(factor) for factor in factors)
    if len(set(checked)) < 2 or not all(isfinite(factor) and factor > 0 for factor in checked):
        raise InputError(
            Problem("linearity needs different injected values", "factors", str(list(factors)), "two or more above 0")
        )
    if model.following:
        raise InputError(
            Problem(
                "ratios that follow coefficients have no multiples",
                "linearity",
                got=", ".join(model.coefficients),
                remedy="Hold the coefficients at a point instead.",
            )
        )
    free = _free_ratios(model)
    if not free:
        raise InputError(Problem("no ratio is free: there is no linearity to test", "linearity"))
    points = [
        run_toys(model, n, stream, workers, report, injected=injected, label=f"linearity, factor {factor:g}", kept=kept)
        for factor, stream, injected in _points(model, checked, seed)
    ]
    return Linearity(checked, tuple(points), {name: _line(name, points) for name in free})


def linearity_kept(model: Model, factors: Sequence[float], n: int, seed: int, kept: Kept | None) -> int:
    """How many toys `linearity` would find kept, of n at each factor."""
    points = _points(model, factors, seed)
    return sum(min(n, toys_kept(model, stream, kept, injected)) for _, stream, injected in points)


def _free_ratios(model: Model) -> list[str]:
    parameters = [model.parameters[model.index(name)] for name in model.ratios]
    return [parameter.name for parameter in parameters if parameter.kind == "ratio" and parameter.fixed is None]


def _points(model: Model, factors: Sequence[float], seed: int) -> Iterator[tuple[float, int, dict[str, float]]]:
    """Factor, seed and injected ratios of each point."""
    for number, factor in enumerate(factors):
        injected = {name: factor * float(model.injected[model.index(name)]) for name in _free_ratios(model)}
        yield factor, int(stream_key(seed, "linearity", number)), injected


def _line(name: str, points: Sequence[ToyResults]) -> Line:
    summaries = [point.summary(name) for point in points]
    x = np.array([summary.injected for summary in summaries])
    y = np.array([summary.injected + summary.bias for summary in summaries])
    errors = np.array([summary.bias_error for summary in summaries])
    # The closed form of the weighted straight line, taken about the weighted centre to keep its digits.
    weights = errors**-2.0
    centre = float(weights @ x / weights.sum())
    spread = float(weights @ (x - centre) ** 2)
    slope = float(weights @ ((x - centre) * y) / spread)
    height = float(weights @ y / weights.sum())
    residuals = float(weights @ (y - height - slope * (x - centre)) ** 2)
    degrees = len(points) - 2
    return Line(
        parameter=name,
        injected=tuple(x.tolist()),
        fitted=tuple(y.tolist()),
        fitted_errors=tuple(errors.tolist()),
        slope=slope,
        slope_error=spread**-0.5,
        intercept=height - slope * centre,
        intercept_error=float(np.sqrt(1.0 / weights.sum() + centre**2 / spread)),
        chi2=residuals,
        degrees_of_freedom=degrees,
        p_value=float(chi2.sf(residuals, degrees)) if degrees > 0 else None,
    )
