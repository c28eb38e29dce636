"""Decays per second and core at three stages, against what their random numbers alone cost with numpy."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, replace
from functools import partial

import numpy as np
from semitau.core.compiled import kernel
from semitau.core.engine import run
from semitau.core.streams import stream_key
from semitau.gen.block import LANES, new_block
from semitau.gen.decays.chains import Channel
from semitau.gen.decays.decay import Decay
from semitau.gen.decays.form_factor_shifts import SHIFTS_AT_MOST
from semitau.gen.study_file.machine import FormFactors, FormFactorSource
from semitau.gen.study_file.names import COEFFICIENTS
from semitau.gen.study_file.shift_tables import FormFactorShifts
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.study_file.wilson import Quadratic
from semitau.gen.templates.chunk_tasks import Task, channel_inputs, channel_tasks, make_bench
from semitau.gen.templates.component_plan import ChannelPlan, plan_channels
from semitau.gen.templates.variations import ChannelVariations
from semitau.gen.truth.channel_table import ChannelTable, channel_table
from semitau.gen.truth.drawing import draw_decays

from .figures import Figure
from .random_numbers import Counts, kind
from .timing import interleaved

NUMPY_NUMBERS = 20_000_000
NUMPY_BUFFER = 65_536
"""Numbers in one call: a buffer that stays in the cache, which is numpy's best case."""


@kernel
def truth_only(x: np.ndarray, table: ChannelTable, stream: np.uint64, events: int) -> None:
    """Draw decays of one chain, block after block, and forget them."""
    for first in range(0, events, LANES):
        draw_decays(x, table, stream, np.uint64(first))


@dataclass(frozen=True)
class Chains:
    """All decay chains of a study, each with its events: the mixture that a real build generates."""

    study: StudyConfig
    plans: Sequence[ChannelPlan]

    @property
    def events(self) -> int:
        return sum(plan.events for plan in self.plans)

    def truth(self) -> Callable[[], None]:
        x, stream = new_block(), stream_key(1, "benchmark")
        tables = [(channel_table(plan.channel), plan.events) for plan in self.plans]

        def work() -> None:
            for table, events in tables:
                truth_only(x, table, stream, events)

        return work

    def tasks(self, *, variations: bool) -> list[Task]:
        bench = make_bench(self.study, variations=variations)
        stream = stream_key(1, "benchmark")
        return [
            task
            for plan in self.plans
            for task in channel_tasks(channel_inputs(plan, bench, stream), bench, 0, plan.events)
        ]

    def numbers(self, counts: Counts, passed: float) -> tuple[float, float]:
        """Random numbers for each decay: of the truth, and of the whole chain, if a share `passed` is measured."""
        truth, find, measure = np.average(
            [counts[kind(plan.channel)] for plan in self.plans], axis=0, weights=[plan.events for plan in self.plans]
        )
        return float(truth), float(truth + find + passed * measure)


def chains_of(study: StudyConfig, most_events: int) -> Chains:
    """The study's chains with at most so many events in all, in their proportions."""
    plans = plan_channels(study)
    factor = min(1.0, most_events / sum(plan.events for plan in plans))
    return Chains(study, [replace(plan, events=max(LANES, int(plan.events * factor))) for plan in plans])


