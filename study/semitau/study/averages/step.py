"""The step that puts a study beside other measurements: [average] of the study file."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
from semitau.core.errors import InputError, Problem, RunError
from semitau.fit.averages.input_vector import faults_of
from semitau.fit.averages.measurements import Measured, Measurement
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.uncertainty.covariance_split import split_covariance
from semitau.gen.study_file.places import place_in
from semitau.gen.study_file.study import StudyConfig

from ..graph.materials import Materials
from ..numbers import shortened
from .checking import checked_average, planned_by_others
from .part import AverageResults
from .run import averaged
from .tables import RATIOS

Report = Callable[[str, int, int | None], None]


def ingredients(study: StudyConfig) -> Any:
    """What the average depends on besides templates, [fit], and the file that the study names.

    Raises InputError if that file, or the results that it names, are not sound any more.
    """
    if study.average is None:
        return None
    return [study.study.name, study.average.model_dump(mode="json"), planned_by_others(study)]


def average_part(
    study: StudyConfig, materials: Materials, workers: int | None, report: Report | None
) -> AverageResults:
    """The average of the measurements in the file of [average], and what this study would change.

    The study joins with the errors and the correlation of the fit to its expected set, after what the file plans.

    Raises
    ------
    InputError : the file is not sound, or the sources of the study do not go with its errors.
    RunError : the fit to the expected set fails, or an average has no minimum.
    """
    given = checked_average(study)
    if given is None or study.average is None:
        raise InputError(Problem("has no table [average]", str(study.path)))
    name = study.average.name or study.study.name
    moves = {source: shifts.model_dump() for source, shifts in study.average.sources.items()}
    ours = expected_errors(materials.model, name)
    ours = replace(
        ours,
        sources={s: {r: x for r, x in move.items() if x != 0.0 or r in ours.ratios} for s, move in moves.items()},
    )
    faults = faults_of([*given.measurements, ours], given.common)
    if faults:
        where = place_in(study, "average", "sources" if study.average.sources else "file")
        raise InputError(
            *(
                Problem(f"{shortened(name)}: {fault.what}", where, fault.got, fault.wanted, fault.remedy)
                for fault in faults
            )
        )
    return averaged(replace(given, planned=(*given.planned, ours))).results


def expected_errors(model: Model, name: str) -> Measurement:
    """What a model expects to measure of the ratios that can be averaged, with values of 0.

    The statistical error includes that of the finite templates.

    Raises
    ------
    RunError : the fit to the expected set fails.
    """
    data = model.expected_data()
    result = maximise(model, data)
    if not result.valid:
        raise RunError(*(result.reasons or (Problem("the fit to the expected set failed", "average"),)))
    names = [ratio for ratio in model.ratios if ratio in RATIOS and result.error(ratio) > 0.0]
    parts = split_covariance(model, result, names)
    errors = [np.sqrt(np.diag(part)) for part in parts]
    correlations = [
        float(np.clip(part[0, 1] / (error[0] * error[1]), -0.999, 0.999)) if len(names) == 2 and error.all() else 0.0
        for part, error in zip(parts, errors, strict=True)
    ]
    measured = {ratio: Measured(0.0, *map(float, both)) for ratio, *both in zip(names, *errors, strict=True)}
    return Measurement(name, measured, correlations[0], correlations[1])
