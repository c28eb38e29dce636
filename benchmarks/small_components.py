"""Components of few events: what the tables of their decay chains cost, made anew."""

from __future__ import annotations

import statistics
import sys
import time
from pathlib import Path

from semitau.core.streams import stream_key
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.chunk_tasks import Bench, channel_inputs, channel_tasks, make_bench
from semitau.gen.templates.component_plan import ChannelPlan, plan_channels

from .figures import Figure

STUDY = Path(__file__).parents[1] / "configs" / "marlow_physics.toml"
"""It has components of every kind."""

EVENTS = 65_536
WITH_TABLES = ("semitau.gen.truth", "semitau.gen.decays.rates", "semitau.gen.decays.line_shapes")
"""Modules, or packages of them, that keep tables."""


def small_component_figures(repetitions: int) -> list[Figure]:
    """Decays per second and core through templates with all variations: each component alone, no table there yet."""
    study = _with_few_events(read_study(STUDY))
    bench, plans = make_bench(study, variations=True), plan_channels(study)
    return [
        _figure(component.name, [plan for plan in plans if plan.mode == component.name], bench, repetitions)
        for component in (*study.modes, *study.double_charms)
    ]


def _with_few_events(study: StudyConfig) -> StudyConfig:
    few = {"events": EVENTS}
    modes = tuple(mode.model_copy(update=few) for mode in study.modes)
    return study.model_copy(
        update={"modes": modes, "double_charms": tuple(item.model_copy(update=few) for item in study.double_charms)}
    )


def _figure(name: str, plans: list[ChannelPlan], bench: Bench, repetitions: int) -> Figure:
    _generate(plans, bench)  # compiles what is new
    pairs = []
    for _ in range(repetitions):
        forget_tables()
        pairs.append(_generate(plans, bench))
    whole, kernels = (statistics.median(kind) for kind in zip(*pairs, strict=True))
    events = sum(plan.events for plan in plans)
    note = f"{len(plans)} decay chains, {events:,} decays in {whole:.2f} s, of which kernels {kernels:.2f} s"
    return Figure(f"{name}, tables made anew", events / whole, "/s/core", note=note)


def _generate(plans: list[ChannelPlan], bench: Bench) -> tuple[float, float]:
    """Processor time in seconds of all, and of the kernels alone."""
    start, kernels = time.process_time(), 0.0
    stream = stream_key(1, "benchmark")
    for plan in plans:
        for task in channel_tasks(channel_inputs(plan, bench, stream), bench, 0, plan.events):
            kernels += task().seconds
    return time.process_time() - start, kernels


def forget_tables() -> None:
    """Empty every cache of tables, as in a new process."""
    for name, module in list(sys.modules.items()):
        if name.startswith(WITH_TABLES):
            for value in list(vars(module).values()):
                if hasattr(value, "cache_clear"):
                    value.cache_clear()
