"""The cut flow: how many events of each component are left after each step, and how pure they are."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from semitau.core.errors import InputError, Problem

Floats = npt.NDArray[np.float64]

BEFORE_CATEGORIES = ("decays beside a tag", "charm tracks seen", "lepton seen", "lepton identified")
"""Steps before an event has a category; backgrounds by shape pass them all."""
CANDIDATE = "candidate"
INSIDE_AXES = "inside the axes"
"""Last step: what the cuts leave but the axes do not hold is in no template."""


def step_names(cuts: tuple[str, ...]) -> tuple[str, ...]:
    """All steps, for cuts on these observables."""
    return (*BEFORE_CATEGORIES, CANDIDATE, *(f"cut on {name}" for name in cuts), INSIDE_AXES)


def share(part: Floats, whole: Floats) -> Floats:
    """part / whole, and 0 where the whole is 0."""
    quotient: Floats = np.divide(part, whole, out=np.zeros_like(part), where=whole > 0.0)
    return quotient


@dataclass(frozen=True, eq=False)
class CutFlow:
    """What is left after each step.

    steps, components, categories : names. "candidate": charges of tag, charm and lepton add up, and the category is one
        of the study's; a D* whose delta_m misses its window has been taken for a D by then.
    events : (steps, components) expected events. generated : (steps, components) int64, simulated events behind them.
    by_category : (steps, categories, components) expected events; 0 for the steps before there is a category.
    """

    steps: tuple[str, ...]
    components: tuple[str, ...]
    categories: tuple[str, ...]
    events: Floats
    generated: npt.NDArray[np.int64]
    by_category: Floats

    @property
    def efficiency(self) -> Floats:
        """(steps, components): share of the first step that is left; 0 where there was nothing."""
        first = self.events[0]
        return share(self.events, first)

    @property
    def purity(self) -> Floats:
        """(steps, components): share of a component in all that is left after a step; 0 where nothing is."""
        total = self.events.sum(axis=1, keepdims=True)
        return share(self.events, total)

    @property
    def outside_axes(self) -> Floats:
        """(components,) expected events that pass all cuts and lie outside the axes of their category."""
        outside: Floats = self.events[-2] - self.events[-1]
        return outside

    def check(self) -> None:
        """Raises InputError if a step removes all events of a category, or if a component has none left."""
        problems = [*self._emptied_categories(), *self._empty_components()]
        if problems:
            raise InputError(*problems)

    def _emptied_categories(self) -> list[Problem]:
        problems = []
        start = len(BEFORE_CATEGORIES)
        for c, category in enumerate(self.categories):
            left = self.by_category[start:, c].sum(axis=1)
            if not left[0] > 0.0:
                problems.append(
                    Problem(
                        "no event is reconstructed in this category",
                        where=f"category {category}",
                        remedy="Widen the delta_m cut if it is a D* category; generate more events; or remove it.",
                    )
                )
            elif not left[-1] > 0.0:
                k = int(np.argmax(left <= 0.0))
                step = self.steps[start + k]
                if step == INSIDE_AXES:
                    what, remedy = "no event lies inside the axes", "Widen the axes."
                else:
                    observable = step.removeprefix("cut on ")
                    what, remedy = f"the cut on {observable} removes everything", "Loosen or remove that cut."
                problems.append(
                    Problem(what, where=f"category {category}", got=f"{left[k - 1]:.4g} events before", remedy=remedy)
                )
        return problems

    def _empty_components(self) -> list[Problem]:
        problems = []
        for c, component in enumerate(self.components):
            if not self.events[-1, c] > 0.0:
                k = int(np.argmax(self.events[:, c] <= 0.0))
                what = f'has no events left after "{self.steps[k]}"' if k else "has no events"
                problems.append(
                    Problem(
                        f"the component {what}",
                        where=f"component {component}",
                        remedy="Loosen the selection, generate more events, or remove the component.",
                    )
                )
        return problems

    def as_table(self) -> dict[str, Mapping[str, Mapping[str, float]]]:
        """Step -> component -> {"events", "efficiency", "purity", "generated"}, plain numbers for results.json."""
        efficiency, purity = self.efficiency, self.purity
        return {
            step: {
                component: {
                    "events": float(self.events[s, c]),
                    "efficiency": float(efficiency[s, c]),
                    "purity": float(purity[s, c]),
                    "generated": int(self.generated[s, c]),
                }
                for c, component in enumerate(self.components)
            }
            for s, step in enumerate(self.steps)
        }
