"""The alternatives of a study as studies of their own, each validated whole."""

from __future__ import annotations

import tomllib
from collections.abc import Collection, Iterator, Mapping
from pathlib import Path
from typing import Any

from semitau.core.errors import InputError, Problem

from .alternatives import Alternative
from .changes import NAMES, Changes, changed_tables
from .checking import checked_alone
from .idle_variations import nuisance_names
from .parameter_names import PARENT_SUFFIX, ParameterNames, parameter_names
from .places import key_of
from .quadratic_conflicts import sound_shifts
from .rules import shown, suggestion
from .sections import Conflict, Place
from .study import StudyConfig

CHANGEABLE = (
    "experiment", "form_factors", "branching_fractions", "wilson", "radiation", "mode", "double_charm", "background",
    "detector", "selection", "variation", "fit", "import",
)  # fmt: skip
"""Tables of the study file that an alternative may change."""

_FIELDS = {(info.alias or name): name for name, info in StudyConfig.model_fields.items()}

_REFUSED = {
    "category": "changes the binning: all fits need the same categories and bins",
    "study": "is kept by every alternative: common random numbers need the same seed",
    "quadratic": "changes the parameters of the fit",
}


def alternative_studies(study: StudyConfig) -> dict[str, StudyConfig]:
    """Name of each alternative -> the study with its changes, with the seed of `study`, without alternatives.

    Raises InputError if the study was not read from a file, or if files that it names have changed since and no longer
    fit.
    """
    if not study.alternatives:
        return {}
    if not study.text:
        raise InputError(Problem("alternatives need a study that was read from a file", "alternative"))
    data, folder = tomllib.loads(study.text), study.path.parent
    found: dict[str, StudyConfig] = {}
    for index, alternative in enumerate(study.alternatives):
        changed, conflicts = checked_alone(_changes(data, alternative, index).tables, folder)
        if changed is None:
            where = f"{study.path}: alternative[{alternative.name}]"
            raise InputError(*(Problem(c.what, where, c.got, c.wanted, c.remedy) for c in conflicts))
        same_seed = changed.model_copy(update={"study": study.study})
        found[alternative.name] = same_seed.read_from(study.path, "")
    return found


def alternative_changes(study: StudyConfig, alternative: Alternative) -> list[tuple[str, str, str]]:
    """Key, value in the study ("" if the file has none) and value in the alternative, as the file writes them."""
    data = tomllib.loads(study.text)
    changes = _changes(data, alternative, 0)
    return [(key_of(at, data), _shown_at(data, at), _shown_at(changes.tables, at)) for at in changes.origins]


def _changes(data: Mapping[str, Any], alternative: Alternative, index: int) -> Changes:
    alone = {key: value for key, value in data.items() if key not in ("alternative", "bias")}
    return changed_tables(alone, alternative.change, ("alternative", index, "change"))


def _shown_at(data: Any, place: Place) -> str:
    for part in place:
        if isinstance(part, str):
            data = data.get(part) if isinstance(data, Mapping) else None
        else:
            data = data[part] if isinstance(data, list) and part < len(data) else None
    return "" if data is None else shown(data)


def alternative_conflicts(study: StudyConfig, data: Mapping[str, Any], folder: Path) -> list[Conflict]:
    """Everything that is wrong with the alternatives of a study that is sound without them.

    data : tables of its file. folder : where files that it names are looked for.
    """
    found: list[Conflict] = []
    seen: set[str] = set()
    if not study.alternatives and "bias" in data:
        remedy = "Add an [[alternative]], or remove the table."
        found.append(Conflict(("bias",), "acts on nothing: there is no alternative", remedy=remedy))
    for index, alternative in enumerate(study.alternatives):
        if alternative.name in seen:
            what = "names an alternative that there is already"
            found.append(Conflict(("alternative", index, "name"), what, alternative.name, remedy="Rename one of them."))
        seen.add(alternative.name)
        found += _of_coverings(study, folder, alternative, index)
        found += _of_one(study, data, folder, alternative, index)
    return found


def _of_one(
    study: StudyConfig, data: Mapping[str, Any], folder: Path, alternative: Alternative, index: int
) -> Iterator[Conflict]:
    place: Place = ("alternative", index, "change")
    unfit = [key for key in alternative.change if key not in CHANGEABLE]
    for key in unfit:
        known = key in _FIELDS
        what = _REFUSED.get(key, "may not be changed by an alternative") if known else "unknown key"
        remedy = "" if known else suggestion(key, CHANGEABLE)
        yield Conflict((*place, key), what, "", ", ".join(CHANGEABLE), remedy)
    changes = _changes(data, alternative, index)
    yield from changes.conflicts
    if unfit or changes.conflicts:
        return
    changed, conflicts = checked_alone(changes.tables, folder)
    for conflict in conflicts:
        yield _placed(conflict, changes, place)
    if changed is not None:
        yield from _of_another_fit(study, changed, changes, place, folder)


