"""Where a fit describes its data and where it does not: by category, by projection, by bin, each judged by toys.

The p-values are shares of the toys that look worse in the same way. Toys are fitted, so the freedom that the fit takes
is accounted for, and so are bins with few events, where χ² and the Kolmogorov distribution do not hold.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.streams import event_key, stream_key
from semitau.core.templates import Category, Floats

from ..fitting.data import Data, Source
from ..fitting.model import Model
from ..fitting.result import FitResult
from ..toys.toys import ToyResults, draw_toy

WORST = 10


@dataclass(frozen=True)
class CategoryQuality:
    """statistic : sum of the contributions of the category's bins; p_value : share of toys with a larger one."""

    category: str
    statistic: float
    bins: int
    p_value: float


@dataclass(frozen=True)
class ProjectionQuality:
    """distance : largest difference of the cumulated shares of data and fit along one axis (Kolmogorov).

    p_value : share of toys with a larger one, since bins and fitted parameters change its distribution.
    """

    category: str
    observable: str
    distance: float
    p_value: float


@dataclass(frozen=True)
class BinQuality:
    """One bin: place in its category's axes, its edges, counts, and significance = ±√contribution, + for an excess."""

    category: str
    place: tuple[int, ...]
    edges: tuple[tuple[float, float], ...]
    observed: float
    expected: float
    significance: float


@dataclass(frozen=True)
class Quality:
    """statistic : of all bins and constraints, and from where: `bins` and `constraints` add up to it.

    p_value : share of toys with a larger statistic. worst : bins with the largest contributions; worst_p_value : share
    of toys whose worst bin is worse. toys : number that could be fitted. contributions : category -> (axes) array.
    """

    statistic: float
    bins: float
    constraints: float
    p_value: float
    categories: tuple[CategoryQuality, ...]
    projections: tuple[ProjectionQuality, ...]
    worst: tuple[BinQuality, ...]
    worst_p_value: float
    toys: int
    contributions: dict[str, Floats]


def quality(model: Model, data: Source, result: FitResult, toys: ToyResults) -> Quality:
    """Look at the fit in every part.

    toys : of the same model; they are drawn again from their seed, not fitted again.

    Raises RunError when the fit is not valid or no toy could be fitted, InputError for toys of another model.
    """
    if toys.foreign:
        raise InputError(Problem("the toys were drawn from another model", "goodness of fit"))
    if not result.valid or not toys.valid.any():
        raise RunError(*(result.reasons or (Problem("no toy could be fitted", "goodness of fit"),)))
    observed = model.data(data)
    parts = contributions(model, observed, result.values)
    measured = _measures(model, observed.counts, parts, model.expected_counts(result.values))
    means = np.where(model.layout.lane_bin >= 0, model.lane_expectations(toys.injected), 0.0)
    variances = relative_variances(model)
    from_toys = np.array([_of_toy(model, toys, int(toy), means, variances) for toy in np.flatnonzero(toys.valid)])
    # Equal up to rounding counts as equal.
    shares = np.mean(from_toys >= measured * (1.0 - 1e-9), axis=0).tolist()
    categories = model.templates.categories
    axes = [(category, axis) for category in categories for axis in range(len(category.observables))]
    by_category = model.by_category(parts)
    there = model.by_category((model.layout.bin_lane >= 0).astype(np.float64))
    n, k = len(categories), len(axes)
    return Quality(
        statistic=result.goodness.statistic,
        bins=float(parts.sum()),
        constraints=result.goodness.statistic - float(parts.sum()),
        p_value=toys.share_above(result.goodness.statistic),
        categories=tuple(
            CategoryQuality(c.name, float(measured[i]), int(there[c.name].sum()), shares[i])
            for i, c in enumerate(categories)
        ),
        projections=tuple(
            ProjectionQuality(c.name, c.observables[axis].name, float(measured[n + i]), shares[n + i])
            for i, (c, axis) in enumerate(axes)
        ),
        worst=_worst(model, observed.counts, parts, model.expected_counts(result.values)),
        worst_p_value=shares[n + k],
        toys=len(from_toys),
        contributions=by_category,
    )


