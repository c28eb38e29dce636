"""Likelihood curves of one ratio and regions of two: conditional fits along a line or over a grid."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from scipy.optimize import brentq
from scipy.stats import chi2
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.templates import Floats

from ..fitting.data import Source
from ..fitting.ending import CONVERGED
from ..fitting.model import Model
from ..fitting.newton import maximise, run
from ..fitting.result import FitResult
from ..likelihood.layout import Indices

REGION_LEVELS: Mapping[str, float] = MappingProxyType(
    {
        "39.3%": 1.0,
        "68.3%": float(chi2.isf(1 - 0.6826894921, 2)),
        "95.4%": float(chi2.isf(1 - 0.9544997361, 2)),
        "99.7%": float(chi2.isf(1 - 0.9973002039, 2)),
    }
)
"""Confidence of a region of two parameters -> its -2 ln L above the minimum (1, 2.30, 6.18 and 11.83).

The first touches the one-standard-deviation interval of each parameter: 1 - exp(-1/2) = 39.3%.
"""


@dataclass(frozen=True, eq=False)
class Profile:
    """-2 ln L above its minimum, against one parameter, all others fitted at each point.

    points, heights : (points,); a height is NaN where the conditional fit failed.
    value : the maximum-likelihood value; low, high : where the height is 1, a 68.3% interval; low_two, high_two : where
    it is 4, 95.4%; found to 1e-6 of the error, NaN if never reached.
    """

    parameter: str
    points: Floats
    heights: Floats
    value: float
    low: float
    high: float
    failures: int
    low_two: float = float("nan")
    high_two: float = float("nan")


@dataclass(frozen=True, eq=False)
class Region:
    """-2 ln L above its minimum over a grid of two parameters, all others fitted at each point.

    heights : (first points, second points), NaN where the conditional fit failed; levels : confidence -> height.
    """

    parameters: tuple[str, str]
    first: Floats
    second: Floats
    heights: Floats
    values: tuple[float, float]
    levels: Mapping[str, float]
    failures: int


class Conditional:
    """Fits with some parameters held, each started from where the last one ended."""

    def __init__(self, model: Model, data: Source, names: Sequence[str], result: FitResult | None) -> None:
        self.model, self.data = model, model.data(data)
        self.held = [model.index(name) for name in names]
        self.best = maximise(model, self.data) if result is None else result
        if not self.best.valid:
            raise RunError(*self.best.reasons)
        for name, index in zip(names, self.held, strict=True):
            if not self.best.errors[index] > 0:
                raise InputError(Problem("a fixed parameter has no likelihood curve", where=f"parameter {name}"))
            function = model.parameters[index].function
            if function is not None:
                raise InputError(
                    Problem(
                        "a function of other parameters has no likelihood curve of its own",
                        where=f"parameter {name}",
                        got=function,
                        remedy="Ask for the curve of a parameter that it follows.",
                    )
                )
        self.free: Indices = np.array([i for i in model.free if i not in self.held], dtype=np.int64)
        self.failures = 0
        self.back()

    def back(self) -> None:
        """Start the next fit from the maximum-likelihood values."""
        self.x = self.best.values.copy()

    def height(self, *values: float) -> float:
        """-2 ln L above the minimum with the held parameters at these values; NaN if the fit fails."""
        x = self.x.copy()
        x[self.held] = values
        ending, _ = run(self.model, self.data, self.free, x)
        if ending.status != CONVERGED:
            self.failures += 1
            return float("nan")
        self.x = x
        return 2.0 * (ending.value - self.best.minus_log_likelihood)


def profile(
    model: Model,
    data: Source,
    name: str,
    points: Sequence[float] | Floats | None = None,
    *,
    result: FitResult | None = None,
) -> Profile:
    """The likelihood curve of one parameter, and where it crosses 1.

    points : values of the parameter; default 41 over three errors to both sides of the fitted value.
    result : the fit to these data if it is there already.

    Raises InputError for a parameter that is not there or fixed, RunError when the fit itself fails.
    """
    conditional = Conditional(model, data, [name], result)
    value, error = conditional.best.value(name), conditional.best.error(name)
    if points is None:
        grid = value + error * np.linspace(-3.0, 3.0, 41)
    else:
        grid = _grid(points, name)
    heights = np.empty(grid.size)
    below = grid < value
    for side in (np.flatnonzero(below)[::-1], np.flatnonzero(~below)):  # outwards, each fit near the last
        conditional.back()
        for index in side:
            heights[index] = conditional.height(float(grid[index]))
    ends = [crossing(conditional, value, side * error, level) for level in (1.0, 4.0) for side in (-1.0, 1.0)]
    return Profile(name, grid, heights, value, ends[0], ends[1], conditional.failures, ends[2], ends[3])


def region(
    model: Model,
    data: Source,
    names: tuple[str, str] = ("R_D", "R_Dst"),
    points: int = 41,
    *,
    span: float = 4.2,
    result: FitResult | None = None,
) -> Region:
    """-2 ln L above its minimum over a grid of two parameters.

    points : of the grid along each parameter; span : how far it reaches from the fitted values, in errors.

    Raises as `profile` does.
    """
    if len(names) != 2 or names[0] == names[1]:
        raise InputError(Problem("a region needs two different parameters", got=str(names)))
    if isinstance(points, bool) or not isinstance(points, int) or points < 2:
        raise InputError(Problem("a grid needs points", where="points", got=repr(points), wanted="2 or more"))
    conditional = Conditional(model, data, names, result)
    best, steps = conditional.best, np.linspace(-span, span, points)
    first, second = (best.value(name) + best.error(name) * steps for name in names)
    heights = np.empty((points, points))
    for i in range(points):
        # To and fro, so that each fit starts beside the last one.
        for j in range(points) if i % 2 == 0 else range(points - 1, -1, -1):
            heights[i, j] = conditional.height(float(first[i]), float(second[j]))
    values = best.value(names[0]), best.value(names[1])
    return Region((names[0], names[1]), first, second, heights, values, REGION_LEVELS, conditional.failures)


def crossing(conditional: Conditional, value: float, step: float, level: float = 1.0) -> float:
    """Where the height is `level` on one side of the minimum, to 1e-6 of the step.

    NaN if it is not reached within 64 steps, or if a fit fails.
    """
    conditional.back()
    inner, outer = value, value + float(np.sqrt(level)) * step
    height = conditional.height(outer)
    while height < level and abs(outer - value) < 64.0 * abs(step):
        inner, outer = outer, value + 2.0 * (outer - value)
        height = conditional.height(outer)
    if not height >= level:
        return float("nan")
    conditional.back()
    try:
        return float(brentq(lambda at: conditional.height(at) - level, inner, outer, xtol=1e-6 * abs(step)))
    except (ValueError, RuntimeError):  # a conditional fit failed on the way: no sign change is left
        return float("nan")


def _grid(points: Sequence[float] | Floats, name: str) -> Floats:
    grid = np.array(points, dtype=np.float64)
    if grid.ndim != 1 or grid.size == 0 or not np.isfinite(grid).all():
        raise InputError(Problem("the points of a curve must be finite numbers", f"profile of {name}", got=str(points)))
    return np.sort(grid)
