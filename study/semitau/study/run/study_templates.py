"""The templates of a study: taken from its folder if they still fit, built and stored otherwise."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from semitau.core.errors import InputError
from semitau.core.streams import stream_key
from semitau.core.template_file import read_templates, write_templates
from semitau.core.templates import TemplateSet
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.cut_flow import CutFlow
from semitau.gen.templates.imported import imported_data, poisson_of_imports, with_imports

from ..blinding.cover import provenance
from ..parts.reweighting_parts import reweighting_parts
from ..results import CutFlowComponent, Reweighting
from .study_folder import study_key, versions

Report = Callable[[str, int, int | None], None]


@dataclass(frozen=True)
class StudyTemplates:
    """templates : with data, if the study asks for pseudo-data. reused : whether they were there already."""

    templates: TemplateSet
    cut_flow: tuple[CutFlowComponent, ...]
    reused: bool
    reweightings: tuple[Reweighting, ...] = ()


def study_templates(
    study: StudyConfig, path: Path, workers: int | None = None, report: Report | None = None, again: bool = False
) -> StudyTemplates:
    """Templates of the study, from `path` if they were made from the same study, seed, code and files.

    again : build in any case.

    Raises
    ------
    InputError : the study cannot be built, e.g. a cut removes everything.
    RunError : the file cannot be written.
    """
    key = study_key(study)
    if not again:
        stored = _stored(path, key)
        if stored is not None:
            return stored
    if report is not None:
        report("templates", 0, None)  # the clock starts now, not at the first result
    build = build_templates(study, workers, None if report is None else _under("templates", report))
    flow = _cut_flow_parts(build.cut_flow, build.templates)
    weighted = reweighting_parts(build.reweightings, build.templates)
    templates = replace(
        with_imports(study, build.templates),
        provenance={
            **build.templates.provenance,
            "versions": versions(),
            "key": key,
            **_blinding(study),
            "cut_flow": [part.model_dump(mode="json") for part in flow],
            "reweightings": [part.model_dump(mode="json") for part in weighted],
        },
    )
    if study.fit.data.kind == "pseudo":
        templates = templates.with_data(_pseudo_data(study, templates, workers, report))
    if study.fit.data.kind == "import":
        templates = templates.with_data(imported_data(study, templates))
    write_templates(templates, path)
    return StudyTemplates(templates, flow, reused=False, reweightings=weighted)


def _blinding(study: StudyConfig) -> dict[str, Any]:
    if study.blinding is None:
        return {}
    return {"blinding": provenance(study.blinding.kind, study.blinding.width, study.study.name)}


def _stored(path: Path, key: str) -> StudyTemplates | None:
    """What is stored, if it is whole and made with this key."""
    if not path.exists():
        return None
    try:
        templates = read_templates(path)
    except InputError:
        return None  # cut short or of another version: it is made again
    if templates.provenance.get("key") != key:
        return None
    stored: Any = templates.provenance.get("cut_flow", [])
    weighted: Any = templates.provenance.get("reweightings", [])
    return StudyTemplates(
        templates,
        tuple(CutFlowComponent.model_validate(part) for part in stored),
        reused=True,
        reweightings=tuple(Reweighting.model_validate(part) for part in weighted),
    )


def _under(label: str, report: Report) -> Report:
    """The report of a stage that names its parts, under one name."""
    return lambda _, done, total: report(label, done, total)


def _cut_flow_parts(flow: CutFlow, templates: TemplateSet) -> tuple[CutFlowComponent, ...]:
    labels = {component.name: component.label for component in templates.components}
    return tuple(
        CutFlowComponent.model_validate(
            {
                "component": name,
                "label": labels.get(name, name),
                "steps": [
                    {
                        "name": step,
                        "events": float(flow.events[s, c]),
                        "efficiency": _share(float(flow.events[s, c]), float(flow.events[max(s - 1, 0), c])),
                    }
                    for s, step in enumerate(flow.steps)
                ],
                "purity": float(flow.purity[-1, c]),
            }
        )
        for c, name in enumerate(flow.components)
    )


def _share(part: float, whole: float) -> float:
    return part / whole if whole > 0 else 0.0


def _pseudo_data(
    study: StudyConfig, templates: TemplateSet, workers: int | None, report: Report | None
) -> Mapping[str, Any]:
    from semitau.gen.templates.pseudo_data import pseudo_data

    generated = pseudo_data(study, workers, None if report is None else _under("pseudo-data", report))
    # Imported components have no events of their own to draw: their counts are about their templates.
    seed = int(stream_key(study.study.seed, "pseudo-data of imports"))
    imported = poisson_of_imports(study, templates.templates, seed)
    return {name: counts + imported.get(name, 0.0) for name, counts in generated.items()}