def numpy_numbers() -> None:
    generator, buffer = np.random.default_rng(1), np.empty(NUMPY_BUFFER)
    for _ in range(NUMPY_NUMBERS // NUMPY_BUFFER):
        generator.random(out=buffer)


def decay_figures(chains: Chains, counts: Counts, repetitions: int) -> list[Figure]:
    """Speeds per core from CPU time: other programs on the machine hardly change it."""
    measured, filled = chains.tasks(variations=False), chains.tasks(variations=True)
    columns = max(task().histogram.shape[1] for task in filled)
    results = [task() for task in measured]
    passed = sum(int(result.sums.found[-1]) for result in results) / chains.events
    timings = interleaved(
        {
            "numpy": numpy_numbers,
            "truth": chains.truth(),
            "measured": lambda: [task() for task in measured],
            "filled": lambda: [task() for task in filled],
        },
        repetitions,
    )
    each = timings["numpy"].cpu / (NUMPY_NUMBERS // NUMPY_BUFFER * NUMPY_BUFFER)
    truth, whole = chains.numbers(counts, passed)
    cost = {name: timings[name].cpu / chains.events for name in ("truth", "measured", "filled")}
    mixture = f"{len(chains.plans)} decay chains in the study's proportions, {chains.events:,} decays"
    drawn = f"{truth:.1f} random numbers a decay; numpy takes {1e9 * each:.2f} ns for each"
    kept = f"{whole:.1f} random numbers a decay: {100 * passed:.0f}% are found and measured"
    return [
        Figure("decays, truth only", 1 / cost["truth"], "/s/core", note=mixture),
        Figure("  cost over its random numbers with numpy", cost["truth"] / (truth * each), "", 5, note=drawn),
        Figure("decays, reconstructed and selected", 1 / cost["measured"], "/s/core"),
        Figure("  cost over its random numbers with numpy", cost["measured"] / (whole * each), "", note=kept),
        Figure("decays, through templates with all variations", 1 / cost["filled"], "/s/core", 1e6, "at least"),
        Figure(
            "  cost over its random numbers with numpy",
            cost["filled"] / (whole * each),
            "",
            10,
            note=f"up to {columns - 1} varied templates beside the nominal one",
        ),
    ]


def quadratic_figure(chains: Chains, repetitions: int) -> Figure:
    """What templates as functions of all Wilson coefficients cost the modes with a tau, which have them."""
    plain = ChannelVariations({}, {}, {})
    tau = [replace(plan, variations=plain) for plan in chains.plans if plan.channel.lepton == "tau"]
    study = chains.study.model_copy(update={"variations": (), "quadratic": Quadratic(coefficients=COEFFICIENTS)})
    nominal, pieces = (Chains(study, tau).tasks(variations=more) for more in (False, True))
    timings = interleaved({"plain": partial(_consume, nominal, 1), "pieces": partial(_consume, pieces, 1)}, repetitions)
    ratio = timings["pieces"].cpu / timings["plain"].cpu
    note = f"{len(COEFFICIENTS)} real coefficients, {len(tau)} decay chains"
    return Figure("quadratic templates: cost over the plain fill", ratio, "times", 3, note=note)


def shape_figure(chains: Chains, repetitions: int) -> Figure:
    """What templates as functions of as many form-factor directions as there may be cost the modes of D and D*."""
    sets = FormFactors(D=FormFactorSource(name="BCL-2021"), Dst=FormFactorSource(name="BGL-2021"))
    tables = tuple(
        FormFactorShifts(name=name, set=name, order="variance", keep=1.0, at_most=SHIFTS_AT_MOST)
        for name in ("D", "Dst")
    )
    quadratic = Quadratic(form_factors=tables)
    study = chains.study.model_copy(update={"variations": (), "quadratic": quadratic, "form_factors": sets})
    plain = ChannelVariations({}, {}, {})
    moved = [
        replace(plan, variations=plain, channel=replace(plan.channel, decay=_with_set(plan.channel.decay, study)))
        for plan in chains.plans
        if isinstance(plan.channel, Channel) and plan.channel.decay.transition in ("D", "Dst")
    ]
    nominal, pieces = (Chains(study, moved).tasks(variations=more) for more in (False, True))
    timings = interleaved({"plain": partial(_consume, nominal, 1), "pieces": partial(_consume, pieces, 1)}, repetitions)
    ratio = timings["pieces"].cpu / timings["plain"].cpu
    note = f"{SHIFTS_AT_MOST} directions a decay, {len(moved)} decay chains"
    return Figure("templates that follow form factors: cost over the plain fill", ratio, "times", 3, note=note)


def _with_set(decay: Decay, study: StudyConfig) -> Decay:
    return replace(decay, form_factors=study.form_factor_set(decay.transition))


def scaling_figure(chains: Chains, repetitions: int) -> Figure:
    """Two workers against one, by the clock."""
    tasks = chains.tasks(variations=True)
    timings = interleaved({str(n): partial(_consume, tasks, n) for n in (1, 2)}, repetitions)
    ratio = timings["1"].wall / timings["2"].wall
    return Figure("decays through templates: two workers over one", ratio, "times", 1.7, "at least")


def _consume(tasks: Sequence[Task], workers: int) -> None:
    for _ in run(tasks, workers):
        pass
