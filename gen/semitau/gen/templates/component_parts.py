"""The sources of all components of a study: decay chains, and backgrounds in categories."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from semitau.core.streams import stream_key

from ..shapes.sampler import ShapeSampler
from ..study_file.components import Background
from ..study_file.study import StudyConfig
from .chunk_tasks import (
    BackgroundInputs,
    Bench,
    ChannelInputs,
    Filled,
    Task,
    background_inputs,
    background_tasks,
    channel_columns,
    channel_inputs,
    channel_pieces,
    channel_tasks,
)
from .component_plan import ChannelPlan, plan_channels
from .variations import Side, background_factors

Floats = npt.NDArray[np.float64]
Report = Callable[[str, int, int | None], None]
"""Called as report(what, done, total) from the calling thread."""

PACES_AT_MOST = 1000
"""Chunks of a part whose pace is kept."""


@dataclass(frozen=True, eq=False)
class Part:
    """One source of a component: a decay chain, or a background in one category.

    expected : decays or background events in the data, before detector and selection. events : how many are generated.
    columns : sides in the histogram after the nominal column. factors : sides that are constant weights by category.
    inputs : all that its histograms depend on, besides bench and events.
    weights : how many of the columns, the first ones, are weights of the nominal events.
    contraction : (pairs, pieces) what the bilinear pieces of the events count in the quadratic ones of the study; None
        if the part does not follow coefficients.
    """

    component: str
    expected: float
    events: int
    columns: Sequence[Side]
    factors: Mapping[Side, Floats]
    inputs: ChannelInputs | BackgroundInputs
    weights: int = 0
    contraction: Floats | None = None

    @property
    def weight(self) -> float:
        """Expected events that each generated one counts."""
        return self.expected / self.events

    def tasks(self, bench: Bench, first: int = 0) -> Iterator[Task]:
        """Its chunks in order, from event `first` on, which begins one."""
        if isinstance(self.inputs, ChannelInputs):
            return channel_tasks(self.inputs, bench, first, self.events)
        return background_tasks(self.inputs, bench, first, self.events)


class PartSums:
    """Chunks of one part added up, in their order."""

    def __init__(self, bench: Bench, part: Part) -> None:
        self.events = 0
        self.seconds = 0.0
        self.paces: list[float] = []
        pieces = 0 if part.contraction is None else part.contraction.shape[1]
        self.sums = bench.sums(1 + len(part.columns), part.weights, pieces)

    def add(self, filled: Filled) -> None:
        """One more chunk."""
        self.events += filled.events
        self.seconds += filled.seconds
        if filled.events and len(self.paces) < PACES_AT_MOST:
            self.paces.append(filled.seconds / filled.events)
        for total, part in zip(self.sums, filled.sums, strict=True):
            np.add(total, part, out=total)

    @property
    def histogram(self) -> Floats:
        """(bins, columns) of `sums`."""
        return self.sums.histogram

    @property
    def steady_seconds(self) -> float:
        """Time of all events at the pace of the middle chunk."""
        return self.events * float(np.median(self.paces)) if self.paces else 0.0


def component_parts(study: StudyConfig, bench: Bench, *purpose: str | int) -> list[Part]:
    """All parts in the order of the study file: modes, then backgrounds.

    purpose : names the random streams; other words give statistically independent events.
    """
    seed = study.study.seed
    parts = [
        _channel_part(plan, bench, stream_key(seed, *purpose, plan.mode, plan.channel.name))
        for plan in plan_channels(study)
    ]
    for background in study.backgrounds:
        sampler = ShapeSampler(background, study)
        parts += [
            _background_part(study, bench, background, sampler, name, stream_key(seed, *purpose, background.name, name))
            for name in sampler.categories
        ]
    return parts


def _channel_part(plan: ChannelPlan, bench: Bench, stream: np.uint64) -> Part:
    pieces = channel_pieces(plan, bench)
    return Part(
        component=plan.component,
        expected=plan.expected,
        events=plan.events,
        columns=channel_columns(plan, bench),
        factors=plan.variations.factors,
        inputs=channel_inputs(plan, bench, stream),
        weights=len(plan.variations.decays) + len(plan.variations.soft) if bench.variations else 0,
        contraction=None if pieces is None else pieces[1].contraction,
    )


def _background_part(
    study: StudyConfig, bench: Bench, background: Background, sampler: ShapeSampler, category: str, stream: np.uint64
) -> Part:
    return Part(
        component=background.name,
        expected=background.expected[category],
        events=max(background.events_in[category], 1),
        columns=(),
        factors=background_factors(study, background.misidentified),
        inputs=background_inputs(sampler, background, bench, category, stream),
    )
