"""The step that looks at more data: [reach] of a study, or what the command says."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from typing import Any

from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.uncertainty.decomposition import STATISTICAL, TEMPLATES
from semitau.fit.uncertainty.prospects import DISCOVERY, EVIDENCE, JOINT, Amount, reach
from semitau.fit.uncertainty.prospects import Reach as Found
from semitau.gen.study_file.reach import ReachSection
from semitau.gen.study_file.study import StudyConfig

from ..graph.materials import Materials
from ..parts.fit_parts import SOURCE_LABELS
from ..run.study_model import study_model
from .axis import Axis, chosen_axis
from .part import Reach, ReachAmount, ReachCompared, ReachDeviation, ReachError, ReachNeeded, ReachWall
from .sentences import needed_sentence, wall_sentence

Report = Callable[[str, int, int | None], None]


def ingredients(study: StudyConfig) -> Any:
    """What of the study file reach depends on besides templates and [fit]."""
    return None if study.reach is None else study.reach.model_dump(mode="json")


def reach_part(study: StudyConfig, materials: Materials, workers: int | None, report: Report | None) -> Reach:
    """Expected errors and significance for more data; with the defaults of [reach] if the study has none.

    From expected sets alone: nothing of the fitted data is in it.

    Raises
    ------
    RunError : a fit to an expected set fails.
    """
    asked = study.reach or ReachSection()
    return reach_of(materials.templates, asked, lambda templates: study_model(study, templates), report)


def reach_of(
    templates: TemplateSet, asked: ReachSection, make: Callable[[TemplateSet], Model], report: Report | None
) -> Reach:
    """The same for any templates. make : the model of a template set.

    Raises InputError for ratios that are not fitted, RunError as `reach_part`.
    """
    found = reach(
        templates,
        asked.factors,
        true=asked.true,
        against={name: (compared.value, compared.error) for name, compared in asked.against.items()},
        make=make,
        grows=asked.generated == "grows",
        report=report,
    )
    labels = {parameter.name: parameter.label for parameter in templates.parameters}
    injected = {parameter.name: parameter.injected for parameter in templates.parameters}
    return _part(found, labels, injected, chosen_axis(templates, asked.pairs, asked.luminosity), asked)


def _part(
    found: Found, labels: Mapping[str, str], injected: Mapping[str, float], axis: Axis, asked: ReachSection
) -> Reach:
    names = list(found.amounts[0].budgets)
    together = " and ".join(labels[name] for name in found.against) + " together"
    labels = {**labels, JOINT: together}
    nothing = (None, None)
    return Reach(
        unit=axis.unit,
        generated=asked.generated,
        ratios=tuple(
            ReachCompared(
                ratio=name,
                label=labels[name],
                true=found.true.get(name, injected[name]),
                value=found.against.get(name, nothing)[0],
                error=found.against.get(name, nothing)[1],
            )
            for name in names
        ),
        amounts=tuple(_amount(amount, axis) for amount in found.amounts),
        walls=tuple(
            ReachWall(
                ratio=name,
                label=labels[name],
                factor=factor,
                source=SOURCE_LABELS.get(source, source),
                sentence=wall_sentence(found, name, labels[name], axis),
            )
            for name, (factor, source) in found.walls.items()
        ),
        needed=tuple(
            ReachNeeded(
                name=name,
                label=labels[name],
                evidence=factors[EVIDENCE],
                discovery=factors[DISCOVERY],
                sentence=needed_sentence(found, name, labels[name], axis),
            )
            for name, factors in found.needed.items()
        ),
    )


def _amount(amount: Amount, axis: Axis) -> ReachAmount:
    return ReachAmount(
        factor=amount.factor,
        amount=axis.of(amount.factor),
        errors=tuple(
            ReachError(
                ratio=name,
                total=split.total,
                statistical=split.rows[STATISTICAL],
                template_statistics=split.rows[TEMPLATES],
                systematic=split.systematic,
                sources={SOURCE_LABELS.get(source, source): error for source, error in split.rows.items()},
            )
            for name, split in amount.budgets.items()
        ),
        deviations=tuple(
            ReachDeviation(
                name=name,
                growth=seen.growth,
                degrees_of_freedom=seen.degrees_of_freedom,
                sigmas=seen.sigmas,
                evidence=seen.chance(EVIDENCE),
                discovery=seen.chance(DISCOVERY),
            )
            for name, seen in amount.deviations.items()
        ),
    )
