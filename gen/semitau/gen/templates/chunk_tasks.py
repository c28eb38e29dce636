"""Cut the work of a study into chunks of fixed size: independent tasks, the same whatever runs them."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import partial

import numpy as np
import numpy.typing as npt
from semitau.core.constants import MASS

from ..response.candidates import Scenario, Windows
from ..response.charm_decay import pair_mass_quantiles
from ..response.detector import Detector
from ..response.setup import delta_m_windows, kernel_chain, kernel_detector
from ..shapes.sampler import ShapeSampler
from ..study_file.categories import StudyCategory
from ..study_file.components import Background
from ..study_file.study import StudyConfig
from ..truth.any_drawing import table_of
from ..truth.variation_weights import WIDTH, VariationTable, variation_table
from .binning import ROW_OF, Axes, Cuts, category_code, make_axes, make_cuts
from .chunk import FOUND_STEPS, fill_chunk, fill_drawn
from .component_plan import ChannelPlan
from .variations import Side, scenarios

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

CHUNK_EVENTS = 65_536
NOMINAL = Scenario(tag_width=1.0, momentum=1.0)


@dataclass(frozen=True, eq=False)
class Filled:
    """What a chunk leaves: see `fill_chunk` for found, flow and histogram; seconds : time of its thread."""

    found: Integers
    flow: Integers
    histogram: Floats
    events: int
    seconds: float


Task = Callable[[], Filled]


@dataclass(frozen=True, eq=False)
class Bench:
    """What all chunks of a study share.

    categories : of the study. shape : steps of `place`, categories. bins : of all categories together.
    scenarios : reconstructions besides the nominal one. variations : whether columns beyond the nominal one are filled.
    """

    categories: tuple[StudyCategory, ...]
    shape: tuple[int, int]
    bins: int
    detector: Detector
    windows: Windows
    quantiles: Floats
    cuts: Cuts
    axes: Axes
    scenarios: Mapping[Side, Scenario]
    variations: bool


def make_bench(study: StudyConfig, *, variations: bool) -> Bench:
    """The shared part of all chunks of a study."""
    categories = study.categories
    cuts = make_cuts(categories)
    return Bench(
        categories=categories,
        shape=(len(cuts.row) + 2, len(categories)),
        bins=sum(int(np.prod(category.shape)) for category in categories),
        detector=kernel_detector(study),
        windows=delta_m_windows(study),
        quantiles=pair_mass_quantiles(MASS["D+"]),
        cuts=cuts,
        axes=make_axes(categories),
        scenarios=scenarios(study) if variations else {},
        variations=variations,
    )


def channel_columns(plan: ChannelPlan, bench: Bench) -> list[Side]:
    """What the columns of a channel's histogram after the nominal one hold, in order."""
    if not bench.variations:
        return []
    return [*plan.variations.decays, *plan.variations.soft, *bench.scenarios]


def channel_tasks(plan: ChannelPlan, bench: Bench, stream: np.uint64, events: int) -> Iterator[Task]:
    """Chunks of one channel, in order. stream : random stream of the channel; events : decays to generate."""
    table = table_of(plan.channel)
    decays = list(plan.variations.decays.values()) if bench.variations else []
    weights = variation_table(plan.channel, decays, shape_only=True) if decays else _no_weights()
    soft = np.array(list(plan.variations.soft.values()) if bench.variations else [], dtype=np.float64)
    shifts = np.array([NOMINAL, *bench.scenarios.values()], dtype=np.float64)
    chain = kernel_chain(plan.channel)
    columns = 1 + len(channel_columns(plan, bench))

    def task(first: int, n: int) -> Filled:
        start = time.thread_time()
        found = np.zeros(FOUND_STEPS, dtype=np.int64)
        flow = np.zeros(bench.shape, dtype=np.int64)
        histogram = np.zeros((bench.bins, columns))
        fill_chunk(
            stream, first, n, table, chain, bench.detector, bench.quantiles, weights, soft, shifts, bench.windows,
            bench.cuts, bench.axes, found, flow, histogram,
        )  # fmt: skip
        return Filled(found, flow, histogram, n, time.thread_time() - start)

    return (partial(task, first, n) for first, n in chunks(events))


def background_tasks(
    sampler: ShapeSampler, background: Background, bench: Bench, category: str, stream: np.uint64, events: int
) -> Iterator[Task]:
    """Chunks of one background in one category, in order."""
    target = next(known for known in bench.categories if known.name == category)
    code = category_code(target.charm, target.lepton)
    drawn = tuple(background.laws(category, target.charm))
    cuts = make_cuts(bench.categories, drawn)
    rows = np.array([ROW_OF[name] for name in drawn], dtype=np.int64)

    def task(first: int, n: int) -> Filled:
        start = time.thread_time()
        flow = np.zeros(bench.shape, dtype=np.int64)
        histogram = np.zeros((bench.bins, 1))
        values = sampler.draw(category, stream, first, n)
        fill_drawn(np.stack([values[name] for name in drawn]), rows, code, cuts, bench.axes, flow, histogram)
        return Filled(np.full(FOUND_STEPS, n, dtype=np.int64), flow, histogram, n, time.thread_time() - start)

    return (partial(task, first, n) for first, n in chunks(events))


def chunks(events: int) -> Iterator[tuple[int, int]]:
    """First event and number of events of each chunk."""
    for first in range(0, events, CHUNK_EVENTS):
        yield first, min(CHUNK_EVENTS, events - first)


def _no_weights() -> VariationTable:
    return VariationTable(np.zeros(0), 0, WIDTH, 1, 0, 0.0, 0.0, 0.0, 0, 0.0, 0.0)
