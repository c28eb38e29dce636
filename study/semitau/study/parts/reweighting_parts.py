"""How many events are behind what is made by weights: variations, and other points of the coefficients."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Sequence

from rich.text import Text
from semitau.core.quadratic import SHARE_AT_LEAST, whole_reweightings
from semitau.core.quadratic import Reweighting as Counted
from semitau.core.templates import TemplateSet

from ..numbers import counted, percent
from ..results import Reweighting


def reweighting_parts(variations: Iterable[Counted], templates: TemplateSet) -> tuple[Reweighting, ...]:
    """One entry a component and variation, its worse side, and one a component and coefficient at half its limit."""
    labels = {component.name: component.label for component in templates.components}
    found: dict[tuple[str, str], Reweighting] = {}
    for each in (*variations, *_at_half_limits(templates)):
        source = each.what.split()[0]
        part = Reweighting(
            component=each.component,
            label=labels.get(each.component, each.component),
            source=source,
            where=each.what,
            events=each.events,
            effective=each.effective,
            share=min(each.share, 1.0),
        )
        known = found.get((each.component, source))
        if known is None or part.share < known.share:
            found[each.component, source] = part
    return tuple(found.values())


def _at_half_limits(templates: TemplateSet) -> Iterator[Counted]:
    """Each coefficient at half its limit, both signs, others as injected."""
    for known in templates.coefficients:
        for value in (0.5 * known.limit, -0.5 * known.limit):
            yield from whole_reweightings(templates, {known.name: value})


def reweighting_warnings(parts: Sequence[Reweighting]) -> Iterator[str]:
    """What falls below the floor."""
    for part in parts:
        if part.share < SHARE_AT_LEAST:
            yield (
                f"At {part.where}, {part.label} has the weight of {counted(part.effective)} events, "
                f"{percent(part.share)} of those behind it: generate more events, or build near that point."
            )


def reweighting_line(parts: Sequence[Reweighting]) -> Text:
    """The worst in one line."""
    if not parts:
        return Text("Nothing is made by weights.")
    worst = min(parts, key=lambda part: part.share)
    return Text(
        f"Fewest effective events: {percent(worst.share)} of those behind {worst.label}, at {worst.where}.", style="dim"
    )
