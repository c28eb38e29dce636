"""Pseudo-data: a data set of the study from events that the templates do not know."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import replace

import numpy as np
import numpy.typing as npt
from semitau.core.kept import Kept
from semitau.core.streams import stream_key

from ..study_file.study import StudyConfig
from .chunk_tasks import Bench, make_bench
from .component_parts import Part, Report, component_parts
from .part_runs import events_kept, run_parts

Floats = npt.NDArray[np.float64]


def pseudo_data(
    study: StudyConfig,
    workers: int | None = None,
    report: Report | None = None,
    *,
    replica: int = 0,
    factors: Mapping[str, float] | None = None,
    kept: Kept | None = None,
) -> dict[str, Floats]:
    """Observed counts by category, each in the shape of its axes: whole numbers, as float64.

    Every decay chain and background gets a Poisson number of events about its expectation; each of them is generated,
    passes the detector or not, and counts one. The random streams are not those of the templates.

    replica : another number is another, independent data set. factors : on the expectation of components (by name), to
    inject other ratios or yields than the templates have. kept : as in `build_templates`.
    """
    parts, bench = _drawn(study, replica, factors)
    observed = np.zeros(bench.bins)
    for _, sums in run_parts(parts, bench, workers, report, kept):
        observed += sums.histogram[:, 0]
    ends = np.cumsum([int(np.prod(category.shape)) for category in bench.categories])
    return {
        category.name: contents.reshape(category.shape)
        for category, contents in zip(bench.categories, np.split(observed, ends[:-1]), strict=True)
    }


def pseudo_events_kept(study: StudyConfig, kept: Kept | None) -> dict[str, tuple[int, int]]:
    """Component -> events that `pseudo_data` would find kept, and all of its events."""
    parts, bench = _drawn(study, 0, None)
    return events_kept(parts, bench, kept)


def _drawn(study: StudyConfig, replica: int, factors: Mapping[str, float] | None) -> tuple[list[Part], Bench]:
    """Parts with the events that they happen to have, those that have any."""
    bench = make_bench(study, variations=False)
    parts = component_parts(study, bench, "pseudo-data", replica)
    counts = np.random.default_rng(int(stream_key(study.study.seed, "pseudo-data counts", replica)))
    drawn = [_with_counts(part, counts, (factors or {}).get(part.component, 1.0)) for part in parts]
    return [part for part in drawn if part.events > 0], bench


def _with_counts(part: Part, counts: np.random.Generator, factor: float) -> Part:
    return replace(part, events=int(counts.poisson(part.expected * factor)))
