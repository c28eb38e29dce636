"""Prospects of the fit package as tables, sentences, a document and a picture."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text
from semitau.core.errors import InputError, Problem
from semitau.core.templates import TemplateSet
from semitau.fit.uncertainty.decomposition import STATISTICAL, TEMPLATES
from semitau.fit.uncertainty.prospects import DISCOVERY, EVIDENCE, JOINT, Reach

from ..numbers import GAP, digits_for, percent, signed
from ..pictures.reach import Curves, Errors, Significance, reach_curves
from ..pictures.sheet import Sheet
from ..terminal.summary import plain_table
from .fit_parts import SOURCE_LABELS

LEVELS = (EVIDENCE, DISCOVERY)


@dataclass(frozen=True)
class Axis:
    """How amounts of data are told: as multiples of the templates', or as B pairs if their number is known."""

    pairs: float | None

    @property
    def label(self) -> str:
        return "data" if self.pairs is None else "B pairs"

    def of(self, factor: float) -> float:
        """Place on the axis."""
        return factor if self.pairs is None else factor * self.pairs

    def shown(self, factor: float) -> str:
        """In words, e.g. "×10" or "7e9"."""
        if self.pairs is None:
            return f"×{factor:.3g}"
        return f"{self.of(factor):.2g}".replace("e+0", "e").replace("e+", "e")

    def told(self, factor: float) -> str:
        """In a sentence, e.g. "10 times the data" or "7e9 B pairs (×10)"."""
        if self.pairs is None:
            return f"{factor:.3g} times the data"
        return f"{self.shown(factor)} B pairs (×{factor:.3g})"


def axis_of(templates: TemplateSet, pairs: float | None) -> Axis:
    """The axis for `pairs`, or for those of the study that the templates come from, if they know it."""
    if pairs is not None:
        return Axis(pairs)
    try:
        study = tomllib.loads(str(templates.provenance.get("study", "")))
        return Axis(float(study["experiment"]["b_pairs"]))
    except (tomllib.TOMLDecodeError, KeyError, TypeError, ValueError):
        return Axis(None)


def read_true(texts: Sequence[str]) -> dict[str, float]:
    """Ratio -> value from NAME=VALUE. Raises InputError for anything else."""
    return {name: numbers[0] for name, numbers in _named(texts, "--true", 1)}


def read_compared(texts: Sequence[str]) -> dict[str, tuple[float, float]]:
    """Ratio -> (value, error) from NAME=VALUE or NAME=VALUE:ERROR. Raises InputError for anything else."""
    return {name: (numbers[0], (*numbers, 0.0)[1]) for name, numbers in _named(texts, "--against", 2)}


def _named(texts: Sequence[str], option: str, most: int) -> Iterator[tuple[str, list[float]]]:
    wanted = "NAME=VALUE, e.g. R_D=0.35" if most == 1 else "NAME=VALUE:ERROR, e.g. R_D=0.298:0.004"
    for text in texts:
        name, _, rest = text.partition("=")
        try:
            numbers = [float(part) for part in rest.split(":")]
        except ValueError:
            numbers = []
        finite = all(abs(number) < float("inf") for number in numbers)
        if not (name.strip() and 1 <= len(numbers) <= most and finite and min(numbers[1:], default=0.0) >= 0.0):
            raise InputError(Problem("not a ratio and its value", where=option, got=repr(text), wanted=wanted))
        yield name.strip(), numbers


def reach_summary(found: Reach, labels: Mapping[str, str], axis: Axis) -> Iterator[RenderableType]:
    """A table a ratio, then what limits it and when a deviation will be seen."""
    for name in found.amounts[0].budgets:
        yield from (_table(found, name, labels[name], axis), "")
    for name in found.amounts[0].budgets:
        yield Text(_wall(found, name, labels[name], axis))
    for name, needed in found.needed.items():
        yield Text(_needed(found, name, needed, labels, axis))


