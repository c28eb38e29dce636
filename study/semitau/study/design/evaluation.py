"""Expected errors at working points, from sums of candidates made once."""

from __future__ import annotations

from collections import OrderedDict
from collections.abc import Sequence
from concurrent.futures import ThreadPoolExecutor
from dataclasses import dataclass
from functools import partial

import numpy as np
from semitau.core import engine
from semitau.core.candidate_grid import EXPECTED, GENERATED, CandidateGrid
from semitau.core.templates import Floats
from semitau.fit.uncertainty.working_points import Sensitivity

from .goal import Goal
from .space import Edges, Space, WorkingPoint

REMEMBERED = 4096
"""Categories in a selection and binning whose information is kept for the next point that has them."""

POINTS_PER_TASK = 16


@dataclass(frozen=True, eq=False)
class Told:
    """What one category tells in one selection and binning.

    information : (names, names). bins : that expect anything. events, least : expected in all and in the emptiest.
    """

    information: Floats
    bins: int
    events: float
    least: float


@dataclass(frozen=True, eq=False)
class Evaluator:
    """Working points of a space, on the candidates of one grid."""

    space: Space
    grid: CandidateGrid
    sensitivity: Sensitivity
    goal: Goal
    workers: int
    remembered: OrderedDict[tuple[int, tuple[Edges, ...]], Told]

    @classmethod
    def on(cls, space: Space, grid: CandidateGrid, sensitivity: Sensitivity, goal: Goal, workers: int) -> Evaluator:
        return cls(space, grid, sensitivity, goal, workers, OrderedDict())

    def contents(self, point: WorkingPoint, table: int) -> list[Floats]:
        """(bins, columns) of each category of a table, bins in the order of its grid's axes."""
        edges = tuple(self.space.edges(point, table).values())
        return [self.grid.contents(place, edges) for place in self.space.tables[table].categories]

    def told(self, point: WorkingPoint, table: int) -> list[Told]:
        """What each category of a table tells."""
        edges = tuple(self.space.edges(point, table).values())
        out = []
        for place in self.space.tables[table].categories:
            found = self.remembered.get((place, edges))
            if found is None:
                found = self._told(self.grid.contents(place, edges))
                self.remembered[place, edges] = found
                while len(self.remembered) > REMEMBERED:
                    self.remembered.popitem(last=False)
            out.append(found)
        return out

    def _told(self, contents: Floats) -> Told:
        filled = contents[:, GENERATED] > 0.5
        expected = contents[filled, EXPECTED]
        least = float(expected.min()) if expected.size else 0.0
        return Told(self.sensitivity.information(contents), int(filled.sum()), float(expected.sum()), least)

    def information(self, point: WorkingPoint) -> Floats:
        """(names, names) of all categories together."""
        parts = (told.information for table in range(len(self.space.tables)) for told in self.told(point, table))
        total: Floats = sum(parts, np.zeros((len(self.sensitivity.names),) * 2))
        return total

    def covariance(self, point: WorkingPoint) -> Floats | None:
        """(ratios, ratios); None if they cannot be told there."""
        return self.sensitivity.covariance(self.information(point))

    def merit(self, point: WorkingPoint) -> float:
        """What is made small; infinite where the ratios cannot be told."""
        return self.goal.merit(self.covariance(point))

    def merits(self, points: Sequence[WorkingPoint]) -> list[float]:
        """Those of many points, on all workers of this machine: the sums are too large to travel."""
        batches = [points[k : k + POINTS_PER_TASK] for k in range(0, len(points), POINTS_PER_TASK)]
        tasks = [partial(self._batch, own) for own in batches]
        if self.workers == 1 or len(tasks) == 1:
            return [merit for task in tasks for merit in task()]
        with ThreadPoolExecutor(self.workers) as pool:
            return [merit for own in engine.run(tasks, self.workers, executor=pool) for merit in own]

    def _batch(self, points: Sequence[WorkingPoint]) -> list[float]:
        return [self.merit(point) for point in points]
