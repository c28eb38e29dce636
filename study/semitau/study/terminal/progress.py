"""Progress of long work: bars with an estimate on a terminal, a few lines elsewhere."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager

from rich.console import Console
from rich.progress import (
    BarColumn,
    MofNCompleteColumn,
    Progress,
    Task,
    TaskID,
    TextColumn,
    TimeElapsedColumn,
    TimeRemainingColumn,
)
from rich.text import Text

from ..graph.course import WHOLE
from ..numbers import duration as duration

Report = Callable[[str, int, int | None], None]
"""report(label, done, total): `done` of `total` steps of the work `label`; total None if unknown."""

BETWEEN_LINES = 10.0
"""Seconds between two lines about the same work, where there is no terminal to draw a bar on."""


class _Count(MofNCompleteColumn):
    """Steps done and to do; of the whole study, which counts seconds, the share."""

    def render(self, task: Task) -> Text:
        return Text(f"{task.percentage:.0f} %") if task.description == WHOLE else super().render(task)


class _Left(TimeRemainingColumn):
    """Time that is left; of the whole study as it says itself."""

    def render(self, task: Task) -> Text:
        if "left" not in task.fields:
            return super().render(task)
        minutes, seconds = divmod(task.fields["left"], 60)
        return Text(f"{minutes:02d}:{seconds:02d}", style="progress.remaining")


class _Onward:
    """Share of the whole study that is done: it never falls, though the estimate of what is left may grow."""

    def __init__(self) -> None:
        self._share = 0.0

    def share(self, done: int, total: int) -> float:
        self._share = max(self._share, done / total)
        return self._share


def silence(label: str, done: int, total: int | None) -> None:
    """A report that shows nothing."""


@contextmanager
def bars(console: Console) -> Iterator[Report]:
    """One bar a label, the finished ones kept above with the time they took."""
    columns = (
        TextColumn("{task.description}"),
        BarColumn(bar_width=28),
        _Count(),
        TimeElapsedColumn(),
        TextColumn("left"),
        _Left(compact=True),
    )
    with Progress(*columns, console=console, refresh_per_second=5) as progress:
        tasks: dict[str, TaskID] = {}
        onward = _Onward()

        def report(label: str, done: int, total: int | None) -> None:
            if label not in tasks:
                tasks[label] = progress.add_task(label, total=total)
            if label == WHOLE and total:
                share = onward.share(done, total)
                progress.update(tasks[label], completed=share * total, total=total, left=total - done)
            else:
                progress.update(tasks[label], completed=done, total=total)

        yield report


@contextmanager
def sparse_lines(console: Console, clock: Callable[[], float] = time.monotonic) -> Iterator[Report]:
    """A line when a piece of work ends, and every BETWEEN_LINES seconds while it lasts: about the whole study if there
    is a report on it, else about each piece."""
    started: dict[str, tuple[float, int]] = {}
    spoken: dict[str, float] = {}
    finished: set[str] = set()
    at_work = ""
    onward = _Onward()

    def report(label: str, done: int, total: int | None) -> None:
        nonlocal at_work
        now = clock()
        begin, already = started.setdefault(label, (now, done))
        at_work = at_work if label == WHOLE else label
        share = onward.share(done, total) if label == WHOLE and total else 0.0
        if total is not None and done >= total:
            if label not in finished:
                finished.add(label)
                console.print(f"{label}: done in {duration(now - begin)}", highlight=False)
        elif label != WHOLE and WHOLE in started:
            return
        elif now - spoken.setdefault(label, begin) >= BETWEEN_LINES:
            spoken[label] = now
            if label == WHOLE and total:
                step = f" (now: {at_work})" if at_work else ""
                left = f"about {duration(float(total - done))} left"
                console.print(f"{label}: {int(100 * share)} %, {left}{step}", highlight=False)
            elif total:
                # The first steps may compile code: an estimate from less than a twentieth would frighten.
                told = done - already > total / 20
                left = f", about {duration((now - begin) * (total - done) / (done - already))} left" if told else ""
                console.print(f"{label}: {100 * done // total} %{left}", highlight=False)
            else:
                console.print(f"{label}: {done} done", highlight=False)

    yield report
