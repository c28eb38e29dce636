"""One task of the build: a run of decays of one chain, from random numbers to histograms of all variations."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel

from ..block import CATEGORY, LANES, ROWS, SOFT_EFFICIENCY, SOFT_FOUND
from ..response.candidates import Scenario, Windows, reconstruct
from ..response.compaction import drop_unbinned
from ..response.detector import Chain, Detector
from ..response.finding import find, list_found
from ..response.found_decays import draw_block, take_found
from ..response.measuring import measure
from ..truth.any_drawing import AnyTable
from ..truth.bilinear_pieces import PieceTable, bilinear_pieces
from ..truth.variation_weights import VariationTable, variation_weights
from .binning import Axes, Cuts, count, place

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
Keys = npt.NDArray[np.uint64]


class Sums(NamedTuple):
    """What `fill_chunk` adds to.

    found (3,), flow (2 + cuts, categories) : nominal numbers of events, see `list_found` and `place`.
    histogram (bins, 1 + variations + s + r - 1) : 1 an event in column 0, the weights of the form-factor variations and
        of the s soft efficiencies, and 1 for each further one of the r scenarios where it puts the event.
    spread (variations + s, 2) : weights and squared weights of all events with a bin.
    pieces (bins, pieces) : bilinear pieces of the events' weights, see `bilinear_pieces`.
    moments (categories, pieces, pieces) : sums of the products of two pieces of an event; upper triangles.
    """

    found: Integers
    flow: Integers
    histogram: Floats
    spread: Floats
    pieces: Floats
    moments: Floats


FOUND_STEPS = 3
"""Steps that `fill_chunk` counts before there is a category: charm seen, lepton seen, lepton identified."""


@kernel
def fill_chunk(
    stream: np.uint64, first: int, events: int, table: AnyTable, chain: Chain, detector: Detector,
    quantiles: Floats, variations: VariationTable, pieces: PieceTable, soft_factors: Floats, scenarios: Floats,
    windows: Windows, cuts: Cuts, axes: Axes, category_of_bin: Integers, sums: Sums,
) -> None:  # fmt: skip
    """Generate, reconstruct, select and fill `events` decays with numbers from `first` on.

    stream : the chain's random stream. quantiles : for D+ -> K pi pi. soft_factors (s,) : on the soft efficiency.
    scenarios (r, 3) : factors on tag width, track momenta and residual energy; the first is the nominal one.
    category_of_bin (bins,) : for the moments.
    """
    x, y = np.zeros(ROWS * LANES), np.zeros(ROWS * LANES)
    keys, y_keys = np.zeros(LANES, dtype=np.uint64), np.zeros(LANES, dtype=np.uint64)
    numbers, y_numbers = np.zeros(LANES, dtype=np.uint64), np.zeros(LANES, dtype=np.uint64)
    lanes = np.zeros(LANES, dtype=np.uint64)
    bins = np.zeros(LANES, dtype=np.int64)
    weights = np.zeros((LANES, max(variations.variations, pieces.pieces, 1)))
    lost_flow = np.zeros_like(sums.flow)
    filled = 0
    for begin in range(0, events, LANES):
        here = min(LANES, events - begin)
        first_event = np.uint64(first + begin)
        draw_block(x, keys, numbers, table, chain, stream, first_event)
        find(x, keys, chain, detector, quantiles)
        passed = list_found(x, here, sums.found, lanes)
        done = 0
        while done < passed:
            take = min(passed - done, LANES - filled)
            take_found(x, keys, numbers, lanes, done, take, chain, y, y_keys, y_numbers, filled)
            done += take
            filled += take
            if filled == LANES:
                fill_block(
                    y, y_keys, LANES, chain, detector, variations, pieces, soft_factors, scenarios, windows, cuts, axes,
                    category_of_bin, bins, weights, lost_flow, sums,
                )  # fmt: skip
                filled = 0
    fill_block(
        y, y_keys, filled, chain, detector, variations, pieces, soft_factors, scenarios, windows, cuts, axes,
        category_of_bin, bins, weights, lost_flow, sums,
    )  # fmt: skip


@kernel
def fill_block(
    y: Floats, keys: Keys, events: int, chain: Chain, detector: Detector, variations: VariationTable,
    pieces: PieceTable, soft_factors: Floats, scenarios: Floats, windows: Windows, cuts: Cuts, axes: Axes,
    category_of_bin: Integers, bins: Integers, weights: Floats, lost_flow: Integers, sums: Sums,
) -> None:  # fmt: skip
    """The part of `fill_chunk` behind compaction: `events` found decays in one block."""
    histogram = sums.histogram
    measure(y, keys, chain, detector)
    weight_columns = variations.variations
    soft_columns = soft_factors.shape[0]
    for s in range(1, scenarios.shape[0]):
        scenario = Scenario(scenarios[s, 0], scenarios[s, 1], scenarios[s, 2])
        reconstruct(y, chain, detector.beams, scenario, windows)
        place(y, events, cuts, axes, lost_flow, bins)
        count(bins, events, weight_columns + soft_columns + s, histogram)
    nominal = Scenario(scenarios[0, 0], scenarios[0, 1], scenarios[0, 2])
    reconstruct(y, chain, detector.beams, nominal, windows)
    place(y, events, cuts, axes, sums.flow, bins)
    count(bins, events, 0, histogram)
    if soft_columns > 0:
        fill_soft(y, bins, events, soft_factors, weight_columns, histogram, sums.spread)
    if weight_columns > 0 or pieces.pieces > 0:
        binned = drop_unbinned(y, events, bins)
        if weight_columns > 0:
            variation_weights(y, variations, weights, binned)
            fill_weights(bins, binned, weights, weight_columns, histogram, sums.spread)
        if pieces.pieces > 0:
            bilinear_pieces(y, pieces, weights, binned)
            fill_pieces(bins, binned, weights, category_of_bin, sums.pieces, sums.moments)


@kernel
def fill_weights(bins: Integers, events: int, weights: Floats, columns: int, histogram: Floats, spread: Floats) -> None:
    """histogram[bin, 1 + v] += weights[event, v] for events that all have a bin."""
    for i in range(events):
        for v in range(columns):
            histogram[bins[i], 1 + v] += weights[i, v]
            spread[v, 0] += weights[i, v]
            spread[v, 1] += weights[i, v] * weights[i, v]


@kernel
def fill_pieces(
    bins: Integers, events: int, weights: Floats, category_of_bin: Integers, pieces: Floats, moments: Floats
) -> None:
    """Pieces of the weights by bin, and their products by category, for events that all have a bin."""
    columns = pieces.shape[1]
    for i in range(events):
        category = category_of_bin[bins[i]]
        for p in range(columns):
            pieces[bins[i], p] += weights[i, p]
            for q in range(p, columns):
                moments[category, p, q] += weights[i, p] * weights[i, q]


@inlined
def soft_weight(factor: float, efficiency: float, found: bool) -> float:
    """Weight for a changed soft efficiency e' = f e: f if the particle was found, (1 - e')/(1 - e) if it was lost."""
    lost = (1.0 - factor * efficiency) / (1.0 - efficiency) if efficiency < 1.0 else 0.0
    return factor if found else lost


@kernel
def fill_soft(
    y: Floats, bins: Integers, events: int, factors: Floats, place: int, histogram: Floats, spread: Floats
) -> None:
    """Weights of changed soft efficiencies.

    place : of the first factor among the weights; column 0 of the histogram comes before them.
    """
    for i in range(events):
        if bins[i] >= 0:
            efficiency = y[SOFT_EFFICIENCY + i]
            found = y[SOFT_FOUND + i] == 1.0
            for s in range(factors.shape[0]):
                weight = soft_weight(factors[s], efficiency, found)
                histogram[bins[i], 1 + place + s] += weight
                spread[place + s, 0] += weight
                spread[place + s, 1] += weight * weight


@kernel
def fill_drawn(
    values: Floats, rows: Integers, code: int, cuts: Cuts, axes: Axes, flow: Integers, histogram: Floats
) -> None:
    """Select and fill events whose observables were drawn from shapes.

    values (observables, events) : rows (observables,) says where each belongs in a block. code : their category.
    flow, histogram (bins, 1) : as in `fill_chunk`.
    """
    y = np.zeros(ROWS * LANES)
    bins = np.zeros(LANES, dtype=np.int64)
    for i in range(LANES):
        y[CATEGORY + i] = code
    events = values.shape[1]
    for begin in range(0, events, LANES):
        here = min(LANES, events - begin)
        for k in range(rows.shape[0]):
            for i in range(here):
                y[rows[k] + i] = values[k, begin + i]
        place(y, here, cuts, axes, flow, bins)
        count(bins, here, 0, histogram)
