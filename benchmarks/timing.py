"""Repeat workloads in turns, so that a disturbance of the machine falls on all of them alike, and take medians."""

from __future__ import annotations

import statistics
import time
from collections.abc import Callable, Mapping
from dataclasses import dataclass


@dataclass(frozen=True)
class Timing:
    """Medians over the repetitions: seconds by the clock, and seconds of all cores that this process used."""

    wall: float
    cpu: float


def interleaved(workloads: Mapping[str, Callable[[], object]], repetitions: int) -> dict[str, Timing]:
    """Run each workload once unmeasured (compilation, caches), then all of them in turns."""
    for workload in workloads.values():
        workload()
    seconds: dict[str, list[tuple[float, float]]] = {name: [] for name in workloads}
    for _ in range(repetitions):
        for name, workload in workloads.items():
            wall, cpu = time.perf_counter(), time.process_time()
            workload()
            seconds[name].append((time.perf_counter() - wall, time.process_time() - cpu))
    return {
        name: Timing(*(statistics.median(kind) for kind in zip(*pairs, strict=True))) for name, pairs in seconds.items()
    }
