"""Tables of a study file, checked whole: every problem is found, whatever else is wrong."""

from __future__ import annotations

from collections.abc import Mapping
from pathlib import Path
from typing import Any

from pydantic import TypeAdapter, ValidationError
from pydantic_core import ErrorDetails

from .conflicts import conflicts
from .faults import conflict
from .fractions import BranchingFractionTables
from .machine import Experiment
from .sections import COMPONENTS, SECTIONS, Conflict, Sections
from .study import CONFLICTS, StudyConfig
from .wilson import Quadratic


def checked_alone(data: Mapping[str, Any], folder: Path) -> tuple[StudyConfig | None, list[Conflict]]:
    """The study in tables as read from TOML, or None and all that is wrong with them but for its alternatives.

    folder : where files that the study names are looked for.
    """
    try:
        return StudyConfig.model_validate(data, context={"folder": folder}), []
    except ValidationError as error:
        found: list[Conflict] = []
        for item in error.errors(include_url=False):
            if item["type"] == CONFLICTS:
                found += item["ctx"]["conflicts"]
            elif not _miscounted(item):
                found.append(conflict(StudyConfig, data, item))
        if not any(item["type"] == CONFLICTS for item in error.errors(include_url=False)):
            found += conflicts(_sound_sections(data, folder))
        return None, found


def _miscounted(item: ErrorDetails) -> bool:
    """True for "too short" of a list that is long enough but for elements with problems of their own."""
    given = item["input"]
    return item["type"] == "too_short" and isinstance(given, list | dict) and len(given) >= item["ctx"]["min_length"]


def _sound_sections(data: Mapping[str, Any], folder: Path) -> Sections:
    """The tables that can be understood although others cannot."""
    sound: dict[str, dict[int, Any]] = {}
    whole = set()
    for key in SECTIONS:
        tables = data.get(key, [])
        field = next(info for info in StudyConfig.model_fields.values() if info.alias == key)
        element_type: TypeAdapter[Any] = TypeAdapter(field.annotation or Any)
        sound[key] = {}
        for i, table in enumerate(tables if isinstance(tables, list) else []):
            if (element := _sound(element_type, [table])) is not None:
                sound[key][i] = element[0]
        if isinstance(tables, list) and len(sound[key]) == len(tables):
            whole.add(key)
    named = [table.get("component") for key in COMPONENTS for table in _list_of_tables(data.get(key))]
    single = {
        name: _sound(TypeAdapter(StudyConfig.model_fields[name].rebuild_annotation()), data.get(name, {}))
        for name in ("selection", "detector", "form_factors", "fit", "wilson")
    }
    single["experiment"] = _sound(TypeAdapter(Experiment), data.get("experiment", {}))
    single["fractions"] = _sound(TypeAdapter(BranchingFractionTables), data.get("branching_fractions", {}))
    single["quadratic"] = _sound(TypeAdapter(Quadratic), data["quadratic"]) if "quadratic" in data else None
    return Sections(
        modes=sound["mode"],
        double_charms=sound["double_charm"],
        backgrounds=sound["background"],
        category_tables=sound["category"],
        variations=sound["variation"],
        whole=frozenset(whole),
        components=frozenset(name for name in named if isinstance(name, str)),
        folder=folder,
        **single,
    )


def _sound(adapter: TypeAdapter[Any], data: object) -> Any:
    try:
        return adapter.validate_python(data)
    except ValidationError:
        return None


def _list_of_tables(data: object) -> list[Mapping[str, Any]]:
    return [table for table in data if isinstance(table, Mapping)] if isinstance(data, list) else []
