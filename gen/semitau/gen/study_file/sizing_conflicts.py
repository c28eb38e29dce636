"""Rules between [sizing] and the components and ratios of a study."""

from __future__ import annotations

from collections.abc import Iterator
from typing import TYPE_CHECKING

from .parameter_names import parameter_names
from .rules import shown, suggestion
from .sections import Conflict

if TYPE_CHECKING:
    from .study import StudyConfig

ALL = "all"


def sizing_conflicts(study: StudyConfig) -> Iterator[Conflict]:
    """What [sizing] names but the study does not have."""
    sizing = study.sizing
    if sizing is None:
        return
    components = [item.name for item in study.components]
    for name in sizing.shares:
        if name not in components:
            yield Conflict(
                ("sizing", "shares", name),
                "names no component with events of its own",
                shown(name),
                ", ".join(components),
                suggestion(name, components),
            )
    targets = [ALL, *target_ratios(study)]
    if sizing.target not in targets:
        yield Conflict(
            ("sizing", "target"),
            "names no ratio that is fitted",
            shown(sizing.target),
            ", ".join(targets),
            suggestion(sizing.target, targets),
        )


def target_ratios(study: StudyConfig) -> list[str]:
    """Ratios that the fit has a parameter for."""
    return [name for name in parameter_names(study, []).ratios if name not in study.fit.fixed]
