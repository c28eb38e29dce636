"""How a minimisation can end, and what a user should make of it."""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

from semitau.core.errors import Problem

CONVERGED, FLAT, NO_MINIMUM, STALLED, TOO_LONG, NOT_FINITE, RUNAWAY = range(7)


class Ending(NamedTuple):
    """What the compiled minimisation returns.

    status : one of the above; value : -ln L; distance : estimated distance to the minimum in -ln L.
    """

    status: int
    value: float
    distance: float
    steps: int
    evaluations: int


_TEXTS = {
    FLAT: (
        "the likelihood is too flat for errors",
        "Fix or constrain the parameters with the largest correlations, or use more data.",
    ),
    NO_MINIMUM: (
        "the fit ended at a point that is no minimum",
        "Start from other values, or merge bins with few events.",
    ),
    STALLED: (
        "no step lowers -ln L any more, but its gradient is not zero",
        "Start from other values; look for bins where a nuisance empties a template.",
    ),
    TOO_LONG: (
        "the fit did not reach a minimum",
        "A parameter may run away: look for one that no data constrain, and fix or constrain it.",
    ),
    RUNAWAY: (
        "a free parameter has run to where all its bins expect nothing",
        "The data hold too few events for it: fix or constrain it, or merge its component with another.",
    ),
    NOT_FINITE: (
        "the likelihood or its derivatives are not finite",
        "Start nearer to the injected values; look for extreme contents of the templates.",
    ),
}


def short_reason(status: int) -> str:
    """What went wrong in a few words, for counts of failures; "" when nothing did."""
    return "" if status == CONVERGED else _TEXTS[status][0]


def reasons(ending: Ending, flat_directions: tuple[Mapping[str, float], ...]) -> tuple[Problem, ...]:
    """Why a fit is not valid, with advice; empty when it is. A flat direction is named by its parameters."""
    if ending.status == CONVERGED:
        return ()
    if flat_directions:
        return tuple(
            Problem(
                "the data cannot tell these parameters apart",
                where=", ".join(direction),
                got=" ".join(f"{coefficient:+.2g} {name}" for name, coefficient in direction.items()),
                remedy="Fix or constrain one of them, merge their components, or add a category that separates them.",
            )
            for direction in flat_directions
        )
    what, remedy = _TEXTS[ending.status]
    return (Problem(what, where="fit", got=f"{ending.steps} steps", remedy=remedy),)
