"""A block of decays from random numbers to those that were found, packed for the later stages."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.streams import event_key

from ..block import LANES
from ..truth.any_drawing import AnyTable, draw
from ..truth.radiation import radiate
from .compaction import move
from .detector import Chain
from .photons import keep_photons
from .tau_pions import keep_partners

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]


@kernel
def draw_block(
    x: Floats, keys: Keys, numbers: Keys, table: AnyTable, chain: Chain, stream: np.uint64, first_event: np.uint64
) -> None:
    """Draw LANES decays from number `first_event` on, with photons of their leptons; keys and numbers, too."""
    for i in range(LANES):
        numbers[i] = first_event + np.uint64(i)
        keys[i] = event_key(stream, numbers[i])
    draw(x, table, stream, first_event)
    if chain.radiation.on == 1:
        radiate(x, chain.radiation, stream, first_event)


@kernel
def take_found(
    x: Floats, keys: Keys, numbers: Keys, lanes: Keys, first: int, count: int, chain: Chain,
    y: Floats, y_keys: Keys, y_numbers: Keys, filled: int,
) -> None:  # fmt: skip
    """As `compaction.move`, with other pions of a tau and photons where the chain has them."""
    move(x, keys, numbers, lanes, first, count, y, y_keys, y_numbers, filled)
    if chain.partners > 0:
        keep_partners(x, lanes, first, count, y, filled)
    if chain.radiation.on == 1:
        keep_photons(x, lanes, first, count, y, filled)
