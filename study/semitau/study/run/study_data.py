"""What a study wants fitted."""

from __future__ import annotations

from typing import Literal

from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.gen.study_file.study import StudyConfig

from ..results import DataSource
from .fitting import refuse_fractions


def fitted_data(study: StudyConfig, model: Model) -> tuple[Data, DataSource]:
    """What the study wants fitted, and what that is in words.

    Raises InputError for a data file that is missing, does not fit to the study, or holds counts that are not whole.
    """
    wanted = study.fit.data
    kind: Literal["expected", "pseudo", "file"] = "expected"
    if wanted.kind == "file" and wanted.file is not None:
        kind, data, description = "file", model.data(study.beside(wanted.file)), f"data of {wanted.file}"
    elif wanted.kind == "import" and study.imports is not None and study.imports.data is not None:
        kind, data, description = "file", model.data(model.templates), f"data of {study.imports.data.file}"
    elif wanted.kind == "pseudo":
        kind, data = "pseudo", model.data(model.templates)
        description = "pseudo-data from events that the templates do not know"
    else:
        data, description = model.expected_data(), "expected events"
    if kind == "file":
        refuse_fractions(model, data, description)
    return data, DataSource(kind=kind, description=description, events=float(data.counts.sum()))