def contributions(model: Model, data: Data, values: Floats) -> Floats:
    """(bins,) part of each bin in 2 ln(L_saturated/L), with one factor per bin for the finite templates."""
    centres = data.gamma_centres if data.gamma_centres.size == model.bins else np.ones(model.bins)
    return _contributions(data.counts, model.expected_counts(values), relative_variances(model), centres)


def relative_variances(model: Model) -> Floats:
    """(bins,) squared relative error of the expectation from finite templates, at the injected values."""
    return np.concatenate([errors.ravel() ** 2 for errors in model.template_errors().values()])


def _contributions(n: Floats, mu: Floats, v: Floats, centre: Floats) -> Floats:
    there = mu > 0
    mu = np.where(there, mu, 1.0)
    b = mu * v - centre
    root = np.sqrt(b * b + 4.0 * n * v)
    gamma = np.where(b > 0, 2.0 * n * v / np.where(b + root > 0, b + root, 1.0), 0.5 * (root - b))
    model = gamma * mu
    ratio = np.where((n > 0) & (model > 0), n / np.where(model > 0, model, 1.0), 1.0)
    poisson = model - n + n * np.log(ratio)
    pull = np.where(v > 0, (gamma - centre) ** 2 / np.where(v > 0, 2.0 * v, 1.0), 0.0)
    return np.where(there, 2.0 * np.maximum(poisson + pull, 0.0), 0.0)


def _of_toy(model: Model, toys: ToyResults, toy: int, means: Floats, variances: Floats) -> Floats:
    arrays = model.layout.arrays
    counts, centres = np.zeros(means.size), np.zeros(toys.injected.size)
    gammas = np.ones(arrays.nominal.size if model.likelihood == "exact" else means.size)
    key = np.uint64(event_key(stream_key(toys.seed, "toys"), np.uint64(toy)))
    draw_toy(arrays, key, toys.injected, means, counts, gammas, centres)
    if model.likelihood == "exact":
        gammas = np.ones(means.size)  # of bins, as for the data: those of components are not looked at
    lane = model.layout.bin_lane
    n, centre = np.where(lane >= 0, counts[lane], 0.0), np.where(lane >= 0, gammas[lane], 1.0)
    expected = model.expected_counts(toys.values[toy])
    parts = _contributions(n, expected, variances, centre)
    return _measures(model, n, parts, expected)


def _measures(model: Model, counts: Floats, parts: Floats, expected: Floats) -> Floats:
    """What is compared with the toys: statistic of each category, distance of each projection, worst bin."""
    categories = model.templates.categories
    sums = [part.sum() for part in model.by_category(parts).values()]
    seen, fitted = model.by_category(counts), model.by_category(expected)
    distances = [
        _distance(seen[category.name], fitted[category.name], axis)
        for category in categories
        for axis in range(len(category.observables))
    ]
    return np.array([*sums, *distances, parts.max()])


def _distance(counts: Floats, expected: Floats, axis: int) -> float:
    others = tuple(i for i in range(counts.ndim) if i != axis)
    data, fit = counts.sum(axis=others), expected.sum(axis=others)
    if not (data.sum() > 0 and fit.sum() > 0):
        return 0.0
    return float(np.abs(np.cumsum(data) / data.sum() - np.cumsum(fit) / fit.sum()).max())


def _worst(model: Model, counts: Floats, parts: Floats, expected: Floats) -> tuple[BinQuality, ...]:
    found = []
    places: list[tuple[Category, int]] = []
    for category in model.templates.categories:
        places += [(category, index) for index in range(int(np.prod(category.shape)))]
    for number in np.argsort(-parts, kind="stable")[:WORST].tolist():
        category, index = places[number]
        place = tuple(int(i) for i in np.unravel_index(index, category.shape))
        edges = tuple((o.edges[i], o.edges[i + 1]) for o, i in zip(category.observables, place, strict=True))
        sign = 1.0 if counts[number] >= expected[number] else -1.0
        found.append(
            BinQuality(
                category.name, place, edges, float(counts[number]), float(expected[number]),
                sign * float(np.sqrt(parts[number])),
            )
        )  # fmt: skip
    return tuple(found)
