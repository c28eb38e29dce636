"""Candidates on fine grids as summed-area tables: the contents of any bins between grid edges from a few look-ups.

Every category has a grid of its own, whose axes are the observables that it may be cut on or binned in. The table holds
at each crossing of edges the sum over all candidates below it in every observable, so the content of a box is the
signed sum over its corners (F. C. Crow, Computer Graphics 18 (1984) 207), whatever the number of candidates in it.
Sums, not candidates, are kept, so memory depends on the grid alone.

Columns are everything that is linear in the candidates; the first three are the same in every grid.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import prod

import numpy as np
from numpy.typing import NDArray

from .compiled import kernel

Floats = NDArray[np.float64]
Integers = NDArray[np.int64]

EXPECTED, VARIANCE, GENERATED = 0, 1, 2
"""Columns: expected events; their variance from the finite generated sample of the study; candidates behind them."""


@dataclass(frozen=True)
class GridAxis:
    """An observable and its increasing edges, in GeV or GeV²; the outer ones may be infinite.

    kept : cell of candidates that have no such observable; one that no cut removes.
    """

    observable: str
    edges: tuple[float, ...]
    kept: int = 0

    def index(self, edge: float) -> int:
        """Place of an edge. ValueError if there is none."""
        return self.edges.index(edge)


@dataclass(frozen=True)
class CategoryGrid:
    """The grid of one category."""

    category: str
    axes: tuple[GridAxis, ...]

    @property
    def shape(self) -> tuple[int, ...]:
        """Edges along each axis: the table has a row of sums for each crossing."""
        return tuple(len(axis.edges) for axis in self.axes)

    @property
    def rows(self) -> int:
        """Crossings of edges."""
        return prod(self.shape)

    @property
    def strides(self) -> tuple[int, ...]:
        """Rows from one edge to the next along each axis; the last axis is the fastest."""
        return tuple(prod(self.shape[k + 1 :]) for k in range(len(self.shape)))

    def axis(self, observable: str) -> GridAxis | None:
        """The axis of an observable, if there is one."""
        return next((axis for axis in self.axes if axis.observable == observable), None)


@dataclass(frozen=True, eq=False)
class CandidateGrid:
    """Sums over the candidates of all categories.

    columns : names; EXPECTED, VARIANCE and GENERATED first. tables : for each category (rows, columns) float64, sums
    over all candidates below a crossing. generated : events that were generated for it.
    """

    categories: tuple[CategoryGrid, ...]
    columns: tuple[str, ...]
    tables: tuple[Floats, ...]
    generated: int

    @classmethod
    def of_cells(
        cls, categories: tuple[CategoryGrid, ...], columns: tuple[str, ...], cells: Floats, generated: int
    ) -> CandidateGrid:
        """From sums over single cells, (rows of all categories, columns), which are added up in place.

        The cell between the edges i and i + 1 of each axis stands at the crossing of the edges i + 1.
        """
        tables, first = [], 0
        for grid in categories:
            table = cells[first : first + grid.rows]
            whole = table.reshape(*grid.shape, len(columns))
            for k in range(len(grid.shape)):
                np.cumsum(whole, axis=k, out=whole)
            tables.append(table)
            first += grid.rows
        return cls(categories, columns, tuple(tables), generated)

    def contents(self, place: int, edges: tuple[tuple[int, ...], ...]) -> Floats:
        """(bins, columns) of the category at this place; see `box_contents` for the order of the bins."""
        flat, first = flat_edges(edges)
        scratch = np.empty((prod(len(own) for own in edges), len(self.columns)))
        strides = np.array(self.categories[place].strides, dtype=np.int64)
        bins = box_contents(self.tables[place], strides, flat, first, scratch)
        return scratch[:bins]


def flat_edges(edges: tuple[tuple[int, ...], ...]) -> tuple[Integers, Integers]:
    """Places of edges along each axis as one array, and where each axis begins in it."""
    flat = np.array([index for own in edges for index in own], dtype=np.int64)
    return flat, np.cumsum([0, *map(len, edges)]).astype(np.int64)


@kernel
def box_contents(table: Floats, strides: Integers, edges: Integers, first: Integers, out: Floats) -> int:
    """Contents of the boxes between chosen edges, in the first rows of `out`; returns how many boxes there are.

    edges[first[k] : first[k + 1]] : places of two or more edges along axis k, increasing. Boxes are in the order of the
    axes, the last one fastest. out : a row for each crossing of chosen edges.
    """
    axes = strides.shape[0]
    columns = table.shape[1]
    # Nothing lies below the first edge of the grid: an axis of one bin from there on has one crossing that counts.
    sizes = np.empty(axes, dtype=np.int64)
    start = np.empty(axes, dtype=np.int64)
    crossings = 1
    for k in range(axes):
        alone = first[k + 1] - first[k] == 2 and edges[first[k]] == 0
        start[k] = first[k] + 1 if alone else first[k]
        sizes[k] = first[k + 1] - start[k]
        crossings *= sizes[k]
    for crossing in range(crossings):
        rest, row, outside = crossing, 0, False
        for k in range(axes - 1, -1, -1):
            index = edges[start[k] + rest % sizes[k]]
            rest //= sizes[k]
            row += index * strides[k]
            outside = outside or index == 0
        if outside:
            out[crossing, :] = 0.0
        else:
            for c in range(columns):
                out[crossing, c] = table[row, c]
    inner, total = 1, crossings
    for k in range(axes - 1, -1, -1):
        size = sizes[k]
        if first[k + 1] - start[k] > 1:
            outer = total // (size * inner)
            # In place: a difference is written where everything has been read already.
            for o in range(outer):
                for j in range(size - 1):
                    for i in range(inner):
                        low = (o * size + j) * inner + i
                        new = (o * (size - 1) + j) * inner + i
                        for c in range(columns):
                            out[new, c] = out[low + inner, c] - out[low, c]
            total = outer * (size - 1) * inner
            inner *= size - 1
        else:
            inner *= size
    return total
