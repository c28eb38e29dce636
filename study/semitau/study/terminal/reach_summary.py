"""Reach as tables and sentences for people."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text
from semitau.fit.uncertainty.decomposition import STATISTICAL, TEMPLATES

from ..numbers import GAP, digits_for, percent, signed
from ..parts.fit_parts import SOURCE_LABELS
from ..reach.axis import MULTIPLES, Axis
from ..reach.part import Reach
from .summary import plain_table

FINITE = tuple(SOURCE_LABELS[source] for source in (STATISTICAL, TEMPLATES))


def reach_summary(part: Reach) -> Iterator[RenderableType]:
    """A table a ratio, then what limits it and when a deviation will be seen."""
    for ratio in part.ratios:
        yield from (_table(part, ratio.ratio, ratio.label), "")
    for wall in part.walls:
        yield Text(wall.sentence)
    for needed in part.needed:
        yield Text(needed.sentence)
    if part.generated == "grows":
        yield Text("Generated events grow with the data.")


def _table(part: Reach, name: str, label: str) -> Table:
    compared = any(needed.name == name for needed in part.needed)
    axis = Axis(part.unit, part.amounts[0].amount / part.amounts[0].factor)
    table = plain_table(
        "data" if part.unit == MULTIPLES else part.unit, f"error of {label}", "finite data", "templates", "systematic",
        "largest of these", *("expected", "≥ 3 σ", "≥ 5 σ") * compared,
    )  # fmt: skip
    for amount in part.amounts:
        split = next(error for error in amount.errors if error.ratio == name)
        places = digits_for(split.total) + 1
        rest = {source: error for source, error in split.sources.items() if source not in FINITE}
        seen = next((deviation for deviation in amount.deviations if deviation.name == name), None)
        chances = () if seen is None else (seen.evidence, seen.discovery)
        table.add_row(
            axis.shown(amount.factor),
            signed(split.total, places),
            *(signed(error, places) for error in (split.statistical, split.template_statistics, split.systematic)),
            max(rest, key=lambda source: rest[source], default="–"),
            *((f"{seen.sigmas:.1f}{GAP}σ",) if seen is not None else ()),
            *(percent(chance, 0) for chance in chances),
        )
    return table
