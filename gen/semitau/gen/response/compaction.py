"""Pack the events that were found into dense blocks, so that the later stages work on full lanes."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel

from ..block import BOOST_GAMMA, D_PX, FLAVOUR, LANES, OTHERS_LEFT, OTHERS_SEEN, PION_E, Q2, SOFT_PX

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]
Integers = npt.NDArray[np.int64]

_DECAY = np.array(range(Q2, D_PX, LANES), dtype=np.uint64)
# What later stages read: variables of the decay (for weights), the slow particles, and what `find` made.
_KEPT = np.array(
    [
        *_DECAY,
        *range(SOFT_PX, PION_E + LANES, LANES),
        *range(BOOST_GAMMA, FLAVOUR + LANES, LANES),
        OTHERS_SEEN,
        OTHERS_LEFT,
    ],
    dtype=np.uint64,
)


@kernel
def move(
    x: Floats, keys: Keys, numbers: Keys, lanes: Keys, first: int, count: int,
    y: Floats, y_keys: Keys, y_numbers: Keys, filled: int,
) -> None:  # fmt: skip
    """Copy the lanes lanes[first : first + count] of x to the lanes from `filled` on of y; keys and numbers alike."""
    # Unsigned indices throughout: signed ones cost a comparison each, for counting from the end.
    start, place, n = np.uint64(first), np.uint64(filled), np.uint64(count)
    for k in range(n):
        lane = lanes[start + k]
        y_keys[place + k] = keys[lane]
        y_numbers[place + k] = numbers[lane]
    for row in _KEPT:
        for k in range(n):
            y[row + place + k] = x[row + lanes[start + k]]


@kernel
def drop_unbinned(y: Floats, events: int, bins: Integers) -> int:
    """Keep, in place and in order, the lanes with a bin: their entries in `bins` and the variables of the decay.

    Returns how many there are. Other rows are left as they are.
    """
    lanes = np.empty(LANES, dtype=np.uint64)
    kept = np.uint64(0)
    for i in range(np.uint64(events)):
        lanes[kept] = i
        kept += np.uint64(1 if bins[i] >= 0 else 0)
    for k in range(kept):
        bins[k] = bins[lanes[k]]
    for row in _DECAY:
        for k in range(kept):
            y[row + k] = y[row + lanes[k]]
    return int(kept)
