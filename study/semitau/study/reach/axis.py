"""How amounts of data are told: as multiples of the templates', as B pairs, or as integrated luminosity."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass

from semitau.core.templates import TemplateSet
from semitau.core.true_minus import formatted

PAIRS, LUMINOSITY, MULTIPLES = "B pairs", "fb⁻¹", "times the data"


@dataclass(frozen=True)
class Axis:
    """unit : PAIRS, LUMINOSITY or MULTIPLES. size : of the data of the templates, in it."""

    unit: str
    size: float

    def of(self, factor: float) -> float:
        """Place on the axis."""
        return factor * self.size

    def shown(self, factor: float) -> str:
        """In a table, e.g. "×10", "7 × 10⁹" or "7110"."""
        if self.unit == MULTIPLES:
            return f"×{factor:.3g}"
        if self.unit == PAIRS:
            return formatted(self.of(factor), ".2g")
        return f"{float(f'{self.of(factor):.3g}'):g}"

    def told(self, factor: float) -> str:
        """In a sentence, e.g. "10 times the data" or "7 × 10⁹ B pairs (×10)"."""
        if self.unit == MULTIPLES:
            return f"{factor:.3g} times the data"
        return f"{self.shown(factor)} {self.unit} (×{factor:.3g})"


def chosen_axis(templates: TemplateSet, pairs: float | None, luminosity: float | None) -> Axis:
    """The axis for a luminosity, or for `pairs`, or for those of the study that the templates come from."""
    if luminosity is not None:
        return Axis(LUMINOSITY, luminosity)
    if pairs is not None:
        return Axis(PAIRS, pairs)
    try:
        study = tomllib.loads(str(templates.provenance.get("study", "")))
        return Axis(PAIRS, float(study["experiment"]["b_pairs"]))
    except (tomllib.TOMLDecodeError, KeyError, TypeError, ValueError):
        return Axis(MULTIPLES, 1.0)
