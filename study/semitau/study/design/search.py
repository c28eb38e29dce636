"""The search for the best cuts: deterministic, from the starting point and a few others, within a number of points.

Coordinates are scanned in turn until none gains; then steps of pairs, which coordinate scans cannot take along a
diagonal valley, and scans again. Every value of a scan is looked at, so a second minimum along a coordinate is no trap.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from dataclasses import dataclass
from itertools import combinations, product

from semitau.core.streams import stream_key, uniforms

from .evaluation import Evaluator
from .space import WorkingPoint

RESTARTS = 6
"""Searches from places of their own, besides that from the starting point."""

GAIN = 1e-9
"""Relative fall of the merit that counts: below, roundings of sums decide."""

Report = Callable[[str, int, int | None], None]


@dataclass(eq=False)
class Budget:
    """Points that may still be looked at, and those that were."""

    left: int
    total: int
    report: Report | None = None

    def take(self, points: Sequence[WorkingPoint]) -> Sequence[WorkingPoint]:
        """As many of the points as are left."""
        taken = points[: self.left]
        self.left -= len(taken)
        if self.report is not None and taken:
            self.report("working points", self.total - self.left, self.total)
        return taken

    @property
    def used(self) -> int:
        """Points that were looked at."""
        return self.total - self.left


def best_cuts(evaluator: Evaluator, start: WorkingPoint, seed: int, budget: Budget) -> WorkingPoint:
    """The best cuts that are found with the binnings of `start`; `start` itself if none are better."""
    best, merit = start, evaluator.merit(start)
    for begin in _beginnings(evaluator, start, seed):
        found, value = _descend(evaluator, begin, budget)
        if value < merit * (1.0 - GAIN):
            best, merit = found, value
        if budget.left <= 0:
            break
    return best


def _beginnings(evaluator: Evaluator, start: WorkingPoint, seed: int) -> Iterator[WorkingPoint]:
    yield start
    variables = evaluator.space.variables
    if len(variables) < 2:  # the scan of one cut has seen everything
        return
    stream = stream_key(seed, "design restarts")
    for k in range(RESTARTS):
        drawn = uniforms(stream, k * len(variables), len(variables), 0)
        places = (int(u * len(v.values)) for u, v in zip(drawn.tolist(), variables, strict=True))
        yield WorkingPoint(tuple(places), start.binnings)


def _descend(evaluator: Evaluator, begin: WorkingPoint, budget: Budget) -> tuple[WorkingPoint, float]:
    point, merit = begin, evaluator.merit(begin)
    sizes = [len(variable.values) for variable in evaluator.space.variables]
    while budget.left > 0:
        before = merit
        for variable, size in enumerate(sizes):
            trials = [point.with_cut(variable, k) for k in range(size) if k != point.cuts[variable]]
            point, merit = _better(evaluator, trials, point, merit, budget)
        if merit < before * (1.0 - GAIN):
            continue
        pairs = []
        for first, second in combinations(range(len(sizes)), 2):
            for one, other in product((-2, -1, 1, 2), repeat=2):
                a, b = point.cuts[first] + one, point.cuts[second] + other
                if 0 <= a < sizes[first] and 0 <= b < sizes[second]:
                    pairs.append(point.with_cut(first, a).with_cut(second, b))
        point, merit = _better(evaluator, pairs, point, merit, budget)
        if not merit < before * (1.0 - GAIN):
            break
    return point, merit


def _better(
    evaluator: Evaluator, trials: Sequence[WorkingPoint], point: WorkingPoint, merit: float, budget: Budget
) -> tuple[WorkingPoint, float]:
    taken = budget.take(trials)
    for trial, value in zip(taken, evaluator.merits(taken), strict=True):
        if value < merit * (1.0 - GAIN):
            point, merit = trial, value
    return point, merit


def scans(evaluator: Evaluator, point: WorkingPoint) -> list[list[float]]:
    """Merit at every value of each cut, all else as at the point."""
    out = []
    for variable, cut in enumerate(evaluator.space.variables):
        out.append(evaluator.merits([point.with_cut(variable, k) for k in range(len(cut.values))]))
    return out
