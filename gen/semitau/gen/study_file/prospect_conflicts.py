"""Rules between [reach], [average] and the ratios of a study."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path
from typing import TYPE_CHECKING

from .names import RATIOS
from .parameter_names import parameter_names
from .rules import shown, suggestion
from .sections import Conflict, Place, missing_file

if TYPE_CHECKING:
    from .study import StudyConfig


def prospect_conflicts(study: StudyConfig, folder: Path | None) -> Iterator[Conflict]:
    """Ratios that are not fitted, and a file that is not there. folder : where it is looked for; None if it is not."""
    if study.reach is not None:
        yield from _reach(study)
    if study.average is not None:
        yield from _average(study)
        if folder is not None:
            yield from missing_file(("average", "file"), study.average.file, folder)


def fitted_ratios(study: StudyConfig) -> list[str]:
    """Ratios that the fit has a parameter of its own for."""
    if study.fit.couplings:
        return []
    return [
        name
        for name in parameter_names(study, []).ratios
        if name not in study.fit.fixed and name not in study.fit.functions
    ]


def _reach(study: StudyConfig) -> Iterator[Conflict]:
    fitted = fitted_ratios(study)
    if study.reach is None:
        return
    if not fitted:
        yield Conflict(("reach",), "has no ratio that is fitted", remedy=_remedy(study))
        return
    named: list[Place] = [("reach", "true", name) for name in study.reach.true]
    for place in [*named, *(("reach", "against", name) for name in study.reach.against)]:
        name = str(place[-1])
        if name not in fitted:
            what = "names no ratio that is fitted"
            yield Conflict(place, what, shown(name), ", ".join(fitted), suggestion(name, fitted))


def _average(study: StudyConfig) -> Iterator[Conflict]:
    if not {*fitted_ratios(study)} & {*RATIOS}:
        got = ", ".join(fitted_ratios(study))
        yield Conflict(("average",), "has no fitted ratio to average", got, " or ".join(RATIOS), _remedy(study))


def _remedy(study: StudyConfig) -> str:
    others = ", or [fit] coefficients, which stand in the place of ratios"
    return f"Remove the table{others if study.fit.couplings else ''}."
