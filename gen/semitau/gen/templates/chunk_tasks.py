"""Cut the work of a study into chunks of fixed size: independent tasks, the same whatever runs them."""

from __future__ import annotations

import time
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
import numpy.typing as npt
from semitau.core.constants import MASS
from semitau.core.content_digest import content_digest
from semitau.core.engine import Job

from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.double_charm import AnyChain
from ..decays.form_factor_shifts import Coefficient, acts_on, unlabelled
from ..decays.operators import Operators
from ..response.candidates import Scenario, Windows
from ..response.charm_decay import pair_mass_quantiles
from ..response.detector import Chain, Detector
from ..response.setup import delta_m_windows, kernel_chain, kernel_detector
from ..shapes.sampler import DrawnLaws, ShapeSampler
from ..study_file.categories import StudyCategory
from ..study_file.components import Background
from ..study_file.study import StudyConfig
from ..truth.any_drawing import AnyTable, table_of
from ..truth.bilinear_pieces import PieceTable, no_pieces, piece_table
from ..truth.charm_spin import ISOTROPIC
from ..truth.variation_weights import WIDTH, VariationTable, variation_table
from .binning import ROW_OF, Axes, Cuts, category_code, make_axes, make_cuts
from .chunk import FOUND_STEPS, Sums, fill_chunk, fill_drawn
from .component_plan import ChannelPlan
from .variations import Side, scenarios

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

CHUNK_EVENTS = 65_536
NOMINAL = Scenario(tag_width=1.0, momentum=1.0, residual=1.0)


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


Task = Job[Filled]


@dataclass(frozen=True, eq=False)
class Bench:
    """What all chunks of a study share.

    categories : of the study. shape : steps of `place`, categories. bins : of all categories together.
    scenarios : reconstructions besides the nominal one. variations : whether columns beyond the nominal one are filled.
    quadratic : coefficients that templates are functions of.
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
    quadratic: tuple[Coefficient, ...]
    least_photon: float | None = None

    @property
    def category_of_bin(self) -> Integers:
        """(bins,) place of the category that each bin belongs to."""
        return np.repeat(np.arange(len(self.categories)), [int(np.prod(c.shape)) for c in self.categories])

    @cached_property
    def selection_digest(self) -> str:
        """Of what the histograms of a background depend on here; what varies from part to part is in its inputs."""
        return content_digest(self.shape, self.bins, self.cuts, self.axes, CHUNK_EVENTS)

    @cached_property
    def digest(self) -> str:
        """Of what the histograms of a decay chain depend on here."""
        response = self.detector, self.windows, self.quantiles, self.category_of_bin
        return content_digest(self.selection_digest, response)

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
        quadratic=study.coefficients if variations else (),
        least_photon=study.radiation.least,
    )


def channel_columns(plan: ChannelPlan, bench: Bench) -> list[Side]:
    """What the columns of a channel's histogram after the nominal one hold, in order."""
    if not bench.variations:
        return []
    return [*plan.variations.decays, *plan.variations.soft, *bench.scenarios]


def channel_pieces(plan: ChannelPlan, bench: Bench) -> tuple[PieceTable, Operators] | None:
    """Table for the bilinear pieces of a channel, if a coefficient acts on it."""
    if not (_acting(plan.channel, bench) and isinstance(plan.channel, Channel)):
        return None
    return piece_table(plan.channel, bench.quadratic)


def _acting(channel: AnyChain, bench: Bench) -> tuple[Coefficient, ...]:
    """Coefficients that a channel depends on; their pieces come in the order of those of all coefficients."""
    if not isinstance(channel, Channel):
        return ()
    return tuple(one for one in bench.quadratic if acts_on(one, channel.decay))


@dataclass(frozen=True, eq=False)
class ChannelInputs:
    """All that the histograms of a channel depend on, besides the bench and how many events there are.

    decays : with other form factors, one a column of weights. soft : factors on the soft efficiency. shifts
    (scenarios, 3) : of the reconstruction, the nominal one first. quadratic : coefficients that act.
    """

    stream: np.uint64
    channel: AnyChain
    decays: tuple[Decay, ...]
    soft: Floats
    shifts: Floats
    chain: Chain
    quadratic: tuple[Coefficient, ...]


