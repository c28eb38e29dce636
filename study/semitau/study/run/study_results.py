"""From the materials of a study to its results, step by step."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from typing import Any

from semitau.core.code_digest import versions
from semitau.fit.fitting.result import FitResult
from semitau.fit.fitting.template_content import template_content
from semitau.fit.toys.straightness import Linearity, linearity
from semitau.fit.toys.toys import ToyResults, run_toys
from semitau.fit.uncertainty.decomposition import budget
from semitau.fit.uncertainty.fit_quality import quality
from semitau.fit.uncertainty.nuisances import held_in_turn, nuisance_shifts

from ..blinding.cover import WITHHELD, Cover
from ..graph.materials import Materials
from ..inputs.gathering import inputs_part
from ..parts.fit_parts import budget_parts, category_parts, component_parts, fit_part, nuisance_parts, ratio_parts
from ..parts.projecting import projections
from ..parts.quality_parts import quality_part
from ..parts.reweighting_parts import reweighting_warnings
from ..parts.toy_parts import linearity_parts, overall_verdict, toys_part
from ..result_part import Part
from ..results import Results, StudyIdentity, Timing
from .form_factor_warnings import form_factor_warnings
from .study_templates import StudyTemplates
from .worth_a_look import worth_a_look

Report = Callable[[str, int, int | None], None]


@dataclass(frozen=True, eq=False)
class FittedStudy:
    """The fit as it may be shown, and what takes its errors apart.

    split, in_turn, shifts : as `budget`, `held_in_turn`, `nuisance_shifts` give them. notes : what should be looked at.
    """

    shown: FitResult
    split: Mapping[str, Any]
    in_turn: Mapping[str, Any]
    shifts: Any
    notes: tuple[str, ...]


def fitted_study(materials: Materials, hiding: Cover | None) -> FittedStudy:
    """Fit, budget, nuisances. hiding : what hides the ratios, None to show them."""
    model, (data, _) = materials.model, materials.data
    fitted, notes = materials.fit_and_notes
    split = budget(model, fitted)
    in_turn = {name: held_in_turn(model, fitted, name) for name in split}
    shifts = nuisance_shifts(model, data, fitted)
    # From here on nobody sees more than the hidden values.
    return FittedStudy(fitted if hiding is None else hiding.result(model, fitted), split, in_turn, shifts, notes)


def study_toys(materials: Materials, report: Report | None) -> ToyResults:
    """Toys at the injected ratios."""
    study = materials.study
    return run_toys(
        materials.model, study.toys.number, study.study.seed, materials.workers, report, kept=materials.store
    )


def study_linearity(materials: Materials, report: Report | None) -> Linearity | None:
    """Toys at several injected ratios, if the study asks for them and if the ratios have multiples."""
    study, plan = materials.study, materials.study.toys.linearity
    if plan is None or materials.model.following:
        return None
    progress = None if report is None else _one_bar(report, len(plan.factors))
    return linearity(
        materials.model, plan.factors, plan.number, study.study.seed, materials.workers, progress, materials.store
    )


def assembled(
    materials: Materials,
    made: StudyTemplates,
    fitted: FittedStudy,
    toys: ToyResults,
    lines: Linearity | None,
    features: Mapping[str, Part],
    hiding: Cover | None,
    key: str,
    timing: Timing,
) -> Results:
    """Results of all steps. features : field of Results -> its part."""
    study, model, (data, source) = materials.study, materials.model, materials.data
    true = materials.fitted
    judged = quality(model, data, true, toys) if source.kind != "expected" and toys.valid.any() else None
    labels = {parameter.name: parameter.label for parameter in model.parameters}
    ratios = ratio_parts(model, fitted.shown, fitted.split, hidden=hiding is not None)
    fit, toy_part = fit_part(model, fitted.shown, toys), toys_part(toys, labels)
    withheld = None if hiding is None else WITHHELD
    line_parts = linearity_parts(lines, labels) if lines is not None else ()
    notes = fitted.notes
    if study.toys.linearity is not None and model.following:
        notes = *notes, "Linearity is left out: ratios that follow fitted coefficients have no multiples."
    results = Results(
        study=StudyIdentity(name=study.study.name, seed=study.study.seed, hash=study.digest, key=key, text=study.text),
        versions=versions(),
        data=source,
        ratios=ratios,
        verdict=overall_verdict(toy_part, line_parts, lines.lines if lines is not None else {}),
        fit=fit,
        budget=budget_parts(fitted.split, fitted.in_turn),
        nuisances=nuisance_parts(fitted.shifts),
        quality=None if judged is None else quality_part(model, judged, withheld),
        blinding=None if hiding is None else hiding.part,
        toys=toy_part,
        linearity=line_parts,
        categories=category_parts(made.templates),
        components=component_parts(made.templates),
        projections=projections(model, fitted.shown, data, withheld),
        cut_flow=made.cut_flow,
        reweightings=made.reweightings,
        inputs=inputs_part(study, made.templates),
        warnings=(
            *form_factor_warnings(study),
            *worth_a_look(fit, ratios, source, made.cut_flow, true.certificate.protected_bins),
            *reweighting_warnings(made.reweightings),
            *notes,
            *filter(None, [template_content(made.templates).text]),
        ),
        timing=timing,
    )
    return results.model_copy(update=dict(features))


def _one_bar(report: Report, points: int) -> Callable[[str, int, int], None]:
    """One bar for the toys of all points, which report each on its own."""
    seen: dict[str, int] = {}

    def under_one_name(label: str, done: int, total: int) -> None:
        seen[label] = done
        report("linearity", sum(seen.values()), total * points)

    return under_one_name
