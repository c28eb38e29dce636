"""Files for `semitau average`: read, checked whole, every problem told at once with file, line, key and remedy."""

from __future__ import annotations

import hashlib
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any, TypeVar

from pydantic import BaseModel, ValidationError
from semitau.core.errors import InputError
from semitau.core.toml_lines import TomlLines
from semitau.fit.averages.compatibility import Prediction
from semitau.fit.averages.input_vector import faults_of
from semitau.fit.averages.measurements import Fault, Measurement, faults_in
from semitau.gen.study_file.faults import conflict
from semitau.gen.study_file.reader import problems_at, tables_of, text_of
from semitau.gen.study_file.sections import Conflict

from .planned_errors import planned_errors
from .tables import RATIOS, AverageSection, AverageTables, MeasurementTable, SourceTable


@dataclass(frozen=True)
class AverageInput:
    """What is to be averaged, sound. planned : measurements with values of 0."""

    section: AverageSection
    measurements: tuple[Measurement, ...]
    common: Mapping[str, float]
    source_labels: Mapping[str, str]
    prediction: Prediction | None
    planned: tuple[Measurement, ...]
    digest: str


def read_average(path: Path) -> AverageInput:
    """What stands in a TOML file.

    Raises InputError with every problem found: a file that cannot be read or is no TOML, unknown or missing keys,
    errors and correlations that cannot be, sources that are not listed, results of a study that are not there.
    """
    text = text_of(path)
    data = tables_of(text, path)
    given, found = _checked(data, path.parent)
    if given is None:
        raise InputError(*problems_at(found, data, TomlLines(text), path))
    tables, planned = given
    predicted = {} if tables.prediction is None else {r: getattr(tables.prediction, r) for r in RATIOS}
    values = {ratio: (entry.value, entry.error) for ratio, entry in predicted.items() if entry is not None}
    return AverageInput(
        tables.average,
        tuple(table.measurement() for table in tables.measurements),
        {source.name: source.correlation for source in tables.sources},
        {source.name: source.label or source.name for source in tables.sources},
        Prediction(values, tables.prediction.correlation) if tables.prediction is not None and values else None,
        planned,
        hashlib.sha256(text.encode()).hexdigest(),
    )


Model = TypeVar("Model", bound=BaseModel)
Sound = tuple[AverageTables, tuple[Measurement, ...]]


def _checked(data: Mapping[str, Any], folder: Path) -> tuple[Sound | None, list[Conflict]]:
    try:
        tables = AverageTables.model_validate(data)
    except ValidationError as error:
        found = [conflict(AverageTables, data, item) for item in error.errors(include_url=False)]
        return None, found + _of_sound_tables(data)
    measurements = [table.measurement() for table in tables.measurements]
    common = {source.name: source.correlation for source in tables.sources}
    found = list(_twice("source", [source.name for source in tables.sources]))
    found += _placed(faults_of(measurements, common), list(range(len(measurements))), tables.sources)
    planned: list[Measurement] = []
    for number, table in enumerate(tables.planned):
        try:
            study = None if table.results is None else planned_errors(folder / table.results)
        except InputError as error:
            place = ("planned", number, "results")
            found += [Conflict(place, f"{p.where}: {p.what}", p.got, p.wanted, p.remedy) for p in error.problems]
            continue
        planned.append(table.measurement(study))
        if not found:
            faults = faults_of([*measurements, planned[-1]], common)
            found += [_on_planned(fault, number, len(measurements)) for fault in faults]
            found += _nowhere(planned[-1], number, tables)
    return (None, found) if found else ((tables, tuple(planned)), [])


def _of_sound_tables(data: Mapping[str, Any]) -> list[Conflict]:
    """What is wrong with single measurements, of those tables that can be understood although others cannot."""
    measurements = _understood(data.get("measurement"), MeasurementTable.model_validate)
    sources = _understood(data.get("source"), SourceTable.model_validate)
    listed = data.get("source", [])
    if not measurements or not isinstance(listed, list) or len(sources) < len(listed):
        return []
    found = faults_in(
        [table.measurement() for table in measurements.values()], {s.name: s.correlation for s in sources.values()}
    )
    return _placed(found, list(measurements), tuple(sources.values()))


def _understood(tables: object, validate: Callable[[object], Model]) -> dict[int, Model]:
    sound = {}
    for number, table in enumerate(tables if isinstance(tables, list) else []):
        try:
            sound[number] = validate(table)
        except ValidationError:
            continue
    return sound


def _placed(faults: Sequence[Fault], numbers: list[int], sources: Sequence[SourceTable]) -> list[Conflict]:
    """Faults of the fit package at their places in the file. numbers : of the measurements in the file."""
    found = []
    for fault in faults:
        place = fault.place
        if place and place[0] == "measurement":
            place = ("measurement", numbers[int(place[1])], *place[2:])
        elif place and place[0] == "source":
            place = ("source", [source.name for source in sources].index(str(place[1])), *place[2:])
        found.append(Conflict(place, fault.what, fault.got, fault.wanted, fault.remedy))
    return found


def _on_planned(fault: Fault, number: int, measurements: int) -> Conflict:
    """A fault that comes with a planned measurement, which stands after all others."""
    rest = fault.place[2:] if fault.place[:2] == ("measurement", measurements) else ()
    return Conflict(("planned", number, *rest), fault.what, fault.got, fault.wanted, fault.remedy)


def _twice(key: str, names: list[str]) -> Iterator[Conflict]:
    for number, name in enumerate(names):
        if name in names[:number]:
            yield Conflict((key, number, "name"), f"is the name of another {key}", name)


def _nowhere(planned: Measurement, number: int, tables: AverageTables) -> list[Conflict]:
    """A planned ratio that neither measurements nor the prediction give a value."""
    known = {r for r in RATIOS for t in (*tables.measurements, tables.prediction) if getattr(t, r, None) is not None}
    return [
        Conflict(("planned", number), f"has no value to be assumed for {ratio}", remedy="Add a prediction of it.")
        for ratio in planned.ratios
        if ratio not in known
    ]
