"""Parts of components generated, from where a run before has stopped."""

from __future__ import annotations

import time
from collections.abc import Iterator, Sequence
from contextlib import closing
from dataclasses import dataclass, field

from semitau.core import engine
from semitau.core.kept import Kept

from .chunk_tasks import Bench, Filled, Task
from .component_parts import Part, PartSums, Report
from .kept_sums import KIND, component_key, packed, unpacked


@dataclass(eq=False)
class _Component:
    """A component at work. sums : of its first parts, the last of them perhaps not finished."""

    name: str
    parts: list[Part]
    key: str = ""
    sums: list[PartSums] = field(default_factory=list)

    @property
    def done(self) -> int:
        """Events whose sums are there."""
        return sum(part.events for part in self.sums)

    def tasks(self, bench: Bench) -> Iterator[Task]:
        """What is left to do."""
        for number, part in enumerate(self.parts):
            first = self.sums[number].events if number < len(self.sums) else 0
            if first < part.events:
                yield from part.tasks(bench, first)


def run_parts(
    parts: Sequence[Part],
    bench: Bench,
    workers: int | None = None,
    report: Report | None = None,
    kept: Kept | None = None,
) -> Iterator[tuple[Part, PartSums]]:
    """Generate the events of all parts; iterates over parts and their sums component by component, the parts of each in
    order, whatever the workers.

    kept : sums of components that are there are not made again, and what is made is put there, also when it is
    interrupted: the next run goes on after the last chunk. The result is the same to the last bit.
    """
    components = _components(parts, bench, kept)
    total, done = sum(part.events for part in parts), sum(component.done for component in components)
    if report is not None and done:
        report(components[0].name, done, total)
    tasks = (task for component in list(components) for task in component.tasks(bench))
    with closing(engine.run(tasks, workers)) as results:  # type: ignore[type-var]
        while components:
            component = components.pop(0)
            for sums in _finished(component, bench, results, kept):
                done += sums
                if report is not None:
                    report(component.name, done, total)
            yield from zip(component.parts, component.sums, strict=True)


def events_kept(parts: Sequence[Part], bench: Bench, kept: Kept | None) -> dict[str, tuple[int, int]]:
    """Component -> events whose sums are there, and all of its events."""
    return {
        component.name: (component.done, sum(part.events for part in component.parts))
        for component in _components(parts, bench, kept)
    }


def _components(parts: Sequence[Part], bench: Bench, kept: Kept | None) -> list[_Component]:
    """All components with what is kept of them."""
    components = [_Component(name, of_one) for name, of_one in by_component(parts).items()]
    for component in components:
        if kept is not None:
            component.key = component_key(component.parts, bench)
            arrays = kept.take(KIND, component.key)
            component.sums = [] if arrays is None else unpacked(arrays, component.parts, bench) or []
    return components


def by_component(parts: Sequence[Part]) -> dict[str, list[Part]]:
    """Component -> its parts in order; components in the order of their first parts."""
    found: dict[str, list[Part]] = {}
    for part in parts:
        found.setdefault(part.component, []).append(part)
    return found


def _finished(component: _Component, bench: Bench, results: Iterator[Filled], kept: Kept | None) -> Iterator[int]:
    """Add up what is left of a component; iterates over the events of its chunks."""
    last, unkept = time.monotonic(), False
    try:
        for number, part in enumerate(component.parts):
            if number == len(component.sums):
                component.sums.append(PartSums(bench, part))
            sums = component.sums[number]
            while sums.events < part.events:
                filled = next(results)
                sums.add(filled)
                unkept = True
                if kept is not None and time.monotonic() - last > kept.pause:
                    kept.keep(KIND, component.key, packed(component.sums))
                    last, unkept = time.monotonic(), False
                yield filled.events
    finally:
        # Finished, or interrupted: what is there so far is not lost.
        if kept is not None and unkept:
            kept.keep(KIND, component.key, packed([sums for sums in component.sums if sums.events]))
