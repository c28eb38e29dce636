"""Drawing from a tabulated density in constant time: alias table over intervals, linear density inside each.

Walker's alias method (Electronics Letters 10 (1974) 127) in Vose's form (IEEE Trans. Softw. Eng. 17 (1991) 972). Inside
an interval the position y in [0, 1) comes from a straight line by reflection: keep y with the odds g(y) : g(1 - y).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel

Floats = npt.NDArray[np.float64]


def interval_table(density: Callable[[Floats], Floats], intervals: int) -> Floats:
    """Sampling table of a density on [0, 1], cut into equal intervals.

    density : vectorised, not negative, needs no normalisation; called once with 2 * intervals + 1 points.
    Returns (intervals, 3): chance to stay in the interval, the other interval, share of the left edge in the density.
    Interval contents are exact to fourth order (Simpson); within an interval the density is linear between its edges.
    """
    return interval_tables(density, intervals)


def interval_tables(densities: Callable[[Floats], Floats], intervals: int) -> Floats:
    """The same of several densities at once, one behind the other: (densities * intervals, 3).

    densities : as in `interval_table`, but with a row for each: (densities, 2 * intervals + 1).
    """
    values = np.atleast_2d(densities(np.linspace(0.0, 1.0, 2 * intervals + 1)))
    if not np.all(np.isfinite(values)) or np.any(values < 0.0) or not np.all(values.sum(axis=-1) > 0.0):
        raise ValueError("a density must be finite and not negative, and positive somewhere")
    left, middle, right = values[:, :-1:2], values[:, 1::2], values[:, 2::2]
    tables = np.empty((len(values), intervals, 3))
    tables[..., :2] = alias_tables(left + 4.0 * middle + right)
    edges = left + right
    tables[..., 2] = np.where(edges > 0.0, left / np.where(edges > 0.0, edges, 1.0), 0.5)
    return tables.reshape(-1, 3)


def alias_tables(weights: Floats) -> Floats:
    """(tables, n, 2): chance to stay at index k, and the index to take otherwise. weights (tables, n), unnormalised."""
    n = weights.shape[-1]
    tables = np.empty((*weights.shape, 2))
    _fill_alias_tables(weights * (n / weights.sum(axis=-1, keepdims=True)), tables)
    return tables


@kernel
def _fill_alias_tables(scaled: Floats, tables: Floats) -> None:
    """scaled : weights with a mean of 1, overwritten."""
    n = scaled.shape[1]
    small, large = np.empty(n, dtype=np.int64), np.empty(n, dtype=np.int64)
    for t in range(scaled.shape[0]):
        poor_ones, rich_ones = 0, 0
        for k in range(n):
            tables[t, k, 0], tables[t, k, 1] = 1.0, k
            if scaled[t, k] < 1.0:
                small[poor_ones] = k
                poor_ones += 1
            else:
                large[rich_ones] = k
                rich_ones += 1
        while poor_ones > 0 and rich_ones > 0:
            poor_ones -= 1
            poor, rich = small[poor_ones], large[rich_ones - 1]
            tables[t, poor, 0], tables[t, poor, 1] = scaled[t, poor], rich
            scaled[t, rich] -= 1.0 - scaled[t, poor]
            if scaled[t, rich] < 1.0:
                rich_ones -= 1
                small[poor_ones] = rich
                poor_ones += 1


@inlined
def draw_position(table: Floats, u_interval: float, u_inside: float, u_side: float) -> float:
    """A position between 0 and the number of intervals, from an `interval_table` and three uniforms."""
    return draw_position_in(table, 0, table.shape[0], u_interval, u_inside, u_side)  # type: ignore[no-any-return]


@inlined
def draw_position_in(
    table: Floats, first: int, intervals: int, u_interval: float, u_inside: float, u_side: float
) -> float:
    """The same from the one of several tables, one behind the other, that begins at row `first`."""
    scaled = u_interval * intervals
    k = np.int64(scaled)
    k = k if scaled - k < table[first + k, 0] else np.int64(table[first + k, 1])
    left = table[first + k, 2]
    y = u_inside if u_side < left + (1.0 - 2.0 * left) * u_inside else 1.0 - u_inside
    return k + y
