"""What every bin expects at given parameters, and how that moves with them: what all information is made of."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from ..fitting.model import Model
from ..likelihood.expectation import FISHER, Workspace, set_point, sum_pieces, workspace
from ..likelihood.interpolation import positive
from ..likelihood.layout import Arrays, Indices


@dataclass(frozen=True, eq=False)
class BinDerivatives:
    """Bins that expect something, at one point of the parameters.

    bins : (n,) their numbers among all bins of the model. expected : (n,) events.
    rows : (n, parameters) derivatives of the expectations in the fitted parameters, those that functions set included
        through their functions.
    """

    bins: Indices
    expected: Floats
    rows: Floats


def bin_derivatives(model: Model, values: Floats) -> BinDerivatives:
    """Expectations and their derivatives at `values`, (parameters,)."""
    arrays = model.layout.arrays
    expected, rows = np.zeros(arrays.floor.size), np.zeros((arrays.floor.size, values.size))
    _fill(arrays, np.array(values), workspace(arrays), expected, rows)
    there = model.layout.lane_bin >= 0
    through = model.jacobian(values)
    return BinDerivatives(model.layout.lane_bin[there], expected[there], rows[there] @ through)


@kernel
def _fill(arrays: Arrays, x: Floats, work: Workspace, expected: Floats, rows: Floats) -> None:
    set_point(arrays, x, work)
    for tile in range(arrays.tile_filled.shape[0]):
        sum_pieces(arrays, tile, x, FISHER, work)
        first = arrays.tile_first[tile]
        for i in range(arrays.tile_filled[tile]):
            mu, slope, _ = positive(work.lanes[0, i], arrays.floor[first + i])
            expected[first + i] = mu
            for j in range(arrays.tile_rows[tile], arrays.tile_rows[tile + 1]):
                p = arrays.rows[j]
                rows[first + i, p] = slope * work.rows[p, i]
