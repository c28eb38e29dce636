"""What limits a ratio, and when a deviation will be seen, in words."""

from __future__ import annotations

from semitau.fit.uncertainty.decomposition import STATISTICAL
from semitau.fit.uncertainty.prospects import Reach

from ..numbers import GAP
from ..parts.fit_parts import SOURCE_LABELS
from .axis import Axis


def wall_sentence(found: Reach, name: str, label: str, axis: Axis) -> str:
    """From where on more data alone do not help a ratio."""
    factor, source = found.walls[name]
    source = SOURCE_LABELS.get(source, source)
    first, last = found.amounts[0], found.amounts[-1]
    if factor is not None:
        return f"{label}: from {axis.told(factor)} on the finite data matter less than all else, first of all {source}."
    split = last.budgets[name]
    if split.rows[STATISTICAL] ** 2 > 0.5 * split.total**2:
        return f"{label}: limited by the finite data up to {axis.told(last.factor)}; next comes {source}."
    return f"{label}: limited by {source} and the like from {axis.told(first.factor)} on."


def needed_sentence(found: Reach, name: str, label: str, axis: Axis) -> str:
    """How many data show a deviation."""
    first, last = found.amounts[0], found.amounts[-1]
    parts = []
    for level, factor in found.needed[name].items():
        if factor is not None:
            parts.append(f"{level:g}{GAP}σ with {axis.told(factor)}")
        elif first.deviations[name].sigmas >= level:
            parts.append(f"{level:g}{GAP}σ with less than {axis.told(first.factor)}")
        else:
            parts.append(f"{level:g}{GAP}σ not even with {axis.told(last.factor)}")
    return f"{label}: {', '.join(parts)}."
