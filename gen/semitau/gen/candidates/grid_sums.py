"""Candidates of a study on fine grids: every event generated once, reconstructed, and added to the cell it falls into.

What is kept of a component is what an expected-information matrix needs, and all of it is linear in the candidates:
contents times given factors, and of each variation the half difference of its sides. So one table serves any number of
working points between grid edges.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from contextlib import closing
from dataclasses import dataclass, replace
from math import ceil

import numpy as np
import numpy.typing as npt
from semitau.core import engine
from semitau.core.candidate_grid import EXPECTED, GENERATED, VARIANCE, CandidateGrid, CategoryGrid
from semitau.core.compiled import kernel
from semitau.core.engine import Job
from semitau.core.errors import InputError, Problem

from ..study_file.categories import StudyCategory
from ..study_file.study import StudyConfig
from ..templates.binning import ROW_OF, Cuts, make_cuts
from ..templates.chunk_tasks import Bench, ChannelInputs, chunks, make_bench, weight_table
from ..templates.component_parts import Part, component_parts
from ..templates.component_plan import LEAST_EVENTS
from ..templates.variations import Side, check_efficiencies
from ..truth.any_drawing import AnyTable, table_of
from ..truth.variation_weights import VariationTable
from .grid_table import GridTable, make_grid_table
from .listing import Listing, list_chunk, list_drawn, new_listing

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
Report = Callable[[str, int, int | None], None]

FIRST_COLUMNS = ("expected", "variance", "generated")


@dataclass(frozen=True)
class Columns:
    """What is summed besides the first three columns.

    names : of the columns. of_component : component -> (column, factor) for each column that its contents add to.
    of_side : side of a variation -> (column, factor) of what it changes; the factors of the two sides of a variation
        cancel or stand alone, so that a side that changes nothing adds nothing.
    """

    names: tuple[str, ...]
    of_component: Mapping[str, tuple[tuple[str, float], ...]]
    of_side: Mapping[Side, tuple[str, float]]

    @property
    def all(self) -> tuple[str, ...]:
        """With the first three."""
        return (*FIRST_COLUMNS, *self.names)

    def place(self, name: str) -> int:
        """Of a column among all."""
        return len(FIRST_COLUMNS) + self.names.index(name)


def grid_sums(
    study: StudyConfig,
    grids: Sequence[CategoryGrid],
    columns: Columns,
    *,
    purpose: str,
    most_events: int | None = None,
    batches: int = 1,
    workers: int | None = None,
    report: Report | None = None,
) -> tuple[CandidateGrid, ...]:
    """Generate the events of a study and sum its candidates; one grid for each batch of the events.

    grids : one for each category of the study, in its order. Cuts of the study on a grid's observables do not act on
        its category: the grid takes their place. Where a background does not draw an observable, all its events lie in
        the cell that every cut keeps, see `kept_by_all`.
    purpose : names the random streams, as in `component_parts`. most_events : generated of each component at most; the
        variance is that of the study's own numbers all the same.
    batches : independent parts of the events, each scaled up to stand for all of them.

    Raises
    ------
    InputError : no candidate of a category lies within its grid; what `build_templates` raises for the study.
    """
    check_efficiencies(study)
    bench = make_bench(study, variations=True)
    loose = tuple(_without(category, grid) for category, grid in zip(study.categories, grids, strict=True))
    parts = [_thinned(part, share) for part, share in _shares(component_parts(study, bench, purpose), most_events)]
    rows = sum(grid.rows for grid in grids)
    cells = np.zeros((batches * rows, len(columns.all)))
    tasks = (task for part, _ in parts for task in _tasks(study, part, bench, loose, grids, batches))
    done, total = 0, sum(part.events for part, _ in parts)
    with closing(engine.run(tasks, workers)) as results:  # type: ignore[type-var]
        for part, of_study in parts:
            adding = _Adding(part, of_study, columns, bench, float(batches))
            for _, events in chunks(part.events):
                adding.add(next(results), rows, cells)
                done += events
                if report is not None:
                    report("candidates", done, total)
    _refuse_empty(study, grids, cells.reshape(batches, rows, -1)[:, :, GENERATED].sum(axis=0))
    categories = tuple(grids)
    return tuple(
        CandidateGrid.of_cells(categories, columns.all, cells[b * rows : (b + 1) * rows], total) for b in range(batches)
    )


def _without(category: StudyCategory, grid: CategoryGrid) -> StudyCategory:
    """With the cuts that its grid leaves."""
    on_grid = {axis.observable for axis in grid.axes}
    return category.model_copy(update={"cuts": {n: cut for n, cut in category.cuts.items() if n not in on_grid}})


def _shares(parts: Sequence[Part], most: int | None) -> Iterator[tuple[Part, float]]:
    totals: dict[str, int] = {}
    for part in parts:
        totals[part.component] = totals.get(part.component, 0) + part.events
    for part in parts:
        yield part, 1.0 if most is None else min(1.0, most / totals[part.component])


def _thinned(part: Part, share: float) -> tuple[Part, int]:
    """The part with a share of its events, and how many it has in the study."""
    return replace(part, events=max(min(part.events, LEAST_EVENTS), ceil(share * part.events))), part.events


@dataclass(frozen=True, eq=False)
class _Decays:
    """What the chunks of a decay chain have in common."""

    inputs: ChannelInputs
    bench: Bench
    table: AnyTable
    weights: VariationTable
    cuts: Cuts
    grid: GridTable
    batches: int


def _list_decays(common: _Decays, first: int, n: int) -> Listing:
    inputs, bench = common.inputs, common.bench
    listing = new_listing(n, len(inputs.shifts), len(inputs.decays) + len(inputs.soft))
    list_chunk(
        inputs.stream, first, n, common.table, inputs.chain, bench.detector, bench.quantiles, common.weights,
        inputs.soft, inputs.shifts, bench.windows, common.cuts, common.grid, common.batches, listing,
    )  # fmt: skip
    return _cut_to_size(listing)


@dataclass(frozen=True, eq=False)
class _Drawn:
    """What the chunks of a background in one category have in common."""

    part: Part
    cuts: Cuts
    grid: GridTable
    rows: Integers
    batches: int


def _list_drawn(common: _Drawn, first: int, n: int) -> Listing:
    inputs = common.part.inputs
    listing = new_listing(n, 1, 0)
    if not isinstance(inputs, ChannelInputs):
        drawn = inputs.laws.draw(inputs.stream, first, n)
        values = np.stack([drawn[name] for name in inputs.drawn])
        list_drawn(values, common.rows, inputs.code, first, common.cuts, common.grid, common.batches, listing)
    return _cut_to_size(listing)


def _cut_to_size(listing: Listing) -> Listing:
    used = int(listing.used[0])
    return Listing(
        listing.used, listing.rows[:, :used].copy(), listing.categories[:used].copy(), listing.batches[:used].copy(),
        listing.weights[:used].copy(),
    )  # fmt: skip


def _tasks(
    study: StudyConfig,
    part: Part,
    bench: Bench,
    loose: Sequence[StudyCategory],
    grids: Sequence[CategoryGrid],
    batches: int,
) -> Iterator[Job[Listing]]:
    inputs = part.inputs
    if isinstance(inputs, ChannelInputs):
        common = _Decays(
            inputs, bench, table_of(inputs.channel), weight_table(inputs.channel, inputs.decays), make_cuts(loose),
            make_grid_table(study.categories, grids), batches,
        )  # fmt: skip
        return (Job(_list_decays, common, chunk) for chunk in chunks(part.events))
    rows = np.array([ROW_OF[name] for name in inputs.drawn], dtype=np.int64)
    table = make_grid_table(study.categories, grids, inputs.drawn)
    drawn = _Drawn(part, make_cuts(loose, inputs.drawn), table, rows, batches)
    return (Job(_list_drawn, drawn, chunk) for chunk in chunks(part.events))


class _Adding:
    """Adds the listed candidates of one part to the cells.

    of_study : events of the part in the study, which set the variance. factor : on everything.
    """

    def __init__(self, part: Part, of_study: int, columns: Columns, bench: Bench, factor: float) -> None:
        self._weight = factor * part.expected / part.events
        self._variance = self._weight * part.expected / of_study
        own = columns.of_component[part.component]
        self._own = np.array([columns.place(name) for name, _ in own], dtype=np.int64)
        self._factors = np.array([scale for _, scale in own])
        sides = [columns.of_side.get(side) for side in part.columns]
        places = [-1 if side is None else columns.place(side[0]) for side in sides]
        self._places = np.array(places, dtype=np.int64)
        self._scales = np.array([0.0 if side is None else side[1] for side in sides])
        # Constant weights by category: what they change together, one row a category.
        self._constant = np.zeros((len(bench.categories), len(columns.all)))
        for side, weights in part.factors.items():
            if side in columns.of_side:
                name, scale = columns.of_side[side]
                self._constant[:, columns.place(name)] += scale * (weights - 1.0)
        self._acting = np.flatnonzero(self._constant.any(axis=0))

    def add(self, listing: Listing, rows: int, cells: Floats) -> None:
        """One chunk. cells (batches * rows, columns) : what it is added to."""
        add_listing(
            listing, rows, self._weight, self._variance, self._own, self._factors, self._places, self._scales,
            self._acting, self._constant, cells,
        )  # fmt: skip


@kernel
def add_listing(
    listing: Listing, rows: int, weight: float, variance: float, own: Integers, factors: Floats, places: Integers,
    scales: Floats, acting: Integers, constant: Floats, cells: Floats,
) -> None:  # fmt: skip
    """Add candidates to their cells, in order.

    weight, variance : expected events of a candidate and their variance. own, factors : columns that it adds to, and
    how much. places, scales : column and factor of each side made by a weight, then of each other scenario; -1 for
    none. constant (categories, columns) : what constant weights change in the columns `acting`.
    """
    by_weight = listing.weights.shape[1]
    for i in range(listing.used[0]):
        shift = listing.batches[i] * rows
        nominal = listing.rows[0, i]
        if nominal >= 0:
            cell = cells[shift + nominal]
            cell[EXPECTED] += weight
            cell[VARIANCE] += variance
            cell[GENERATED] += 1.0
            for k in range(own.shape[0]):
                cell[own[k]] += weight * factors[k]
            for v in range(by_weight):
                if places[v] >= 0:
                    cell[places[v]] += weight * scales[v] * (listing.weights[i, v] - 1.0)
            for c in acting:
                cell[c] += weight * constant[listing.categories[i], c]
        for s in range(1, listing.rows.shape[0]):
            row, column = listing.rows[s, i], places[by_weight + s - 1]
            if row != nominal and column >= 0:
                if row >= 0:
                    cells[shift + row, column] += weight * scales[by_weight + s - 1]
                if nominal >= 0:
                    cells[shift + nominal, column] -= weight * scales[by_weight + s - 1]


def _refuse_empty(study: StudyConfig, grids: Sequence[CategoryGrid], generated: Floats) -> None:
    ends = np.cumsum([grid.rows for grid in grids])
    problems = [
        Problem(
            "no candidate survives the loosest cuts of the scan",
            where=f"[design]: category {category.name}",
            got=", ".join(f"{axis.observable} {axis.edges[0]:g} to {axis.edges[-1]:g}" for axis in grid.axes),
            remedy="Widen the ranges, loosen the cuts that are not scanned, or generate more events.",
        )
        for category, grid, own in zip(study.categories, grids, np.split(generated, ends[:-1]), strict=True)
        if not own.any()
    ]
    if problems:
        raise InputError(*problems)
