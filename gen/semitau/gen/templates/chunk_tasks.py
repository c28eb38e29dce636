"""Cut the work of a study into chunks of fixed size: independent tasks, the same whatever runs them."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from functools import partial

import numpy as np
import numpy.typing as npt
from semitau.core.constants import MASS

from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.double_charm import AnyChain
from ..decays.operators import Operators
from ..response.candidates import Scenario, Windows
from ..response.charm_decay import pair_mass_quantiles
from ..response.detector import Detector
from ..response.setup import delta_m_windows, kernel_chain, kernel_detector
from ..shapes.sampler import ShapeSampler
from ..study_file.categories import StudyCategory
from ..study_file.components import Background
from ..study_file.study import StudyConfig
from ..truth.any_drawing import table_of
from ..truth.bilinear_pieces import PieceTable, no_pieces, piece_table
from ..truth.variation_weights import WIDTH, VariationTable, variation_table
from .binning import ROW_OF, Axes, Cuts, category_code, make_axes, make_cuts
from .chunk import FOUND_STEPS, Sums, fill_chunk, fill_drawn
from .component_plan import ChannelPlan
from .variations import Side, scenarios

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

CHUNK_EVENTS = 65_536
NOMINAL = Scenario(tag_width=1.0, momentum=1.0)


@dataclass(frozen=True, eq=False)
class Filled:
    """What a chunk leaves. events : generated. seconds : time of its thread."""

    sums: Sums
    events: int
    seconds: float

    @property
    def histogram(self) -> Floats:
        """(bins, columns) of `sums`."""
        return self.sums.histogram


Task = Callable[[], Filled]


@dataclass(frozen=True, eq=False)
class Bench:
    """What all chunks of a study share.

    categories : of the study. shape : steps of `place`, categories. bins : of all categories together.
    scenarios : reconstructions besides the nominal one. variations : whether columns beyond the nominal one are filled.
    quadratic : parts of coefficients that the templates of modes with a tau are functions of.
    least_photon : energy in GeV of the softest photons of leptons; None if there are none.
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
    quadratic: tuple[str, ...]
    least_photon: float | None = None

    @property
    def category_of_bin(self) -> Integers:
        """(bins,) place of the category that each bin belongs to."""
        return np.repeat(np.arange(len(self.categories)), [int(np.prod(c.shape)) for c in self.categories])

    def sums(self, columns: int, weights: int = 0, pieces: int = 0) -> Sums:
        """Zeros for what events are added to. columns : of the histogram. weights : of them, those by weights."""
        return Sums(
            found=np.zeros(FOUND_STEPS, dtype=np.int64),
            flow=np.zeros(self.shape, dtype=np.int64),
            histogram=np.zeros((self.bins, columns)),
            spread=np.zeros((weights, 2)),
            pieces=np.zeros((self.bins, pieces)),
            moments=np.zeros((len(self.categories), pieces, pieces)),
        )


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
        quadratic=study.quadratic.coefficients if variations and study.quadratic is not None else (),
        least_photon=study.radiation.least,
    )


def channel_columns(plan: ChannelPlan, bench: Bench) -> list[Side]:
    """What the columns of a channel's histogram after the nominal one hold, in order."""
    if not bench.variations:
        return []
    return [*plan.variations.decays, *plan.variations.soft, *bench.scenarios]


def channel_pieces(plan: ChannelPlan, bench: Bench) -> tuple[PieceTable, Operators] | None:
    """Table for the bilinear pieces of a channel, if it has a tau and the study asks for them."""
    if not (bench.quadratic and isinstance(plan.channel, Channel) and plan.channel.lepton == "tau"):
        return None
    return piece_table(plan.channel, bench.quadratic)


def channel_tasks(plan: ChannelPlan, bench: Bench, stream: np.uint64, events: int) -> Iterator[Task]:
    """Chunks of one channel, in order. stream : random stream of the channel; events : decays to generate."""
    table = table_of(plan.channel)
    decays = list(plan.variations.decays.values()) if bench.variations else []
    weights = _weights(plan.channel, decays)
    soft = np.array(list(plan.variations.soft.values()) if bench.variations else [], dtype=np.float64)
    shifts = np.array([NOMINAL, *bench.scenarios.values()], dtype=np.float64)
    chain = kernel_chain(plan.channel, bench.least_photon)
    columns = 1 + len(channel_columns(plan, bench))
    pieces = channel_pieces(plan, bench)
    taken = no_pieces(weights) if pieces is None else pieces[0]
    category_of_bin = bench.category_of_bin

    def task(first: int, n: int) -> Filled:
        start = time.thread_time()
        sums = bench.sums(columns, len(decays) + len(soft), taken.pieces)
        fill_chunk(
            stream, first, n, table, chain, bench.detector, bench.quantiles, weights, taken, soft, shifts,
            bench.windows, bench.cuts, bench.axes, category_of_bin, sums,
        )  # fmt: skip
        return Filled(sums, n, time.thread_time() - start)

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
        sums = bench.sums(1)
        sums.found[:] = n
        values = sampler.draw(category, stream, first, n)
        fill_drawn(np.stack([values[name] for name in drawn]), rows, code, cuts, bench.axes, sums.flow, sums.histogram)
        return Filled(sums, n, time.thread_time() - start)

    return (partial(task, first, n) for first, n in chunks(events))


def chunks(events: int) -> Iterator[tuple[int, int]]:
    """First event and number of events of each chunk."""
    for first in range(0, events, CHUNK_EVENTS):
        yield first, min(CHUNK_EVENTS, events - first)


def _weights(channel: AnyChain, decays: list[Decay]) -> VariationTable:
    if decays and isinstance(channel, Channel):
        return variation_table(channel, decays, shape_only=True)
    return _no_weights()


def _no_weights() -> VariationTable:
    return VariationTable(np.zeros(0), 0, WIDTH, 1, 0, 0.0, 0.0, 0.0, 0, 0.0, 0.0)
