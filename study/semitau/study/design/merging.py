"""Bins merged where the ratios lose least, and axes compared.

To first order a change ΔI of the information changes the covariance of the ratios by -r ΔI rᵀ, r being their rows of
the inverse information. Of a bin only the numbers a = r J count then, one for each ratio, and merging two bins of
variances s₁, s₂ costs a₁²/s₁ + a₂²/s₂ - (a₁ + a₂)²/(s₁ + s₂) = s₁ s₂/(s₁ + s₂) (a₁/s₁ - a₂/s₂)²: nothing where
both say the same. The edge whose removal costs least, over all other axes and all categories that share it, goes first;
then everything is computed anew.
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import combinations

import numpy as np
from semitau.core.candidate_grid import EXPECTED, GENERATED, VARIANCE
from semitau.core.templates import Floats

from .evaluation import Evaluator
from .space import Binning, Edges, TableSpace, WorkingPoint


@dataclass(frozen=True)
class Wanted:
    """When a binning is coarse enough. least : events that a bin should hold. poor : share of events that may lie in
    bins with less. loss : relative rise of the merit that fewer bins may cost."""

    least: float
    poor: float
    loss: float


@dataclass(frozen=True)
class Merged:
    """A binning and the way to it: bins of one category and merit, from the finest on."""

    binning: Binning
    merit: float
    bins: tuple[int, ...]
    merits: tuple[float, ...]

    @property
    def size(self) -> int:
        """Bins of one category, outside of cuts included."""
        return int(np.prod([len(inner) + 1 for _, inner in self.binning]))


def merge(evaluator: Evaluator, point: WorkingPoint, table: int, observables: Sequence[str], wanted: Wanted) -> Merged:
    """The best binning of a table on these axes, all other binnings and the cuts as at the point."""
    space = evaluator.space.tables[table]
    finest = point.with_binning(table, tuple((name, space.axis(name).options) for name in observables))
    edges = evaluator.space.edges(finest, table)
    rest = evaluator.information(point) - sum(told.information for told in evaluator.told(point, table))
    kept = [list(edges[name]) for name in observables]
    # (categories, bins along the axes ..., columns), axes in the order of `observables`
    contents = in_order(evaluator, finest, table, observables)
    merit, rows = _judge(evaluator, rest, contents)
    sizes, merits = [_size(kept)], [merit]
    chosen: tuple[list[Edges], float] | None = None
    limit = np.inf
    while True:
        ready = _poor_share(contents, wanted.least) <= wanted.poor
        if ready and chosen is None and np.isfinite(merit):
            limit = merit * (1.0 + wanted.loss)
        if ready and merit <= limit:
            chosen = [tuple(own) for own in kept], merit
        if max(len(own) for own in kept) == 2 or merit > limit:
            break
        axis, edge = _cheapest(evaluator, contents, rows, kept)
        del kept[axis][edge]
        contents = _without(contents, axis, edge)
        merit, rows = _judge(evaluator, rest, contents)
        sizes.append(_size(kept))
        merits.append(merit)
    last = chosen or ([tuple(own) for own in kept], merit)
    binning = tuple((name, own[1:-1]) for name, own in zip(observables, last[0], strict=True))
    return Merged(binning, last[1], tuple(sizes), tuple(merits))


def choices(space: TableSpace, most: int) -> list[tuple[str, ...]]:
    """All sets of one to `most` axes that a table can have."""
    names = [axis.grid.observable for axis in space.axes if axis.options]
    return [own for size in range(1, most + 1) for own in combinations(names, size)]


def _size(kept: Sequence[Sequence[int]]) -> int:
    return int(np.prod([len(own) - 1 for own in kept]))


def in_order(evaluator: Evaluator, point: WorkingPoint, table: int, observables: Sequence[str]) -> Floats:
    """(categories, bins along the observables ..., columns): contents of a table with its axes in this order."""
    edges = evaluator.space.edges(point, table)
    shape = [len(own) - 1 for own in edges.values()]
    names = list(edges)
    order = [names.index(name) for name in observables]
    parts = []
    for contents in evaluator.contents(point, table):
        whole = contents.reshape(*shape, -1)
        others = [k for k in range(len(names)) if k not in order]
        parts.append(whole.transpose(*order, *others, len(names)).reshape(*(shape[k] for k in order), -1).copy())
    return np.stack(parts)


def _judge(evaluator: Evaluator, rest: Floats, contents: Floats) -> tuple[float, Floats | None]:
    """Merit with these contents in the place of the table's, and rows of the ratios in the inverse information."""
    sensitivity = evaluator.sensitivity
    information = rest + sensitivity.information(contents.reshape(-1, contents.shape[-1]))
    rows = sensitivity.rows(information)
    return evaluator.goal.merit(sensitivity.covariance(information)), rows


def _poor_share(contents: Floats, least: float) -> float:
    expected = np.where(contents[..., GENERATED] > 0.5, contents[..., EXPECTED], 0.0)
    total = float(expected.sum())
    return float(expected[expected < least].sum()) / total if total > 0.0 else 0.0


def _without(contents: Floats, axis: int, edge: int) -> Floats:
    """With the slices at both sides of an inner edge added up."""
    places = [k for k in range(contents.shape[axis + 1]) if k != edge]
    return np.add.reduceat(contents, places, axis=axis + 1)


def _cheapest(
    evaluator: Evaluator, contents: Floats, rows: Floats | None, kept: Sequence[Sequence[int]]
) -> tuple[int, int]:
    """Axis and place of the inner edge whose removal costs least; the one between the emptiest slices without rows."""
    filled = contents[..., GENERATED] > 0.5
    variance = contents[..., EXPECTED] + evaluator.sensitivity.template_statistics * contents[..., VARIANCE]
    spread = np.where(filled, variance, 0.0)
    if rows is None:
        says = np.sqrt(spread)[..., None]  # cost of merging then grows with the events
    else:
        names = evaluator.sensitivity.names
        covariance = rows[:, [names.index(name) for name in evaluator.sensitivity.ratios]]
        values, vectors = np.linalg.eigh(evaluator.goal.slope(covariance))
        directions = (np.sqrt(np.maximum(values, 0.0)) * vectors).T @ rows
        says = np.where(filled[..., None], contents[..., 3:] @ directions.T, 0.0)
    best: tuple[float, int, int] | None = None
    for axis, own in enumerate(kept):
        if len(own) == 2:
            continue
        a, s = np.moveaxis(says, axis + 1, 0), np.moveaxis(spread, axis + 1, 0)[..., None]
        both = s[1:] + s[:-1]
        share = np.divide(s[1:] * s[:-1], both, out=np.zeros_like(both), where=both > 0.0)
        per = np.divide(a, s, out=np.zeros_like(a), where=s > 0.0)
        costs = (share * (per[1:] - per[:-1]) ** 2).reshape(len(own) - 2, -1).sum(axis=1)
        k = int(np.argmin(costs))
        if best is None or costs[k] < best[0]:
            best = float(costs[k]), axis, k + 1
    if best is None:
        raise ValueError("no edge is left")
    return best[1], best[2]
