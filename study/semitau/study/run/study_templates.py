"""The template file of a study, written if it is not there as it should be."""

from __future__ import annotations

from dataclasses import dataclass, replace
from pathlib import Path
from typing import Any

from semitau.core.code_digest import versions
from semitau.core.content_digest import content_digest
from semitau.core.template_file import write_templates
from semitau.core.templates import TemplateSet
from semitau.gen.study_file.study import StudyConfig

from ..blinding.cover import provenance
from ..graph.materials import Materials
from ..graph.store import Store
from ..graph.template_digest import templates_digest
from ..parts.cut_flow_parts import cut_flow_parts
from ..parts.reweighting_parts import reweighting_parts
from ..results import CutFlowComponent, Reweighting
from .study_folder import file_digest

KIND = "template-file"


@dataclass(frozen=True)
class StudyTemplates:
    """templates : with data, if the study asks for pseudo-data. reused : whether all events were there already."""

    templates: TemplateSet
    cut_flow: tuple[CutFlowComponent, ...]
    reused: bool
    reweightings: tuple[Reweighting, ...] = ()


def study_templates(materials: Materials) -> StudyTemplates:
    """Templates and data of the study. Raises InputError if it cannot be built, e.g. if a cut removes everything."""
    if materials.report is not None:
        materials.report("templates", 0, None)  # the clock starts now, not at the first result
    study, before = materials.study, materials.made
    build = materials.nominal
    flow = cut_flow_parts(build.cut_flow, build.templates)
    weighted = reweighting_parts(build.reweightings, build.templates)
    templates = replace(
        materials.templates,
        provenance={
            **build.templates.provenance,
            "versions": versions(),
            **_blinding(study),
            "cut_flow": [part.model_dump(mode="json") for part in flow],
            "reweightings": [part.model_dump(mode="json") for part in weighted],
        },
    )
    reused = materials.store is not None and materials.made == before
    return StudyTemplates(templates, flow, reused, weighted)


def write_template_file(templates: TemplateSet, path: Path, store: Store | None) -> None:
    """Write the file, unless the store knows that it is there with these contents. Raises RunError if it cannot be."""
    if store is None:
        write_templates(templates, path)
        return
    key = content_digest(templates_digest(templates), templates.data, templates.provenance)
    if path.exists() and store.take_document(KIND, key) == file_digest(path):
        return
    write_templates(templates, path)
    store.keep_document(KIND, key, file_digest(path))


def _blinding(study: StudyConfig) -> dict[str, Any]:
    if study.blinding is None:
        return {}
    return {"blinding": provenance(study.blinding.kind, study.blinding.width, study.study.name)}