def _placed(conflict: Conflict, changes: Changes, place: Place) -> Conflict:
    """A conflict of the changed study where the change is that brought it about."""
    origin = changes.origin(conflict.place) or place
    if any(conflict.place[:length] in changes.origins for length in range(1, len(conflict.place) + 1)):
        return conflict._replace(place=origin)
    what = f"{key_of(conflict.place, changes.tables)} {conflict.what}"
    remedy = conflict.remedy or "Change that in the alternative as well."
    return conflict._replace(place=origin, what=what, remedy=remedy)


def _of_another_fit(
    study: StudyConfig, changed: StudyConfig, changes: Changes, place: Place, folder: Path
) -> Iterator[Conflict]:
    """What makes fits that cannot be compared, or no difference at all."""
    for what, key, before, after in (
        ("components", "mode", _component_names(study), _component_names(changed)),
        ("parameters of the fit", "fit", _parameters(study, folder), _parameters(changed, folder)),
    ):
        if before != after:
            got = ", ".join(sorted(set(before) ^ set(after))) or "another order"
            remedy = "Fits of one study to another need the same: change values, not names."
            renamed = next((origin for at, origin in changes.origins.items() if at[-1] in NAMES), None)
            where = renamed or changes.origin((key,)) or place
            yield Conflict(where, f"changes the {what}", got, remedy=remedy)
            return
    if _contents(changed) == _contents(study):
        yield Conflict(place, "changes nothing: every value is that of the study already")


def _contents(study: StudyConfig) -> dict[str, Any]:
    """What alternatives may change; the data of the study's own fit play no part in expected sets and toys."""
    contents = {key: getattr(study, _FIELDS[key]) for key in CHANGEABLE}
    return contents | {"fit": study.fit.model_copy(update={"data": None})}


def _component_names(study: StudyConfig) -> list[str]:
    imported = study.imports.components if study.imports is not None else ()
    return [item.name for item in (*study.components, *imported)]


def _names(study: StudyConfig, folder: Path) -> ParameterNames:
    sections = study.sections(folder=folder)
    return parameter_names(
        study, [name for table in study.variation_tables for name in nuisance_names(sections, table)]
    )


def _parameters(study: StudyConfig, folder: Path) -> list[str]:
    names = _names(study, folder)
    return [*names.ratios, *names.yields, *study.fit.coefficients, *names.nuisances]


def _of_coverings(study: StudyConfig, folder: Path, alternative: Alternative, index: int) -> Iterator[Conflict]:
    if alternative.covered_by is None:
        return
    known = _coverings(study, folder)
    for k, name in enumerate(alternative.covered_by):
        if name not in known:
            place: Place = ("alternative", index, "covered_by", k)
            what = "is no variation, group of variations or constrained yield"
            yield Conflict(place, what, shown(name), ", ".join(known), suggestion(name, known))


def _coverings(study: StudyConfig, folder: Path) -> Collection[str]:
    """What may be meant to cover an alternative: groups, variations, constrained yields and ratios."""
    names, fit = _names(study, folder), study.fit
    imported = study.imports.components if study.imports is not None else ()
    groups = [table.budget_group for table in study.variation_tables]
    groups += [sides.group for item in imported for sides in item.variations]
    shifts = [one for one in sound_shifts(study.sections(folder=folder)) if one.name in fit.coefficients]
    groups += [one.group for one in shifts if one.constraint is not None]
    known = [f"yield_{item.name}" for item in (*study.components, *imported) if item.yield_constraint.uncertainty]
    known += [f"{name}{suffix}" for name in known for suffix in PARENT_SUFFIX.values()]
    known += [name for name, constraint in fit.constraints.items() if constraint.kind == "law"]
    known += [name for block in fit.correlated for name in block.parameters]
    scales = [name for name in (*names.ratios, *names.yields) if name in known]
    rows = [row for row, of in (("yields", names.yields), ("ratios", names.ratios)) if set(scales) & set(of)]
    moved = [one.name for one in shifts]
    return list(dict.fromkeys([*groups, *rows, *names.variations, *names.nuisances, *moved, *scales]))
