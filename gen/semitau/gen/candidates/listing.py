"""One task: a run of decays of one chain, from random numbers to a list of its candidates' cells and weights.

The stages are those of `templates.chunk`, from the same random numbers, so the candidates are the same.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel

from ..block import CATEGORY, LANES, ROWS, SOFT_EFFICIENCY, SOFT_FOUND
from ..response.candidates import Scenario, Windows, reconstruct
from ..response.compaction import drop_unbinned
from ..response.detector import Chain, Detector
from ..response.finding import find, list_found
from ..response.found_decays import draw_block, take_found
from ..response.measuring import measure
from ..templates.binning import Cuts
from ..templates.chunk import FOUND_STEPS, soft_weight
from ..truth.any_drawing import AnyTable
from ..truth.variation_weights import VariationTable, variation_weights
from .grid_table import GridTable, find_cells

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
Keys = npt.NDArray[np.uint64]


class Listing(NamedTuple):
    """Candidates that have a cell in any scenario.

    used (1,) : how many there are. rows (1 + scenarios, room) : of the grids; -1 for none; the nominal one first.
    categories (room,) : place of the nominal category. batches (room,) : number of the decay modulo the batches.
    weights (room, sides) : of form-factor variations, then of soft efficiencies; unset without a nominal row.
    """

    used: Integers
    rows: Integers
    categories: Integers
    batches: Integers
    weights: Floats


def new_listing(room: int, scenarios: int, weights: int) -> Listing:
    """Room for as many candidates."""
    return Listing(
        np.zeros(1, dtype=np.int64),
        np.full((scenarios, room), -1, dtype=np.int64),
        np.zeros(room, dtype=np.int64),
        np.zeros(room, dtype=np.int64),
        np.ones((room, weights)),
    )


@kernel
def list_chunk(
    stream: np.uint64, first: int, events: int, table: AnyTable, chain: Chain, detector: Detector,
    quantiles: Floats, variations: VariationTable, soft_factors: Floats, scenarios: Floats, windows: Windows,
    cuts: Cuts, grid: GridTable, batches: int, listing: Listing,
) -> None:  # fmt: skip
    """Generate, reconstruct, select and list `events` decays with numbers from `first` on; see `chunk.fill_chunk`."""
    x, y = np.zeros(ROWS * LANES), np.zeros(ROWS * LANES)
    keys, y_keys = np.zeros(LANES, dtype=np.uint64), np.zeros(LANES, dtype=np.uint64)
    numbers, y_numbers = np.zeros(LANES, dtype=np.uint64), np.zeros(LANES, dtype=np.uint64)
    lanes = np.zeros(LANES, dtype=np.uint64)
    found = np.zeros(FOUND_STEPS, dtype=np.int64)
    rows = np.zeros((scenarios.shape[0], LANES), dtype=np.int64)
    weights = np.zeros((LANES, max(variations.variations, 1)))
    filled = 0
    for begin in range(0, events, LANES):
        here = min(LANES, events - begin)
        first_event = np.uint64(first + begin)
        draw_block(x, keys, numbers, table, chain, stream, first_event)
        find(x, keys, chain, detector, quantiles)
        passed = list_found(x, here, found, lanes)
        done = 0
        while done < passed:
            take = min(passed - done, LANES - filled)
            take_found(x, keys, numbers, lanes, done, take, chain, y, y_keys, y_numbers, filled)
            done += take
            filled += take
            if filled == LANES:
                list_block(
                    y, y_keys, y_numbers, LANES, chain, detector, variations, soft_factors, scenarios, windows, cuts,
                    grid, batches, rows, weights, listing,
                )  # fmt: skip
                filled = 0
    list_block(
        y, y_keys, y_numbers, filled, chain, detector, variations, soft_factors, scenarios, windows, cuts, grid,
        batches, rows, weights, listing,
    )  # fmt: skip


@kernel
def list_block(
    y: Floats, keys: Keys, numbers: Keys, events: int, chain: Chain, detector: Detector, variations: VariationTable,
    soft_factors: Floats, scenarios: Floats, windows: Windows, cuts: Cuts, grid: GridTable, batches: int,
    rows: Integers, weights: Floats, listing: Listing,
) -> None:  # fmt: skip
    """The part of `list_chunk` behind compaction: `events` found decays in one block."""
    measure(y, keys, chain, detector)
    for s in range(scenarios.shape[0] - 1, -1, -1):  # the nominal one last: what follows reads its rows
        scenario = Scenario(scenarios[s, 0], scenarios[s, 1], scenarios[s, 2])
        reconstruct(y, chain, detector.beams, scenario, windows)
        find_cells(y, events, cuts, grid, rows[s])
    used = listing.used[0]
    places = np.full(LANES, -1, dtype=np.int64)
    for i in range(events):
        listed = False
        for s in range(scenarios.shape[0]):
            listed = listed or rows[s, i] >= 0
        if listed:
            for s in range(scenarios.shape[0]):
                listing.rows[s, used] = rows[s, i]
            listing.batches[used] = int(numbers[i] % np.uint64(batches))
            if rows[0, i] >= 0:
                places[i] = used
                listing.categories[used] = grid.category[int(y[CATEGORY + i])]
                for s in range(soft_factors.shape[0]):
                    listing.weights[used, variations.variations + s] = soft_weight(
                        soft_factors[s], y[SOFT_EFFICIENCY + i], y[SOFT_FOUND + i] == 1.0
                    )
            used += 1
    listing.used[0] = used
    if variations.variations > 0:
        kept = drop_unbinned(y, events, places)
        variation_weights(y, variations, weights, kept)
        for k in range(kept):
            for v in range(variations.variations):
                listing.weights[places[k], v] = weights[k, v]


@kernel
def list_drawn(
    values: Floats, rows: Integers, code: int, first: int, cuts: Cuts, grid: GridTable, batches: int, listing: Listing
) -> None:
    """List events whose observables were drawn from shapes; see `chunk.fill_drawn`. first : number of the first one."""
    y = np.zeros(ROWS * LANES)
    found = np.zeros(LANES, dtype=np.int64)
    for i in range(LANES):
        y[CATEGORY + i] = code
    events = values.shape[1]
    used = 0
    for begin in range(0, events, LANES):
        here = min(LANES, events - begin)
        for k in range(rows.shape[0]):
            for i in range(here):
                y[rows[k] + i] = values[k, begin + i]
        find_cells(y, here, cuts, grid, found)
        for i in range(here):
            if found[i] >= 0:
                listing.rows[0, used] = found[i]
                listing.categories[used] = grid.category[code]
                listing.batches[used] = (first + begin + i) % batches
                used += 1
    listing.used[0] = used
