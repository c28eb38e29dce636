"""Drawing from a tabulated density in constant time: alias table over intervals, linear density inside each.

Walker's alias method (Electronics Letters 10 (1974) 127) in Vose's form (IEEE Trans. Softw. Eng. 17 (1991) 972). Inside
an interval the position y in [0, 1) comes from a straight line by reflection: keep y with the odds g(y) : g(1 - y).
"""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined

Floats = npt.NDArray[np.float64]


def interval_table(density: Callable[[Floats], Floats], intervals: int) -> Floats:
    """Sampling table of a density on [0, 1], cut into equal intervals.

    density : vectorised, not negative, needs no normalisation; called once with 2 * intervals + 1 points.
    Returns (intervals, 3): chance to stay in the interval, the other interval, share of the left edge in the density.
    Interval contents are exact to fourth order (Simpson); within an interval the density is linear between its edges.
    """
    values = density(np.linspace(0.0, 1.0, 2 * intervals + 1))
    if not np.all(np.isfinite(values)) or np.any(values < 0.0) or not values.sum() > 0.0:
        raise ValueError("a density must be finite and not negative, and positive somewhere")
    left, middle, right = values[:-1:2], values[1::2], values[2::2]
    table = np.empty((intervals, 3))
    table[:, :2] = alias_table(left + 4.0 * middle + right)
    edges = left + right
    table[:, 2] = np.where(edges > 0.0, left / np.where(edges > 0.0, edges, 1.0), 0.5)
    return table


def alias_table(weights: Floats) -> Floats:
    """(n, 2): chance to stay at index k, and the index to take otherwise, for unnormalised weights (n,)."""
    n = weights.size
    scaled = weights * (n / weights.sum())
    stay, other = np.ones(n), np.arange(n, dtype=np.float64)
    small = [k for k in range(n) if scaled[k] < 1.0]
    large = [k for k in range(n) if scaled[k] >= 1.0]
    while small and large:
        poor, rich = small.pop(), large.pop()
        stay[poor], other[poor] = scaled[poor], rich
        scaled[rich] -= 1.0 - scaled[poor]
        (small if scaled[rich] < 1.0 else large).append(rich)
    return np.column_stack([stay, other])


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
