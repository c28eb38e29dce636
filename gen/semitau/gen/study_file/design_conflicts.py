"""Rules between [design] and the selection, categories, imports and fit of a study."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from .design import DesignSection, ScannedCut
from .prospect_conflicts import fitted_ratios
from .rules import shown
from .sections import Conflict, Place

if TYPE_CHECKING:
    from .study import StudyConfig


def effective(study: StudyConfig, observable: str, side: str) -> dict[str, float]:
    """Where the cut on one side of an observable stands in each category that has it: not outside of its axis."""
    found = {}
    for category in study.categories:
        cut, edges = category.cuts.get(observable), category.axes.get(observable)
        value = None if cut is None else getattr(cut, side)
        if value is not None and edges is not None:
            value = max(value, edges[0]) if side == "min" else min(value, edges[-1])
        if value is not None:
            found[category.name] = value
    return found


def design_conflicts(study: StudyConfig, design: DesignSection) -> Iterator[Conflict]:
    """What the search could not do."""
    if study.imports is not None and study.imports.components:
        remedy = "Leave out [design], or [import]."
        yield Conflict(("design",), "cannot cut and bin imported components anew", remedy=remedy)
    if study.fit.apart:
        what, remedy = "does not know shapes and rates apart", "Leave out apart in [fit], or [design]."
        yield Conflict(("design",), what, shown(study.fit.apart), remedy=remedy)
    if study.fit.coefficients:
        what, remedy = (
            "does not know templates that follow coefficients",
            "Leave out coefficients in [fit], or [design].",
        )
        yield Conflict(("design",), what, shown(study.fit.coefficients), remedy=remedy)
    goal, fitted = design.minimise, fitted_ratios(study)
    if goal not in ("mean", "area", *fitted) and not any(name.startswith(f"{goal}_B") for name in fitted):
        allowed = ", ".join(("mean", "area", *fitted))
        yield Conflict(("design", "minimise"), "names no ratio that is fitted", shown(goal), allowed)
    for observable, scan in design.cuts.items():
        place: Place = ("design", "cuts", observable)
        if observable == "delta_m":
            what = "cannot be scanned: it decides which candidates are a D*"
            yield Conflict(place, what, remedy="Try other windows as studies of their own.")
            continue
        for side in ("min", "max"):
            if getattr(scan, side) is not None:
                yield from _start(study, (*place, side), observable, side, scan)
    for observable in design.axes:
        if observable == "delta_m":
            yield Conflict(("design", "axes", observable), "cannot be an axis of all candidates: a D has none")


def _start(study: StudyConfig, place: Place, observable: str, side: str, scan: ScannedCut) -> Iterator[Conflict]:
    low, high = getattr(scan, side)
    starts = effective(study, observable, side)
    if not starts:
        what, remedy = (
            "scans a cut that the study does not make",
            f"Give [selection] {observable} a {side}, a loose one.",
        )
        yield Conflict(place, what, remedy=remedy)
    for category, value in starts.items():
        if not low <= value <= high:
            what = f"leaves out the cut of the study in {category}, where it begins"
            yield Conflict(place, what, f"{low:g} to {high:g}", f"a range around {value:g}")
            return
    if len(set(starts.values())) > 1 and not scan.by_category:
        got = ", ".join(f"{value:g} in {category}" for category, value in starts.items())
        what = "begins at different values in different categories"
        yield Conflict(place, what, got, remedy="Say by_category = true, or cut all alike.")
