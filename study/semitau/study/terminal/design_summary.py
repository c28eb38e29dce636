"""What a person sees of a design in the terminal."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from ..design.part import Design, DesignCurve
from ..numbers import GAP, counted, digits_for, percent, signed
from .summary import plain_table

DEAREST = 5
"""Variations that are shown."""


def design_summary(design: Design) -> Iterator[RenderableType]:
    """Errors before and after, cuts, axes, categories, variations, the verdict of other events, and the TOML."""
    yield from (_errors(design), "")
    if design.curves:
        yield from (_cuts(design), "")
    yield from (_binnings(design), "")
    if design.choices:
        yield from (_choices(design), "")
    yield from (_worth(design), "")
    yield verdict_line(design)
    for note in design.notes:
        yield Text(f"Look at this: {note}", style="yellow")
    yield Text(f"{counted(design.points)} working points on {counted(design.generated)} generated events.", style="dim")
    if design.snippet:
        yield from ("", Text("To paste into the study file:", style="bold"), Text(design.snippet.rstrip()))


def verdict_line(design: Design) -> Text:
    """Whether independent events confirm the gain."""
    told = design.confirmation
    if not design.snippet:
        return Text("The study as it is has the smallest expected error that was found.", style="bold")
    gain = f"{percent(told.gain)} ± {percent(told.uncertainty)}"
    if told.confirmed:
        return Text(f"Confirmed by independent events: the error falls by {gain}.", style="bold green")
    return Text(f"Not confirmed by independent events: the error falls by {gain}.", style="bold yellow")


def _errors(design: Design) -> Table:
    table = plain_table("expected error", "now", "proposed", "change", "independent events: now", "proposed")
    others = zip(design.confirmation.start, design.confirmation.proposed, strict=True)
    for label, start, proposed, (before, after) in zip(
        design.labels, design.start.errors, design.proposed.errors, others, strict=True
    ):
        places = digits_for(start.error) + 2
        table.add_row(
            label,
            *(signed(own.error, places) for own in (start, proposed)),
            percent(proposed.error / start.error - 1.0),
            *(signed(own.error, places) for own in (before, after)),
        )
    return table


def _cuts(design: Design) -> Table:
    table = plain_table("cut", "now", "proposed", f"error within {percent(design.flat, 0)}", "")
    for curve in design.curves:
        unit = f"{GAP}{curve.unit}" if curve.unit else ""
        low, high = curve.flat
        table.add_row(
            curve.label,
            *(f"{value:g}{unit}" for value in (curve.start, curve.proposed)),
            f"{low:g} to {high:g}{unit}",
            says(curve),
        )
    return table


def says(curve: DesignCurve) -> str:
    """What a scan comes to, in words."""
    if not curve.matters:
        return "does not matter"
    worst = max((value for value in curve.at_proposed if value is not None), default=1.0)
    return f"up to {percent(worst - 1.0, 0)} worse in the range"


def _binnings(design: Design) -> Table:
    table = plain_table("categories", "axes now", "bins", "proposed", "bins", "least content")
    for now, then in zip(design.start.binnings, design.proposed.binnings, strict=True):
        table.add_row(
            now.table, " × ".join(now.observables), str(now.bins), " × ".join(then.observables), str(then.bins),
            f"{then.least:.2g}",
        )  # fmt: skip
    return table


def _choices(design: Design) -> Table:
    table = plain_table("axes", "bins", "error", "")
    for choice in design.choices:
        mark = ", ".join(word for word, holds in (("now", choice.now), ("proposed", choice.chosen)) if holds)
        error = "no fit" if choice.merit is None else percent(choice.merit - 1.0)
        table.add_row(f"{choice.table}: {' × '.join(choice.observables)}", str(choice.bins), error, mark)
    return table


def _worth(design: Design) -> Table:
    table = plain_table("what it is worth", "change of the error")
    for category in design.categories:
        loss = "no fit" if category.loss is None else percent(category.loss)
        table.add_row(f"without {category.label}", loss)
    for variation in design.variations[:DEAREST]:
        table.add_row(f"with {variation.label} known exactly", percent(-variation.after))
    return table
