"""Changes applied to the tables of a study file, and where each changed key came from."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any

from .rules import shown, suggestion
from .sections import Conflict, Place

NAMES = ("component", "name")
"""Keys that name an element of an array of tables."""

ARRAYS = {("mode",), ("double_charm",), ("background",), ("variation",), ("import", "component")}
"""Arrays of tables that are addressed by name even where the study has none."""

TAGS = ("law", "kind")
"""Keys that say what kind of table it is: another kind has other keys."""


@dataclass
class Changes:
    """Tables with changes.

    tables : the changed ones; those that were given stay as they are.
    origins : place in `tables` -> place of the change in the file, for every value that was set.
    conflicts : changes that lead nowhere.
    """

    tables: dict[str, Any]
    origins: dict[Place, Place] = field(default_factory=dict)
    conflicts: list[Conflict] = field(default_factory=list)

    def origin(self, place: Place) -> Place | None:
        """Where in the file a place of the changed tables was set; one of the changes below it if it was not itself."""
        for length in range(len(place), 0, -1):
            if (found := self.origins.get(place[:length])) is not None:
                return (*found, *place[length:])
        return next((found for at, found in self.origins.items() if at[: len(place)] == place), None)


def changed_tables(tables: Mapping[str, Any], change: Mapping[str, Any], place: Place) -> Changes:
    """Tables of a study file with changes. place : of `change` in the file."""
    changes = Changes({})
    changes.tables = _changed(tables, change, (), place, changes)
    return changes


def _changed(
    table: Mapping[str, Any], change: Mapping[str, Any], at: Place, place: Place, changes: Changes
) -> dict[str, Any]:
    new = dict(table)
    for key, value in change.items():
        here, there = (*at, key), (*place, key)
        old = table.get(key)
        if isinstance(value, Mapping) and (here in ARRAYS or _is_array(old)):
            new[key] = _elements(old if isinstance(old, list) else [], value, here, there, changes)
        elif isinstance(value, Mapping) and (isinstance(old, Mapping) or old is None) and _same_kind(old or {}, value):
            new[key] = _changed(old or {}, value, here, there, changes)
        else:
            new[key] = value
            changes.origins[here] = there
    return new


def _elements(
    elements: list[Any], change: Mapping[str, Any], at: Place, place: Place, changes: Changes
) -> list[dict[str, Any]]:
    """An array of tables, some of whose elements change. change : name -> table."""
    new = list(elements)
    names = [_name(element) for element in elements]
    for name, value in change.items():
        there = (*place, name)
        if name not in names:
            known = [known for known in names if known]
            what = f"names no {' '.join(str(part) for part in at)}"
            changes.conflicts.append(
                Conflict(there, what, shown(name), ", ".join(known) or "none", suggestion(name, known))
            )
        elif not isinstance(value, Mapping):
            remedy = f"Write {name} = {{ key = value }}."
            changes.conflicts.append(Conflict(there, "must be a table", shown(value), remedy=remedy))
        else:
            index = names.index(name)
            old, here = elements[index], (*at, index)
            if _same_kind(old, value):
                new[index] = _changed(old, value, here, there, changes)
            else:
                kept = {key: old[key] for key in NAMES if key in old}
                new[index] = kept | dict(value)
                changes.origins[here] = there
    return new


def _is_array(value: object) -> bool:
    return isinstance(value, list) and bool(value) and all(isinstance(element, Mapping) for element in value)


def _name(element: object) -> str:
    found = [element[key] for key in NAMES if key in element] if isinstance(element, Mapping) else []
    return str(found[0]) if found else ""


def _same_kind(old: Mapping[str, Any], new: Mapping[str, Any]) -> bool:
    return all(key not in new or key not in old or new[key] == old[key] for key in TAGS)
