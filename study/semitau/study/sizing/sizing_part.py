"""Sizing of a study, or of a template file from anybody: all parts together."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.gen.study_file.sizing import SizingSection
from semitau.gen.study_file.study import StudyConfig

from ..graph.materials import Materials
from .allocating import allocation_part, rounded_up, snippet
from .coverage import toy_parts
from .part import Sizing, SizingToys
from .prediction import Prediction, cost_parts, curve_parts, predicted, ratio_parts, sample_parts
from .samples import Sample, generated, samples_of_study, samples_of_templates, seconds_per_event
from .sentences import sentences
from .verification import Verified, verify

Report = Callable[[str, int, int | None], None]


def ingredients(study: StudyConfig) -> Any:
    """What of the study file sizing depends on besides templates and [fit]."""
    return None if study.sizing is None else [study.study.seed, study.sizing.model_dump(mode="json")]


def sizing_part(study: StudyConfig, materials: Materials, workers: int | None, report: Report | None) -> Sizing:
    """How many events the study needs; with the defaults of [sizing] if it has none.

    Nothing of the fitted data is in it: expected sets, toys and events of its own.

    Raises
    ------
    InputError : [sizing] cannot be met, or a study with other events cannot be built.
    RunError : the expected set does not determine the ratios, or too many fits fail.
    """
    asked = study.sizing or SizingSection()
    study = study.model_copy(update={"sizing": asked})
    samples = samples_of_study(study)
    events = generated(samples, materials.nominal)
    found = predicted(materials.model, samples, asked, events)
    quiet = Materials(materials.study, materials.store, materials.workers)
    verified = verify(study, materials.templates, found, quiet.build, report)
    paces = verified.paces or {
        name: [pace] for name, pace in seconds_per_event(samples, materials.nominal).items() if pace > 0.0
    }
    return _whole(asked, found, verified, paces, study.study.seed, workers, report)


def sizing_of_templates(
    templates: TemplateSet,
    model: Model,
    asked: SizingSection,
    seed: int,
    workers: int | None,
    report: Report | None,
) -> Sizing:
    """The same for templates from anybody: what they cost and how many times their events are needed.

    Nothing is generated, so nothing is verified, and times are not known. model : of the templates.
    """
    found = predicted(model, samples_of_templates(templates), asked, None)
    return _whole(asked, found, Verified(), {}, seed, workers, report)


def _whole(
    asked: SizingSection,
    found: Prediction,
    verified: Verified,
    paces: dict[str, list[float]],
    seed: int,
    workers: int | None,
    report: Report | None,
) -> Sizing:
    model, numbers = found.model, found.numbers
    toys: tuple[SizingToys, ...] = ()
    if asked.toys and not model.coefficients:
        toys = tuple(toy_parts(found, asked, seed, workers, report))
    whole = Sizing(
        ratios=ratio_parts(found),
        samples=sample_parts(found),
        costs=tuple(cost_parts(found)),
        curves=tuple(curve_parts(numbers)),
        toys=toys,
        verifications=tuple(verified.verifications),
        allocation=allocation_part(asked, found, paces),
        snippet=_needed_snippet(found.samples, found),
        sentences=(),
    )
    return whole.model_copy(update={"sentences": tuple(sentences(whole))})


def _needed_snippet(samples: tuple[Sample, ...], found: Prediction) -> str:
    if not found.needed_events:
        return ""
    events = {name: rounded_up(n) for name, n in found.needed_events.items()}
    return snippet(samples, events, "Needed events")
