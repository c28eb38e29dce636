"""Wall-clock time of the steps of a run."""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from datetime import UTC, datetime

from ..results import StageTime, Timing


class Stopwatch:
    """Times the stages of a run. made : how many outcomes were made so far, none of them in a stage that is reused."""

    def __init__(self, made: Callable[[], int]) -> None:
        self.started = datetime.now(UTC).replace(microsecond=0)
        self._made = made
        self._start = time.perf_counter()
        self.stages: list[StageTime] = []

    @contextmanager
    def stage(self, name: str, *, kept: bool = True) -> Iterator[None]:
        """Time what happens inside, under this name. kept : whether its outcome comes from the store if it is there."""
        start, before = time.perf_counter(), self._made()
        yield
        reused = kept and self._made() == before
        self.stages.append(StageTime(stage=name, seconds=round(time.perf_counter() - start, 3), reused=reused))

    def timing(self, workers: int) -> Timing:
        """Times so far, with the largest memory of the process."""
        # Linux counts in kB, macOS in bytes.
        unit = 1e6 if sys.platform == "darwin" else 1e3
        return Timing(
            started=self.started.isoformat().replace("+00:00", "Z"),
            stages=tuple(self.stages),
            total=round(time.perf_counter() - self._start, 3),
            workers=workers,
            peak_memory=round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit, 1),
        )
