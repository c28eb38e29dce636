"""A template file opened for fitting: its model, and the data to fit."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.template_file import read_templates
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.fitting.result import FitResult

from ..numbers import counted
from ..results import DataSource
from ..terminal.fit_choices import FitChoices


def open_model(path: Path, choices: FitChoices | None = None) -> Model:
    """The model of a template file from anybody.

    Raises
    ------
    InputError : the file is missing, not a template file, of another version, or holds what no template may hold; or
        a choice names no parameter.
    """
    return (choices or FitChoices()).model(read_templates(path))


def choose_data(model: Model, data_file: Path | None, expected: bool = False) -> tuple[Data, DataSource]:
    """What to fit: `data_file`, else the data in the template file, else (or with `expected`) the expected events."""
    if data_file is not None:
        data = model.data(data_file)
        refuse_fractions(model, data, data_file.name)
        return data, DataSource(kind="file", description=f"data of {data_file.name}", events=_events(data))
    if model.templates.data and not expected:
        data = model.data(model.templates)
        refuse_fractions(model, data, "data stored with the templates")
        return data, DataSource(kind="file", description="data stored with the templates", events=_events(data))
    data = model.expected_data()
    return data, DataSource(kind="expected", description="expected events", events=_events(data))


def refuse_fractions(model: Model, data: Data, where: str) -> None:
    """Counts of a file must be whole: data that were weighted or subtracted from have other errors than the fit's.

    Raises
    ------
    InputError : a count is not whole.
    """
    for name, counts in model.by_category(data.counts).items():
        wrong = np.argwhere(counts != np.round(counts))
        if wrong.size:
            place = tuple(wrong[0].tolist())
            raise InputError(
                Problem(
                    "the count is not whole",
                    where=f"{where}: category {name}, bin {list(place)}"
                    + (f" and {len(wrong) - 1} more" if len(wrong) > 1 else ""),
                    got=f"{counts[place]:g}",
                    remedy="Give counts as observed; an expected set is fitted with --expected.",
                )
            )


def fit_or_fail(model: Model, data: Data) -> FitResult:
    """The fit to the data.

    Raises
    ------
    RunError : it did not converge; the problems say why and what to do.
    """
    result = maximise(model, data)
    if not result.valid:
        raise RunError(*(result.reasons or (Problem("the fit failed"),)))
    return result


def described(source: DataSource) -> str:
    """In one line, e.g. "Data: expected events (14 321 events)"."""
    return f"Data: {source.description} ({counted(source.events)} events)"


def read_factors(text: str) -> tuple[float, ...]:
    """Numbers between commas, at least two, or none at all. Raises InputError for anything else."""
    parts = [part for part in text.split(",") if part.strip()]
    try:
        factors = tuple(map(float, parts))
        if len(factors) == 1:
            raise ValueError
    except ValueError:
        raise InputError(
            Problem("not a list of multiples", where="--factors", got=repr(text), wanted='numbers, e.g. "0.8,1,1.2"')
        ) from None
    return factors


def _events(data: Data) -> float:
    return float(data.counts.sum())
