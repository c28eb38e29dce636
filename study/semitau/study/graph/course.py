"""How far the steps of a study are, all together, and how long the rest will take."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping
from contextlib import contextmanager

Report = Callable[[str, int, int | None], None]

WHOLE = "whole study"
"""Label of the report on all steps together: `done` and `total` are its seconds, past and in all."""

TOLD_FROM = 0.05
"""Share of a step that must be done before its own pace is believed: the first tasks may compile code."""

SHORT = 0.5
"""Seconds of a step that says nothing about how fast the machine is."""


class Course:
    """The course of a run through its steps, in their order.

    steps : name -> seconds that it is expected to take. report : gets each step's own progress, and that of the whole.

    What is left of the step at work follows from its own pace once that is known, what comes later from what is
    expected, scaled by how the steps so far have kept to it.
    """

    def __init__(
        self, steps: Mapping[str, float], report: Report | None, clock: Callable[[], float] = time.monotonic
    ) -> None:
        self._left = dict(steps)
        self._report = report
        self._clock = clock
        self._start = clock()
        self._expected, self._taken = 1.0, 1.0  # as if a second had gone as expected, so that one step decides little
        self._last = 0.0

    @contextmanager
    def step(self, name: str) -> Iterator[Report | None]:
        """Run a step inside. Yields the report that its work should use, None if nobody wants one."""
        begin, expected = self._clock(), self._left.pop(name, 0.0)
        if self._report is None:
            yield None
            return
        self._tell(expected * self._factor)
        phase, since, first = "", begin, 0

        def report(label: str, done: int, total: int | None) -> None:
            nonlocal phase, since, first
            if label != phase:  # a step may have several, each with a pace of its own
                phase, since, first = label, (self._clock() if phase else begin), done
            if self._report is not None:
                self._report(label, done, total)
            left = expected * self._factor
            if total is not None:
                left *= 1.0 - done / total if total else 0.0
                if done - first > TOLD_FROM * (total - first):
                    left = (self._clock() - since) * (total - done) / (done - first)
            self._tell(left)

        yield report
        taken = self._clock() - begin
        if taken > SHORT:
            self._expected += expected
            self._taken += taken
        self._tell(0.0)

    def end(self) -> None:
        """All is done."""
        self._left.clear()
        if self._report is not None:
            past = round(self._clock() - self._start)
            self._report(WHOLE, max(past, 1), max(past, 1))

    @property
    def _factor(self) -> float:
        return self._taken / self._expected

    def _tell(self, left: float) -> None:
        now = self._clock()
        # A report costs more than a small task.
        if self._report is not None and now - self._last >= 0.1:
            self._last = now
            left += self._factor * sum(self._left.values())
            past = now - self._start
            self._report(WHOLE, round(past), max(round(past + left), round(past) + 1))
