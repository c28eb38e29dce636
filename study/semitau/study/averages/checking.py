"""The file that [average] of a study names, checked before anything is generated."""

from __future__ import annotations

from collections.abc import Iterator

from semitau.core.errors import InputError, Problem
from semitau.fit.averages.measurements import Measurement
from semitau.gen.study_file.places import place_in
from semitau.gen.study_file.rules import suggestion
from semitau.gen.study_file.study import StudyConfig

from .measurement_file import AverageInput, read_average


def checked_average(study: StudyConfig) -> AverageInput | None:
    """What the file of [average] says; None without that table.

    Raises
    ------
    InputError : every problem of the file with its line; a source of the study that the file does not list.
    """
    if study.average is None:
        return None
    given = read_average(study.beside(study.average.file))
    problems = list(_unknown_sources(study, given))
    if problems:
        raise InputError(*problems)
    return given


def planned_by_others(study: StudyConfig) -> tuple[Measurement, ...]:
    """What the file plans, with the errors that results of other studies give: part of every key that the average is
    kept under. Raises InputError as `checked_average`."""
    given = checked_average(study)
    return () if given is None else given.planned


def _unknown_sources(study: StudyConfig, given: AverageInput) -> Iterator[Problem]:
    for source in study.average.sources if study.average is not None else ():
        if source not in given.common:
            where = place_in(study, "average", "sources", source)
            what = "is no source of the file"
            yield Problem(what, where, repr(source), ", ".join(given.common), suggestion(source, given.common))
