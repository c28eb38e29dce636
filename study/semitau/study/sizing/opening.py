"""A study file or a template file, sized."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path

from semitau.core.errors import InputError, Problem
from semitau.core.template_file import read_templates
from semitau.gen.study_file.sizing import SizingSection

from ..graph.materials import Materials
from ..graph.open_store import open_store
from ..run.opening import open_study
from ..terminal.fit_choices import FitChoices
from .part import Sizing
from .sizing_part import sizing_of_templates, sizing_part

Report = Callable[[str, int, int | None], None]
ROOT_FILES_BEGIN = b"root"
SEED = 1
"""Of toys for template files, unless another is given."""


def sizing_of_file(
    path: Path,
    choices: FitChoices,
    share: float | None,
    toys: int | None,
    seed: int | None,
    workers: int,
    report: Report | None,
) -> Sizing:
    """Sizing of a study file, or of a template file if it begins as ROOT files do.

    share, toys : instead of those of [sizing]. choices : of the fit, for template files.

    Raises InputError for what the file or the choices have wrong, RunError as `sizing_part`.
    """
    if _is_root_file(path):
        templates = read_templates(path)
        asked = _changed(SizingSection(), share, toys)
        return sizing_of_templates(templates, choices.model(templates), asked, seed or SEED, workers, report)
    if choices != FitChoices():
        raise InputError(
            Problem("options for the fit go with template files", where=str(path), remedy="Write them into [fit].")
        )
    study = open_study(path, seed)
    asked = _changed(study.sizing or SizingSection(), share, toys)
    study = study.model_copy(update={"sizing": asked})
    with open_store(study) as store:
        return sizing_part(study, Materials(study, store, workers, report), workers, report)


def _changed(asked: SizingSection, share: float | None, toys: int | None) -> SizingSection:
    given = {"share": share, "toys": toys}
    return asked.model_copy(update={key: value for key, value in given.items() if value is not None})


def _is_root_file(path: Path) -> bool:
    try:
        with open(path, "rb") as file:
            return file.read(len(ROOT_FILES_BEGIN)) == ROOT_FILES_BEGIN
    except OSError:
        return False  # who reads it as a study file says what is wrong
