"""Whole events instead of histograms: truth and candidates of a run of decays, for event files and for tests."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel

from .. import block as row
from ..block import LANES, ROWS
from ..templates.binning import ROW_OF, Axes, Cuts, place
from ..templates.chunk import FOUND_STEPS
from ..templates.chunk_tasks import NOMINAL, Bench
from ..templates.component_plan import ChannelPlan
from ..truth.any_drawing import AnyTable, table_of
from .candidates import Scenario, Windows, reconstruct
from .detector import Chain, Detector
from .finding import find, list_found
from .found_decays import draw_block, take_found
from .measuring import measure
from .setup import kernel_chain

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
Keys = npt.NDArray[np.uint64]


def _momentum(name: str, first: int) -> dict[str, int]:
    return {f"{name}_{axis}": first + k * LANES for k, axis in enumerate(("px", "py", "pz", "E"))}


TRUTH_ROWS = {
    "q2": row.Q2,
    "cos_theta": row.COS_THETA,
    "cos_theta_V": row.COS_V,
    "cos_chi": row.COS_CHI,
    "sin_chi": row.SIN_CHI,
    **_momentum("D", row.D_PX),
    **_momentum("soft", row.SOFT_PX),
    **_momentum("pion", row.PION_PX),
    **_momentum("second_pion", row.PION2_PX),
    **_momentum("tau", row.TAU_PX),
    **_momentum("lepton", row.LEPTON_PX),
    **_momentum("partner_1", row.PARTNER1_PX),
    **_momentum("partner_2", row.PARTNER2_PX),
}
"""Column of the truth -> row of the block. Momenta in GeV in the rest frame of the B, zero for absent particles."""

CANDIDATE_ROWS = {**ROW_OF, "category": row.CATEGORY, "soft_found": row.SOFT_FOUND, "tag_wrong": row.TAG_WRONG}
"""Column of the candidates -> row of the block."""

_TRUTH = np.array(list(TRUTH_ROWS.values()), dtype=np.int64)
_CANDIDATE = np.array(list(CANDIDATE_ROWS.values()), dtype=np.int64)


@dataclass(frozen=True, eq=False)
class Events:
    """Decays and their candidates.

    truth (columns of TRUTH_ROWS, n). candidates (columns of CANDIDATE_ROWS, m): all with a category, whether or not
    the study has it. number (m,) : which decay each belongs to. selected (m,) : 1 if it is in a template, else 0.
    """

    first: int
    truth: Floats
    candidates: Floats
    number: Integers
    selected: Integers


@dataclass(frozen=True, eq=False)
class EventRecorder:
    """Called with (first, n), it gives the decays first ... first + n - 1 of a channel's stream."""

    bench: Bench
    stream: np.uint64
    table: AnyTable
    chain: Chain
    scenario: Scenario

    def __call__(self, first: int, n: int) -> Events:
        bench = self.bench
        truth = np.empty((len(_TRUTH), n))
        candidates = np.empty((len(_CANDIDATE), n))
        number, selected = np.empty(n, dtype=np.int64), np.empty(n, dtype=np.int64)
        flow = np.zeros(bench.shape, dtype=np.int64)
        m = _record(
            self.stream, first, n, self.table, self.chain, bench.detector, bench.quantiles, self.scenario,
            bench.windows, bench.cuts, bench.axes, flow, truth, candidates, number, selected,
        )  # fmt: skip
        return Events(first, truth, candidates[:, :m], number[:m], selected[:m])


def event_recorder(plan: ChannelPlan, bench: Bench, stream: np.uint64, scenario: Scenario = NOMINAL) -> EventRecorder:
    """Recorder of a channel.

    Its events are those that `chunk.fill_chunk` makes of the same stream, in this scenario.
    """
    return EventRecorder(
        bench, stream, table_of(plan.channel), kernel_chain(plan.channel, bench.least_photon), scenario
    )


@kernel
def _record(
    stream: np.uint64, first: int, events: int, table: AnyTable, chain: Chain, detector: Detector,
    quantiles: Floats, scenario: Scenario, windows: Windows, cuts: Cuts, axes: Axes, flow: Integers,
    truth: Floats, candidates: Floats, number: Integers, selected: Integers,
) -> int:  # fmt: skip
    """As `fill_chunk`, but block by block without packing across blocks; returns how many candidates there are."""
    x, y = np.zeros(ROWS * LANES), np.zeros(ROWS * LANES)
    keys, y_keys = np.zeros(LANES, dtype=np.uint64), np.zeros(LANES, dtype=np.uint64)
    numbers, y_numbers = np.zeros(LANES, dtype=np.uint64), np.zeros(LANES, dtype=np.uint64)
    lanes = np.zeros(LANES, dtype=np.uint64)
    bins = np.zeros(LANES, dtype=np.int64)
    found = np.zeros(FOUND_STEPS, dtype=np.int64)
    total = 0
    for begin in range(0, events, LANES):
        here = min(LANES, events - begin)
        first_event = np.uint64(first + begin)
        draw_block(x, keys, numbers, table, chain, stream, first_event)
        for k in range(_TRUTH.shape[0]):
            for i in range(here):
                truth[k, begin + i] = x[_TRUTH[k] + i]
        find(x, keys, chain, detector, quantiles)
        passed = list_found(x, here, found, lanes)
        take_found(x, keys, numbers, lanes, 0, passed, chain, y, y_keys, y_numbers, 0)
        measure(y, y_keys, chain, detector)
        reconstruct(y, chain, detector.beams, scenario, windows)
        place(y, passed, cuts, axes, flow, bins)
        for i in range(passed):
            if y[row.CATEGORY + i] >= 0.0:
                for k in range(_CANDIDATE.shape[0]):
                    candidates[k, total] = y[_CANDIDATE[k] + i]
                number[total] = np.int64(y_numbers[i])
                selected[total] = 1 if bins[i] >= 0 else 0
                total += 1
    return total