def _table(found: Reach, name: str, label: str, axis: Axis) -> Table:
    compared = name in found.needed
    table = plain_table(
        axis.label, f"error of {label}", "finite data", "templates", "systematic", "largest of these",
        *("expected", "≥ 3 σ", "≥ 5 σ") * compared,
    )  # fmt: skip
    for amount in found.amounts:
        split = amount.budgets[name]
        places = digits_for(split.total) + 1
        rest = {source: error for source, error in split.rows.items() if source not in (STATISTICAL, TEMPLATES)}
        largest = max(rest, key=lambda source: rest[source], default="")
        seen = amount.deviations.get(name)
        table.add_row(
            axis.shown(amount.factor),
            signed(split.total, places),
            *(signed(part, places) for part in (split.rows[STATISTICAL], split.rows[TEMPLATES], split.systematic)),
            SOURCE_LABELS.get(largest, largest) or "–",
            *((f"{seen.sigmas:.1f}{GAP}σ", *(percent(seen.chance(level), 0) for level in LEVELS)) if seen else ()),
        )
    return table


def _wall(found: Reach, name: str, label: str, axis: Axis) -> str:
    factor, source = found.walls[name]
    source = SOURCE_LABELS.get(source, source)
    first, last = found.amounts[0], found.amounts[-1]
    if factor is not None:
        return f"{label}: from {axis.told(factor)} on the finite data matter less than all else, first of all {source}."
    split = last.budgets[name]
    if split.rows[STATISTICAL] ** 2 > 0.5 * split.total**2:
        return f"{label}: limited by the finite data up to {axis.told(last.factor)}; next comes {source}."
    return f"{label}: limited by {source} and the like from {axis.told(first.factor)} on."


def _needed(
    found: Reach, name: str, needed: Mapping[float, float | None], labels: Mapping[str, str], axis: Axis
) -> str:
    names = list(found.against) if name == JOINT else [name]
    first, last = found.amounts[0], found.amounts[-1]
    parts = []
    for level, factor in needed.items():
        if factor is not None:
            parts.append(f"{level:g}{GAP}σ with {axis.told(factor)}")
        elif first.deviations[name].sigmas >= level:
            parts.append(f"{level:g}{GAP}σ with less than {axis.told(first.factor)}")
        else:
            parts.append(f"{level:g}{GAP}σ not even with {axis.told(last.factor)}")
    return f"{' and '.join(labels[ratio] for ratio in names)}{' together' * (name == JOINT)}: {', '.join(parts)}."


def reach_document(found: Reach, axis: Axis) -> dict[str, object]:
    """The same as plain numbers."""
    return {
        "pairs": axis.pairs,
        "true": dict(found.true),
        "against": {name: list(compared) for name, compared in found.against.items()},
        "amounts": [
            {
                "factor": amount.factor,
                "errors": {
                    name: {"total": split.total, "systematic": split.systematic, "rows": dict(split.rows)}
                    for name, split in amount.budgets.items()
                },
                "deviations": {
                    name: {
                        "growth": seen.growth,
                        "degrees_of_freedom": seen.degrees_of_freedom,
                        "sigmas": seen.sigmas,
                        "chances": {f"{level:g}": seen.chance(level) for level in LEVELS},
                    }
                    for name, seen in amount.deviations.items()
                },
            }
            for amount in found.amounts
        ],
        "walls": {name: {"factor": factor, "source": source} for name, (factor, source) in found.walls.items()},
        "needed": {
            name: {f"{level:g}": factor for level, factor in needed.items()} for name, needed in found.needed.items()
        },
    }


def reach_picture(found: Reach, labels: Mapping[str, str], axis: Axis) -> Sheet:
    """Errors of each ratio by source, and significance, against the amount of data."""
    places = [axis.of(amount.factor) for amount in found.amounts]
    names = list(found.amounts[0].budgets)
    errors = []
    for name in names:
        splits = [amount.budgets[name] for amount in found.amounts]
        rows = {
            SOURCE_LABELS.get(source, source): [split.rows[source] for split in splits] for source in splits[0].rows
        }
        factor, _ = found.walls[name]
        errors.append(
            Errors(labels[name], [s.total for s in splits], rows, None if factor is None else axis.of(factor))
        )
    seen = [
        Significance(
            "together" if name == JOINT else labels[name],
            [amount.deviations[name].sigmas for amount in found.amounts],
            [[amount.deviations[name].chance(level) for amount in found.amounts] for level in LEVELS],
            None if name == JOINT else names.index(name),
        )
        for name in found.needed
    ]
    label = "data, relative to the templates" if axis.pairs is None else axis.label
    return reach_curves(Curves(label, places, errors, seen))
