"""Summed-area tables against numpy's histograms, which look at every candidate."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from semitau.core.candidate_grid import CandidateGrid, CategoryGrid, GridAxis

Floats = NDArray[np.float64]
COLUMNS = ("expected", "variance", "generated", "one", "two")


def filled(shape: tuple[int, ...], seed: int) -> tuple[CandidateGrid, Floats, Floats]:
    """A grid with so many cells along each axis, the candidates (n, axes) in it, and their columns."""
    rng = np.random.default_rng(seed)
    grid = CategoryGrid("c", tuple(GridAxis(f"x{k}", tuple(map(float, range(n + 1)))) for k, n in enumerate(shape)))
    where = rng.uniform(0.0, shape, size=(500, len(shape)))
    what = np.round(rng.normal(size=(500, len(COLUMNS))), 6)
    cells = np.zeros((grid.rows, len(COLUMNS)))
    rows = (np.floor(where).astype(int) + 1) @ np.array(grid.strides)
    np.add.at(cells, rows, what)
    return CandidateGrid.of_cells((grid,), COLUMNS, cells, 500), where, what


@pytest.mark.parametrize("shape", [(5,), (4, 6), (3, 4, 5), (4, 3, 2, 5), (2, 3, 2, 3, 2)])
@pytest.mark.parametrize("seed", range(6))
def test_contents_are_those_of_a_histogram(shape: tuple[int, ...], seed: int) -> None:
    """Reference: numpy.histogramdd, any edges, also single bins that begin above the first edge."""
    grid, where, what = filled(shape, seed)
    rng = np.random.default_rng(1000 + seed)
    edges = []
    for n in shape:
        size = int(rng.integers(2, n + 2))
        edges.append(tuple(sorted(rng.choice(n + 1, size=size, replace=False).tolist())))
    got = grid.contents(0, tuple(edges))
    # numpy's last bin is closed at its upper end, where no candidate is
    wanted = np.stack(
        [np.histogramdd(where, [np.array(own, float) for own in edges], weights=what[:, k])[0] for k in range(5)], -1
    )
    assert got.shape == (wanted.size // 5, 5)
    np.testing.assert_allclose(got, wanted.reshape(-1, 5), atol=1e-10)


def test_whole_numbers_stay_whole() -> None:
    """What was generated in a box is exact: a box without candidates says 0, not a rounding."""
    cells = np.zeros((4 * 4, 3))
    grid = CategoryGrid("c", (GridAxis("x", (0.0, 1.0, 2.0, 3.0)), GridAxis("y", (0.0, 1.0, 2.0, 3.0))))
    cells[1 * 4 + 1, 2], cells[3 * 4 + 3, 2] = 123456.0, 7.0
    made = CandidateGrid.of_cells((grid,), ("expected", "variance", "generated"), cells, 0)
    assert made.contents(0, ((0, 1, 2, 3), (0, 1, 2, 3)))[:, 2].tolist() == [123456.0, 0, 0, 0, 0, 0, 0, 0, 7.0]
