"""Cuts and axes of all categories as flat tables, and the kernel that gives each candidate its place in them.

Every category has its own cuts and its own one to three axes; all bins of all categories are numbered through, last
axis fastest, so that one array holds a component's histograms.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel

from ..block import CATEGORY, DELTA_M, E_RES, EL, MM2, P_CHARM, P_LEPTON, Q2_MEASURED
from ..study_file.categories import StudyCategory
from ..study_file.names import CHARM_HADRONS, SEEN_LEPTONS

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

ROW_OF = {
    "mm2": MM2,
    "q2": Q2_MEASURED,
    "el": EL,
    "p_lepton": P_LEPTON,
    "p_charm": P_CHARM,
    "e_res": E_RES,
    "delta_m": DELTA_M,
}
"""Observable -> row of the block that holds it."""

CODES = 16
NOT_A_CATEGORY = -1
_CELLS = 1024


def category_code(charm: str, lepton: str) -> int:
    """The number that the CATEGORY row holds: 2 * (place of charm in D0, D+, D*0, D*+) + (0 for e, 1 for mu; 8 for a
    pion, 9 for three)."""
    place = SEEN_LEPTONS.index(lepton)
    return 2 * CHARM_HADRONS.index(charm) + place % 2 + 8 * (place // 2)


class Cuts(NamedTuple):
    """cut k keeps low[k, code] <= x[row[k]] < high[k, code]; infinite where it does not apply. Shapes (k,), (k, 16)."""

    row: Integers
    low: Floats
    high: Floats


class Axes(NamedTuple):
    """Axes by category code. Shapes (16, 3) unless said otherwise; a missing axis has bins 0.

    category (16,) : place among the study's categories, NOT_A_CATEGORY if it is none of them.
    offset (16,) : number of the first bin. row, bins : observable and number of bins.
    first_edge, edges (n,) : where the bins + 1 edges start in `edges`.
    low, per_unit, first_cell, cells (m,) : 1024 cells of equal width over the axis; the bin at the start of each.
    """

    category: Integers
    offset: Integers
    row: Integers
    bins: Integers
    first_edge: Integers
    edges: Floats
    low: Floats
    per_unit: Floats
    first_cell: Integers
    cells: Integers


def cut_names(categories: Sequence[StudyCategory]) -> tuple[str, ...]:
    """Observables that any category cuts on, in the order of first appearance: the order of the cut flow."""
    return tuple(dict.fromkeys(name for category in categories for name in category.cuts))


def make_cuts(categories: Sequence[StudyCategory], drawn: Sequence[str] | None = None) -> Cuts:
    """Cuts of all categories. drawn : observables that exist (of a background); cuts on others let everything pass."""
    names = cut_names(categories)
    low = np.full((len(names), CODES), -np.inf)
    high = np.full((len(names), CODES), np.inf)
    for category in categories:
        code = category_code(category.charm, category.lepton)
        for k, name in enumerate(names):
            cut = category.cuts.get(name)
            if cut is not None and (drawn is None or name in drawn):
                low[k, code] = -np.inf if cut.min is None else cut.min
                high[k, code] = np.inf if cut.max is None else cut.max
    return Cuts(np.array([ROW_OF[name] for name in names], dtype=np.int64), low, high)


def make_axes(categories: Sequence[StudyCategory]) -> Axes:
    """Axes of all categories, bins numbered in the order of the categories."""
    category_of = np.full(CODES, NOT_A_CATEGORY, dtype=np.int64)
    offset = np.zeros(CODES, dtype=np.int64)
    row, bins, first_edge, first_cell = (np.zeros((CODES, 3), dtype=np.int64) for _ in range(4))
    low, per_unit = np.zeros((CODES, 3)), np.zeros((CODES, 3))
    all_edges: list[float] = []
    all_cells: list[int] = []
    total = 0
    for number, category in enumerate(categories):
        code = category_code(category.charm, category.lepton)
        category_of[code], offset[code] = number, total
        total += int(np.prod(category.shape))
        for k, (name, edges) in enumerate(category.axes.items()):
            row[code, k], bins[code, k] = ROW_OF[name], len(edges) - 1
            first_edge[code, k], first_cell[code, k] = len(all_edges), len(all_cells)
            low[code, k], per_unit[code, k] = edges[0], _CELLS / (edges[-1] - edges[0])
            starts = edges[0] + np.arange(_CELLS) / per_unit[code, k]
            all_cells.extend(np.clip(np.searchsorted(edges, starts, side="right") - 1, 0, len(edges) - 2))
            all_edges.extend(edges)
    return Axes(
        category_of, offset, row, bins, first_edge, np.array(all_edges), low, per_unit, first_cell,
        np.array(all_cells, dtype=np.int64),
    )  # fmt: skip


@inlined
def bin_on_axis(value: float, axes: Axes, code: int, k: int) -> int:
    """Bin of a value on an axis, -1 if it is outside (or not a number): edges[b] <= value < edges[b + 1]."""
    start, bins = axes.first_edge[code, k], axes.bins[code, k]
    if not (value >= axes.edges[start] and value < axes.edges[start + bins]):
        return -1
    cell = int((value - axes.low[code, k]) * axes.per_unit[code, k])
    b = int(axes.cells[axes.first_cell[code, k] + min(max(cell, 0), _CELLS - 1)])
    # The cell may hold edges, and rounding may miss its start by one: walk to the exact place.
    while value >= axes.edges[start + b + 1]:
        b += 1
    while value < axes.edges[start + b]:
        b -= 1
    return b


@kernel
def place(y: Floats, events: int, cuts: Cuts, axes: Axes, flow: Integers, bins: Integers) -> None:
    """Fill bins (events,) with each candidate's bin number, -1 for those that are cut, outside or no candidate.

    flow (2 + cuts, categories) grows by the candidates of each category, by those left after each cut, and by those
    inside the axes.
    """
    steps = cuts.row.shape[0]
    for i in range(events):
        bins[i] = -1
        code = int(y[CATEGORY + i])
        if code < 0 or axes.category[code] < 0:
            continue
        category = axes.category[code]
        flow[0, category] += 1
        passed = 0
        while passed < steps:
            value = y[cuts.row[passed] + i]
            if not (value >= cuts.low[passed, code] and value < cuts.high[passed, code]):
                break
            passed += 1
            flow[passed, category] += 1
        if passed < steps:
            continue
        number = 0
        for k in range(3):
            if axes.bins[code, k] > 0 and number >= 0:
                b = bin_on_axis(y[axes.row[code, k] + i], axes, code, k)
                number = number * axes.bins[code, k] + b if b >= 0 else -1
        if number >= 0:
            bins[i] = axes.offset[code] + number
            flow[steps + 1, category] += 1


@kernel
def count(bins: Integers, events: int, column: int, histogram: Floats) -> None:
    """Add 1 to histogram[bin, column] for each event that has a bin."""
    for i in range(events):
        if bins[i] >= 0:
            histogram[bins[i], column] += 1.0
