"""Two working points on events that the search did not see: is the gain real?

A search over many points on one sample finds, besides what is good, what its fluctuations make look good; on other
events that part is gone. The events come in batches, which give the error of the gain (delete-one jackknife: B. Efron,
C. Stein, Ann. Statist. 9 (1981) 586) and the information without what fluctuations of the templates put into it: a
product of derivatives from one batch with those from another has no such part. With J_b of B batches, each scaled to
the whole, the mean over different batches is (B J̄J̄ᵀ - Σ_b J_b J_bᵀ/B)/(B - 1). Where little is known this can be
negative, which information is not: there it counts as none (`positive_information.py`).
"""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace

import numpy as np
from semitau.core.candidate_grid import GENERATED, CandidateGrid, GridAxis
from semitau.core.errors import Problem, RunError
from semitau.core.templates import Floats
from semitau.fit.uncertainty.positive_information import positive_information
from semitau.fit.uncertainty.working_points import Sensitivity, add_cross_information

from .goal import Goal
from .space import Space, TableAxis, WorkingPoint

BATCHES, LEAST_BATCHES = 8, 4
"""Of the events that confirm; as many as the memory allows."""

CERTAIN = 2.0
"""Gain over its statistical error from which on it counts as confirmed; common practice."""


@dataclass(frozen=True, eq=False)
class Confirmed:
    """errors (points, ratios), of the starting and the proposed point. gain, uncertainty : relative fall of the merit
    without information from fluctuations. noise : relative rise of the merit of both points when that is taken out;
    None if the events are too few to tell, and the gain is then with it."""

    errors: Floats
    gain: float
    uncertainty: float
    noise: tuple[float, float] | None

    @property
    def certain(self) -> bool:
        """Whether the gain is more than its error allows for."""
        return self.noise is not None and self.gain > CERTAIN * self.uncertainty


def confirmation_space(space: Space, points: Sequence[WorkingPoint]) -> Space:
    """The space with no more grid edges than the points need."""
    tables = []
    for number, table in enumerate(space.tables):
        used: dict[str, set[int]] = {axis.grid.observable: {axis.grid.kept, axis.grid.kept + 1} for axis in table.axes}
        for point in points:
            for observable, own in space.edges(point, number).items():
                used[observable] |= set(own)
        tables.append(replace(table, axes=tuple(_coarser(a, sorted(used[a.grid.observable])) for a in table.axes)))
    return replace(space, tables=tuple(tables))


def _coarser(axis: TableAxis, used: Sequence[int]) -> TableAxis:
    edges = tuple(axis.grid.edges[k] for k in used)
    return replace(axis, grid=GridAxis(axis.grid.observable, edges, used.index(axis.grid.kept)))


def in_confirmation(space: Space, coarse: Space, point: WorkingPoint, table: int) -> tuple[tuple[int, ...], ...]:
    """Places of a point's edges on the coarser grid of a table."""
    fine, few = space.tables[table], coarse.tables[table]
    return tuple(
        tuple(few.axis(observable).grid.index(fine.axis(observable).grid.edges[k]) for k in own)
        for observable, own in space.edges(point, table).items()
    )


def confirm(
    space: Space,
    coarse: Space,
    grids: Sequence[CandidateGrid],
    points: tuple[WorkingPoint, WorkingPoint],
    sensitivity: Sensitivity,
    goal: Goal,
) -> Confirmed:
    """The starting and the proposed point on batches of other events. grids : one for each batch, on `coarse`."""
    by_point = [_contents(space, coarse, grids, point) for point in points]
    batches = range(len(grids))
    kept = [list(batches), *([b for b in batches if b != out] for out in batches)]
    covariances = [[_covariance(parts, own, sensitivity, clean=False) for parts in by_point] for own in kept]
    plain = np.array([[goal.merit(covariance) for covariance in pair] for pair in covariances])
    clean = np.array(
        [[goal.merit(_covariance(parts, own, sensitivity, clean=True)) for parts in by_point] for own in kept]
    )
    # With very few events products of batches may tell nothing of a ratio or a free yield.
    enough = bool(np.isfinite(clean).all())
    merits = clean if enough else plain
    if not np.isfinite(merits).all():
        raise RunError(
            Problem(
                "independent events do not tell the ratios",
                where="confirmation of the design",
                remedy="Generate more events.",
            )
        )
    gains = 1.0 - merits[:, 1] / merits[:, 0]
    left_out = gains[1:]
    spread = np.sqrt((len(grids) - 1) / len(grids) * np.sum((left_out - left_out.mean()) ** 2))
    errors = [np.sqrt(np.diag(own)) for own in covariances[0] if own is not None]
    noise = clean[0] / plain[0] - 1.0
    return Confirmed(
        np.stack(errors),
        float(gains[0]),
        float(spread),
        (float(noise[0]), float(noise[1])) if enough else None,
    )


def _contents(space: Space, coarse: Space, grids: Sequence[CandidateGrid], point: WorkingPoint) -> list[Floats]:
    """For each category (batches, bins, columns)."""
    found = []
    for number, table in enumerate(space.tables):
        edges = in_confirmation(space, coarse, point, number)
        found += [np.stack([grid.contents(place, edges) for grid in grids]) for place in table.categories]
    return found


def _covariance(
    parts: Sequence[Floats], batches: Sequence[int], sensitivity: Sensitivity, clean: bool
) -> Floats | None:
    size = len(sensitivity.names)
    plain, crossed = np.zeros((size, size)), np.zeros((size, size))
    for contents in parts:
        chosen = np.ascontiguousarray(contents[list(batches)])
        whole = chosen.mean(axis=0)
        whole[:, GENERATED] = chosen[:, :, GENERATED].sum(axis=0)
        plain += sensitivity.information(whole)
        if clean:
            add_cross_information(chosen, whole, sensitivity.template_statistics, crossed)
    return sensitivity.covariance(positive_information(crossed, plain) if clean else plain)