def channel_inputs(plan: ChannelPlan, bench: Bench, stream: np.uint64) -> ChannelInputs:
    """What a channel is made from. stream : random stream of the channel."""
    return ChannelInputs(
        stream=stream,
        channel=plan.channel,
        decays=tuple(plan.variations.decays.values()) if bench.variations else (),
        soft=np.array(list(plan.variations.soft.values()) if bench.variations else [], dtype=np.float64),
        shifts=np.array([NOMINAL, *bench.scenarios.values()], dtype=np.float64),
        chain=kernel_chain(plan.channel, bench.least_photon),
        quadratic=tuple(unlabelled(one) for one in _acting(plan.channel, bench)),
    )


def channel_tasks(inputs: ChannelInputs, bench: Bench, first: int, events: int) -> Iterator[Task]:
    """Chunks of one channel, in order: those of `events` decays in all that begin at decay `first` or later."""
    channel = inputs.channel
    weights = weight_table(channel, inputs.decays)
    pieces = no_pieces(weights)
    if inputs.quadratic and isinstance(channel, Channel):
        pieces, _ = piece_table(channel, inputs.quadratic)
    common = _Channel(inputs, bench, table_of(channel), weights, pieces)
    return (Job(_fill_channel, common, chunk) for chunk in chunks(events, first))


@dataclass(frozen=True, eq=False)
class _Channel:
    """What the chunks of a channel have in common."""

    inputs: ChannelInputs
    bench: Bench
    table: AnyTable
    weights: VariationTable
    pieces: PieceTable


def _fill_channel(common: _Channel, first: int, n: int) -> Filled:
    start = time.thread_time()
    inputs, bench = common.inputs, common.bench
    by_weight = len(inputs.decays) + len(inputs.soft)
    sums = bench.sums(by_weight + len(inputs.shifts), by_weight, common.pieces.pieces)
    fill_chunk(
        inputs.stream, first, n, common.table, inputs.chain, bench.detector, bench.quantiles, common.weights,
        common.pieces, inputs.soft, inputs.shifts, bench.windows, bench.cuts, bench.axes, bench.category_of_bin, sums,
    )  # fmt: skip
    return Filled(sums, n, time.thread_time() - start)


@dataclass(frozen=True, eq=False)
class BackgroundInputs:
    """All that the histogram of a background in one category depends on, besides the bench and how many events."""

    stream: np.uint64
    code: int
    drawn: tuple[str, ...]
    laws: DrawnLaws


def background_inputs(
    sampler: ShapeSampler, background: Background, bench: Bench, category: str, stream: np.uint64
) -> BackgroundInputs:
    """What a background is made from in one category. stream : its random stream there."""
    target = next(known for known in bench.categories if known.name == category)
    drawn = tuple(background.laws(category, target.charm))
    code = category_code(target.charm, target.lepton)
    return BackgroundInputs(stream, code, drawn, sampler.laws(category))


def background_tasks(inputs: BackgroundInputs, bench: Bench, first: int, events: int) -> Iterator[Task]:
    """Chunks of one background in one category, in order, as those of a channel."""
    cuts = make_cuts(bench.categories, inputs.drawn)
    rows = np.array([ROW_OF[name] for name in inputs.drawn], dtype=np.int64)
    common = _Background(inputs, bench, cuts, rows)
    return (Job(_fill_background, common, chunk) for chunk in chunks(events, first))


@dataclass(frozen=True, eq=False)
class _Background:
    """What the chunks of a background in one category have in common. rows : of what is drawn."""

    inputs: BackgroundInputs
    bench: Bench
    cuts: Cuts
    rows: Integers


def _fill_background(common: _Background, first: int, n: int) -> Filled:
    start = time.thread_time()
    inputs, bench = common.inputs, common.bench
    sums = bench.sums(1)
    sums.found[:] = n
    drawn = inputs.laws.draw(inputs.stream, first, n)
    values = np.stack([drawn[name] for name in inputs.drawn])
    fill_drawn(values, common.rows, inputs.code, common.cuts, bench.axes, sums.flow, sums.histogram)
    return Filled(sums, n, time.thread_time() - start)


def chunks(events: int, first: int = 0) -> Iterator[tuple[int, int]]:
    """First event and number of events of each chunk, from event `first` on, which begins one."""
    for begin in range(first, events, CHUNK_EVENTS):
        yield begin, min(CHUNK_EVENTS, events - begin)


def weight_table(channel: AnyChain, decays: Sequence[Decay]) -> VariationTable:
    if decays and isinstance(channel, Channel):
        return variation_table(channel, list(decays), shape_only=True)
    return _no_weights()


def _no_weights() -> VariationTable:
    return VariationTable(np.zeros(0), 0, WIDTH, 1, 0, 0.0, ISOTROPIC, 0, 0.0, 0.0)
