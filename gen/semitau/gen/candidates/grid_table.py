"""Grids of all categories as flat tables, and the kernel that finds each candidate's cell."""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.candidate_grid import CategoryGrid
from semitau.core.compiled import kernel

from ..block import CATEGORY
from ..study_file.categories import StudyCategory
from ..templates.binning import CODES, NOT_A_CATEGORY, ROW_OF, Cuts, bin_on_axis, category_code

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

MOST_AXES = len(ROW_OF)
_CELLS = 1024
COMPUTED = -1


class GridTable(NamedTuple):
    """Grids by category code. Shapes (16, observables) unless said otherwise; an axis that is not there has bins 0.

    category (16,) : place among the study's categories, NOT_A_CATEGORY if it is none of them.
    offset (16,) : number of the grid's first row. axes (16,) : how many there are.
    row, bins, stride : row of the block that holds the observable, cells along the axis, rows from one to the next.
    given : the cell of all candidates, for observables that a background does not draw; COMPUTED otherwise.
    first_edge, edges (n,), low, per_unit, first_cell, cells (m,) : as in `binning.Axes`.
    """

    category: Integers
    offset: Integers
    axes: Integers
    row: Integers
    bins: Integers
    stride: Integers
    given: Integers
    first_edge: Integers
    edges: Floats
    low: Floats
    per_unit: Floats
    first_cell: Integers
    cells: Integers


def make_grid_table(
    categories: Sequence[StudyCategory], grids: Sequence[CategoryGrid], drawn: Sequence[str] | None = None
) -> GridTable:
    """The table of grids, one for each category in the same order.

    drawn : observables that exist (of a background); along axes of others all candidates lie in the cell that is kept.
    """
    whole = {name: np.zeros((CODES, MOST_AXES), dtype=np.int64) for name in ("row", "bins", "stride", "edge", "cell")}
    fixed = np.full((CODES, MOST_AXES), COMPUTED, dtype=np.int64)
    low, per_unit = np.zeros((CODES, MOST_AXES)), np.zeros((CODES, MOST_AXES))
    category_of = np.full(CODES, NOT_A_CATEGORY, dtype=np.int64)
    offset, axes = np.zeros(CODES, dtype=np.int64), np.zeros(CODES, dtype=np.int64)
    all_edges: list[float] = []
    all_cells: list[int] = []
    first = 0
    for number, (category, grid) in enumerate(zip(categories, grids, strict=True)):
        code = category_code(category.charm, category.lepton)
        category_of[code], offset[code], axes[code] = number, first, len(grid.axes)
        first += grid.rows
        for k, (axis, stride) in enumerate(zip(grid.axes, grid.strides, strict=True)):
            whole["row"][code, k], whole["bins"][code, k] = ROW_OF[axis.observable], len(axis.edges) - 1
            whole["stride"][code, k] = stride
            whole["edge"][code, k], whole["cell"][code, k] = len(all_edges), len(all_cells)
            if drawn is not None and axis.observable not in drawn:
                fixed[code, k] = axis.kept
            # Look-up cells lie between the finite edges; those beyond are found from the nearest one.
            finite = [edge for edge in axis.edges if np.isfinite(edge)] or [0.0]
            low[code, k] = finite[0]
            per_unit[code, k] = _CELLS / (finite[-1] - finite[0] if len(finite) > 1 else 1.0)
            starts = finite[0] + np.arange(_CELLS) / per_unit[code, k]
            inside = np.searchsorted(axis.edges, starts, side="right") - 1
            all_cells.extend(np.clip(inside, 0, len(axis.edges) - 2))
            all_edges.extend(axis.edges)
    return GridTable(
        category_of, offset, axes, whole["row"], whole["bins"], whole["stride"], fixed, whole["edge"],
        np.array(all_edges, dtype=np.float64), low, per_unit, whole["cell"], np.array(all_cells, dtype=np.int64),
    )  # fmt: skip


@kernel
def find_cells(y: Floats, events: int, cuts: Cuts, grid: GridTable, found: Integers) -> None:
    """Fill found (events,) with each candidate's row among those of all grids, -1 if it is cut, outside or none.

    cuts : those that are not scanned. The row is that of the crossing above the candidate, see core.candidate_grid.
    """
    for i in range(events):
        found[i] = -1
        code = int(y[CATEGORY + i])
        if code < 0 or grid.category[code] < 0:
            continue
        inside = True
        for c in range(cuts.row.shape[0]):
            value = y[cuts.row[c] + i]
            inside = inside and value >= cuts.low[c, code] and value < cuts.high[c, code]
        row = grid.offset[code]
        for k in range(grid.axes[code]):
            if inside:
                cell = grid.given[code, k]
                if cell < 0:
                    # far beyond the look-up cells a value would not fit a whole number
                    value = y[grid.row[code, k] + i]
                    near = min(max(value, -1e9), 1e9)
                    cell = bin_on_axis(near, grid, code, k)
                inside = cell >= 0
                row += (cell + 1) * grid.stride[code, k]
        if inside:
            found[i] = row
