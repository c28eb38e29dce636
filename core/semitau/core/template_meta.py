"""The description inside a template file: JSON that says what its histograms are."""

from __future__ import annotations

import json
from collections.abc import Callable, Iterable
from dataclasses import asdict, dataclass
from typing import Any, Literal, TypeVar

from pydantic import BaseModel, ConfigDict, Field, FiniteFloat, ValidationError

from .errors import InputError, Problem
from .templates import Category, Coefficient, Component, Nuisance, Observable, ScaleParameter, TemplateSet

FORMAT = "semitau templates"
MAJOR, MINOR = 1, 0
"""A reader refuses another major version. A higher minor one only adds keys, which an older reader passes over."""

WITH_COEFFICIENTS = 1
"""Minor version of files with quadratic pieces, which a reader of 1.0 would not know; files without stay 1.0."""

WITH_SHAPES = 2
"""Minor version of files with coefficients that change shapes alone."""

S = TypeVar("S")
T = TypeVar("T")


class _Part(BaseModel):
    model_config = ConfigDict(strict=True, frozen=True)


class _Observable(_Part):
    name: str
    label: str
    unit: str
    edges: list[FiniteFloat]


class _Category(_Part):
    name: str
    label: str
    observables: list[_Observable]


class _Component(_Part):
    name: str
    label: str
    role: str
    scales_with: list[str]
    rate: list[tuple[str, str, FiniteFloat]] = Field(default_factory=list)


class _Parameter(_Part):
    name: str
    label: str
    kind: str
    injected: FiniteFloat
    constraint: FiniteFloat | None = None
    rate: list[tuple[str, str, FiniteFloat]] = Field(default_factory=list)
    over: list[tuple[str, str, FiniteFloat]] = Field(default_factory=list)


class _Coefficient(_Part):
    name: str
    label: str
    value: FiniteFloat
    limit: FiniteFloat
    kind: str = "coupling"
    constraint: FiniteFloat | None = None
    group: str = ""


class _Nuisance(_Part):
    name: str
    label: str
    group: str
    constraint: Literal["unit Gaussian"]


class _Meta(_Part):
    format: Literal["semitau templates"]
    version: str
    categories: list[_Category]
    components: list[_Component]
    parameters: list[_Parameter]
    nuisances: list[_Nuisance]
    provenance: dict[str, Any] = Field(default_factory=dict)
    coefficients: list[_Coefficient] = Field(default_factory=list)


@dataclass(frozen=True)
class Description:
    """A template set without its numbers."""

    categories: tuple[Category, ...]
    components: tuple[Component, ...]
    parameters: tuple[ScaleParameter, ...]
    nuisances: tuple[Nuisance, ...]
    provenance: dict[str, object]
    coefficients: tuple[Coefficient, ...] = ()


def describe(templates: TemplateSet) -> str:
    """The JSON text of a template set. Raises InputError if the provenance holds other than plain JSON values."""
    meta: dict[str, object] = {
        "format": FORMAT,
        "version": f"{MAJOR}.{_minor(templates)}",
        "categories": [asdict(category) for category in templates.categories],
        "components": [_without_empty(asdict(component), "rate") for component in templates.components],
        "parameters": [_without_empty(asdict(parameter), "rate", "over") for parameter in templates.parameters],
        "nuisances": [asdict(nuisance) | {"constraint": "unit Gaussian"} for nuisance in templates.nuisances],
        "provenance": dict(templates.provenance),
    }
    if templates.coefficients:
        meta["coefficients"] = [_coefficient(coefficient) for coefficient in templates.coefficients]
    try:
        return json.dumps(meta, allow_nan=False)
    except (TypeError, ValueError) as error:
        raise InputError(
            Problem(
                f"the provenance cannot be stored: {error}", wanted="text, finite numbers, lists and tables of these"
            )
        ) from error


def _minor(templates: TemplateSet) -> int:
    if any(coefficient.kind == "shape" for coefficient in templates.coefficients):
        return WITH_SHAPES
    return WITH_COEFFICIENTS if templates.coefficients else MINOR


def _coefficient(coefficient: Coefficient) -> dict[str, object]:
    """Of a coupling what version 1.1 knows."""
    table = _without_empty(asdict(coefficient), "constraint", "group")
    return {name: value for name, value in table.items() if (name, value) != ("kind", "coupling")}


def _without_empty(table: dict[str, object], *keys: str) -> dict[str, object]:
    return {name: value for name, value in table.items() if name not in keys or value}


def understand(text: str, where: str) -> Description:
    """Read the JSON text of a template file; `where` goes into messages. Raises InputError with every problem."""
    _check_version(text, where)
    try:
        meta = _Meta.model_validate_json(text)
    except ValidationError as error:
        raise InputError(*(_translated(detail, where) for detail in error.errors(include_url=False))) from None
    problems: list[Problem] = []
    categories = _made(meta.categories, _category, where, problems)
    components = _made(
        meta.components,
        lambda c: Component(c.name, c.label, c.role, tuple(c.scales_with), tuple(c.rate)),
        where,
        problems,
    )
    parameters = _made(
        meta.parameters,
        lambda p: ScaleParameter(**(p.model_dump() | {"rate": tuple(p.rate), "over": tuple(p.over)})),
        where,
        problems,
    )
    coefficients = _made(meta.coefficients, lambda c: Coefficient(**c.model_dump()), where, problems)
    nuisances = _made(meta.nuisances, lambda n: Nuisance(n.name, n.label, n.group), where, problems)
    if problems:
        raise InputError(*problems)
    return Description(categories, components, parameters, nuisances, meta.provenance, coefficients)


def _check_version(text: str, where: str) -> None:
    try:
        found = json.loads(text)
    except (ValueError, RecursionError) as error:
        raise InputError(Problem(f"not JSON: {error}", where, remedy="Make the template file again.")) from None
    if not isinstance(found, dict) or found.get("format") != FORMAT:
        got = repr(found.get("format")) if isinstance(found, dict) else type(found).__name__
        raise InputError(
            Problem("not the description of a template file", where, f"format {got}", f"format {FORMAT!r}")
        )
    version = found.get("version")
    major = version.split(".")[0] if isinstance(version, str) else ""
    if major != str(MAJOR):
        raise InputError(
            Problem(
                "unknown version of the template file",
                where,
                got=repr(version),
                wanted=f"{MAJOR}.x",
                remedy="Read it with a semitau of that version, or build the templates again with this one.",
            )
        )


def _translated(detail: Any, where: str) -> Problem:
    key = "".join(f"[{part}]" if isinstance(part, int) else f".{part}" for part in detail["loc"])
    got = "" if detail["type"] == "missing" else repr(detail["input"])
    message = detail["msg"]
    return Problem(message[0].lower() + message[1:], f"{where}{key}", got=got if len(got) <= 60 else got[:57] + "...")


def _category(category: _Category) -> Category:
    observables = tuple(Observable(o.name, o.label, o.unit, tuple(o.edges)) for o in category.observables)
    return Category(category.name, category.label, observables)


def _made(sources: Iterable[S], make: Callable[[S], T], where: str, problems: list[Problem]) -> tuple[T, ...]:
    """Make each, and gather the problems of those that cannot be made."""
    made = []
    for source in sources:
        try:
            made.append(make(source))
        except InputError as error:
            problems += [problem.inside(where) for problem in error.problems]
    return tuple(made)
