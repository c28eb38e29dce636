"""The steps of a study before they are run: what is there already, and how long the rest is expected to take."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

from semitau.core.engine import checked_workers
from semitau.fit.toys.straightness import linearity_kept
from semitau.fit.toys.toys import toys_kept
from semitau.gen.templates.build import template_events_kept
from semitau.gen.templates.pseudo_data import pseudo_events_kept
from semitau.gen.templates.variations import scenarios

from .features import FEATURES
from .materials import Materials

DECAYS_PER_SECOND = 3e6
"""Generated decays per second and core through templates with about ten variations, on one core of a 2024 server. Each
further scenario (a variation that reconstructs the same events anew) costs as much again as a fifth of that."""

COST_OF_SCENARIO = 0.2
TOYS_PER_SECOND = 2500.0
PICTURES = 15.0
"""Seconds for pictures and report; libraries loaded included."""

FIT = 1.0


@dataclass(frozen=True)
class StepPlan:
    """One step. name : also that of its stage in results.json. part : component that it is for, "" if it is for all.

    there : share of its work whose outcome is in the store, 1 for all; None if that follows from steps before it.
    seconds : expected for what is left.
    """

    name: str
    part: str
    there: float | None
    seconds: float


def study_plan(materials: Materials) -> tuple[StepPlan, ...]:
    """The steps of a study in their order, with what is in the store already. Nothing is generated.

    Raises InputError as a run would, for what can be seen before anything is generated.
    """
    study = materials.study
    pace = 1.0 / DECAYS_PER_SECOND / checked_workers(materials.workers)
    slower = 1.0 + COST_OF_SCENARIO * len(scenarios(study))
    steps = _event_steps("templates", template_events_kept(study, materials.store), pace * slower)
    if study.fit.data.kind == "pseudo":
        steps += _event_steps("pseudo-data", pseudo_events_kept(study, materials.store), pace)
    # What comes later is known by what goes into it: only if all of that is there can be said what is.
    whole = all(step.there == 1.0 for step in steps)
    steps.append(StepPlan("fit", "", None, FIT))
    steps.append(_toys(materials, whole))
    if study.toys.linearity is not None:
        steps.append(_linearity(materials, whole))
    for feature in FEATURES:
        if feature.wanted(study):
            store = materials.store
            there = None if not whole else float(store is not None and store.has(feature.name, feature.key(materials)))
            steps.append(StepPlan(feature.name, "", there, feature.seconds * (1.0 - (there or 0.0))))
    return (*steps, StepPlan("pictures", "", None, PICTURES))


def expected_seconds(plan: tuple[StepPlan, ...]) -> dict[str, float]:
    """Step -> seconds, in order; pseudo-data are made in the step of the templates."""
    found: dict[str, float] = {}
    for step in plan:
        name = "templates" if step.name == "pseudo-data" else step.name
        found[name] = found.get(name, 0.0) + step.seconds
    return found


def _event_steps(name: str, events: Mapping[str, tuple[int, int]], seconds: float) -> list[StepPlan]:
    return [
        StepPlan(name, component, done / total if total else 1.0, (total - done) * seconds)
        for component, (done, total) in events.items()
    ]


def _toys(materials: Materials, whole: bool) -> StepPlan:
    number, seed = materials.study.toys.number, materials.study.study.seed
    done = min(number, toys_kept(materials.model, seed, materials.store)) if whole else 0
    return _toy_step("toys", done, number, whole, materials)


def _linearity(materials: Materials, whole: bool) -> StepPlan:
    plan, seed = materials.study.toys.linearity, materials.study.study.seed
    if plan is None or (whole and materials.model.following):
        return StepPlan("linearity", "", 1.0, 0.0)
    total = plan.number * len(plan.factors)
    done = linearity_kept(materials.model, plan.factors, plan.number, seed, materials.store) if whole else 0
    return _toy_step("linearity", done, total, whole, materials)


def _toy_step(name: str, done: int, total: int, whole: bool, materials: Materials) -> StepPlan:
    seconds = (total - done) / TOYS_PER_SECOND / checked_workers(materials.workers)
    return StepPlan(name, "", done / total if whole else None, seconds)
