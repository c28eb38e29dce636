"""How often each kind of interval holds the true value, measured with toys."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike, NDArray
from scipy.stats import chi2
from semitau.core.errors import InputError, Problem
from semitau.core.streams import stream_key

from ..fitting.model import Model
from ..uncertainty.curves import REGION_LEVELS
from .pulls import LEVELS, binomial_interval
from .ratio_toys import ratio_toys, shares_above
from .toys import check_number


@dataclass(frozen=True)
class Held:
    """`inside` of `number` intervals held the true value; low, high : binomial interval of the share at 68.3%."""

    confidence: float
    inside: int
    number: int
    fraction: float
    low: float
    high: float


@dataclass(frozen=True)
class IntervalCoverage:
    """Coverage of the intervals of one parameter at 68.3% and 95.4%.

    curvature : fitted value and errors from the Hessian. profile : where the likelihood curve crosses. toys : the
    interval from toys, empty if it was not asked for. failures : toys that could not be fitted.
    """

    parameter: str
    curvature: tuple[Held, Held]
    profile: tuple[Held, Held]
    toys: tuple[Held, ...]
    failures: int


def interval_coverage(
    model: Model,
    name: str,
    n: int,
    seed: int,
    *,
    inner: int = 0,
    injected: Mapping[str, float] | ArrayLike | None = None,
    workers: int | None = None,
) -> IntervalCoverage:
    """Draw n toys and ask of each interval whether it holds the truth.

    inner : toys of each interval from toys; 0 leaves it out. It is built where the other parameters are those fitted
    with `name` at its truth, as `toy_interval` does, so it costs n times inner fits.

    The true value lies between the crossings exactly if the curve at the true value is below the level, as long as the
    curve has one minimum: so no crossing needs to be found.

    Raises InputError for an unknown or fixed parameter, or no toys.
    """
    index = model.index(name)
    if index not in model.free:
        raise InputError(Problem("a fixed parameter has no interval", where=f"parameter {name}"))
    check_number(n)
    truth = model.holding(model.values(injected))
    outer = ratio_toys(model, index, truth, n, stream_key(seed, "coverage", name), workers, keep=inner > 0)
    valid = np.isfinite(outer.heights) & np.isfinite(outer.errors)
    pulls = np.abs(outer.values[valid] - truth[index]) / outer.errors[valid]
    heights = outer.heights[valid]
    curvature = [_held(confidence, pulls < width) for width, confidence in LEVELS.items()]
    profile = [_held(confidence, heights < chi2.ppf(confidence, 1)) for confidence in LEVELS.values()]
    from_toys: list[Held] = []
    if inner > 0:
        shares = []
        for toy in np.flatnonzero(valid).tolist():
            stream = stream_key(seed, "coverage, inner", name, toy)
            drawn = ratio_toys(model, index, outer.conditional[toy], inner, stream, workers)
            shares.append(shares_above(drawn, float(outer.heights[toy]))[0])
        p_values = np.array(shares)
        from_toys = [_held(confidence, p_values > 1.0 - confidence) for confidence in LEVELS.values()]
    return IntervalCoverage(
        name, (curvature[0], curvature[1]), (profile[0], profile[1]), tuple(from_toys), int(n - valid.sum())
    )


def region_coverage(
    model: Model,
    names: tuple[str, str],
    n: int,
    seed: int,
    *,
    injected: Mapping[str, float] | ArrayLike | None = None,
    workers: int | None = None,
) -> dict[str, Held]:
    """How often the regions of two parameters (`region`) hold the truth: confidence in words -> coverage.

    Raises InputError for an unknown or fixed parameter, or no toys.
    """
    places = [model.index(name) for name in names]
    for name, place in zip(names, places, strict=True):
        if place not in model.free:
            raise InputError(Problem("a fixed parameter has no region", where=f"parameter {name}"))
    check_number(n)
    stream = stream_key(seed, "coverage of regions", *names)
    toys = ratio_toys(model, places[0], model.holding(model.values(injected)), n, stream, workers, also=(places[1],))
    heights = toys.heights[np.isfinite(toys.heights)]
    return {words: _held(float(chi2.cdf(level, 2)), heights < level) for words, level in REGION_LEVELS.items()}


def held(confidence: float, inside: int, number: int) -> Held:
    """Share with its binomial interval."""
    low, high = binomial_interval(inside, number, LEVELS[1])
    return Held(confidence, inside, number, inside / number if number else float("nan"), low, high)


def _held(confidence: float, inside: NDArray[np.bool_]) -> Held:
    return held(confidence, int(np.sum(inside)), int(inside.size))
