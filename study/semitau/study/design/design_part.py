"""The design as a step of a study."""

from __future__ import annotations

from collections.abc import Callable

from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.study import StudyConfig

from .document import document
from .part import Design
from .run import search

Report = Callable[[str, int, int | None], None]


def design_part(study: StudyConfig, materials: object, workers: int, report: Report | None = None) -> Design:
    """The best selection and binning of a study, as its [design] asks; the defaults without one.

    materials : not needed, the design generates events of its own.

    Raises InputError for what cannot be scanned, and for selections that leave nothing.
    """
    design = study.design or DesignSection()
    return document(study, design, search(study, design, workers, report))


def ingredients(study: StudyConfig) -> object:
    """What the design depends on besides templates and [fit]: JSON values."""
    design = study.design or DesignSection()
    return {"design": design.model_dump(mode="json"), "seed": study.study.seed}
