"""From what the models reject to problems in words: what is wrong, what was found, what is allowed, what to do."""

from __future__ import annotations

import types
import typing
from collections.abc import Mapping, Sequence
from typing import Annotated, Any, get_args, get_origin

from pydantic import BaseModel
from pydantic_core import ErrorDetails

from .study_rules import RULE, shown, suggestion
from .study_sections import Conflict, Place

_TYPES = {
    "float_type": "must be a number",
    "float_parsing": "must be a number",
    "int_type": "must be a whole number",
    "int_parsing": "must be a whole number",
    "int_parsing_size": "is too large",
    "int_from_float": "must be a whole number",
    "bool_type": "must be true or false",
    "string_type": "must be a text in quotation marks",
    "finite_number": "must be finite",
    "tuple_type": "must be a list",
    "dict_type": "must be a table",
    "model_type": "must be a table",
    "model_attributes_type": "must be a table",
    "string_too_short": "must not be empty",
}
_LIMITS = {
    "greater_than": ("must be above {gt:g}", "gt"),
    "greater_than_equal": ("must not be below {ge:g}", "ge"),
    "less_than": ("must be below {lt:g}", "lt"),
    "less_than_equal": ("must not be above {le:g}", "le"),
}


def conflict(model: type[BaseModel], data: object, error: ErrorDetails) -> Conflict:
    """One error of pydantic, told in the words of study files.

    model : the model that rejected `data`; error : as from ValidationError.errors().
    """
    place, value = _in_file(data, error["loc"])
    context: Mapping[str, Any] = error.get("ctx") or {}
    kind = error["type"]
    if kind == RULE:
        got = shown(value) if context["got"] is None else context["got"]
        return Conflict(place, context["what"], got, context["wanted"], context["remedy"])
    if kind == "extra_forbidden":
        table = place[:-1]
        keys = _keys(_annotation(model, error["loc"][:-1]))
        return Conflict((*table, place[-1]), "unknown key", "", ", ".join(keys), suggestion(place[-1], keys))
    if kind == "missing":
        return _missing(model, place, error["loc"])
    if kind in ("union_tag_not_found", "union_tag_invalid"):
        key = str(context["discriminator"]).strip("'")
        tags = _tags(_annotation(model, error["loc"]), key)
        if kind == "union_tag_not_found":
            if not isinstance(value, Mapping):
                return Conflict(place, "must be a table", shown(value), remedy=f"Write {{ {key} = ..., ... }}.")
            return Conflict(place, f"lacks the key {key}", "", ", ".join(tags))
        given = value[key] if isinstance(value, Mapping) and key in value else context.get("tag")
        return Conflict((*place, key), f"is no {key}", shown(given), ", ".join(tags), suggestion(given, tags))
    if kind == "literal_error":
        allowed = _words(_annotation(model, error["loc"]))
        near = suggestion(value, allowed)
        return Conflict(place, "is not known here", shown(value), ", ".join(allowed), near)
    if kind in ("too_short", "too_long"):
        return _length(place, value, context)
    if kind in _LIMITS:
        return Conflict(place, _LIMITS[kind][0].format(**context), shown(value))
    if kind == "tuple_type" and isinstance(value, str):
        return Conflict(place, "must be a list", shown(value), remedy=f"Write [{shown(value)}].")
    return Conflict(place, _TYPES.get(kind, error["msg"]), shown(value))


def _missing(model: type[BaseModel], place: Place, loc: Sequence[str | int]) -> Conflict:
    key = loc[-1]
    if isinstance(key, int):
        return Conflict(place[:-1] if place and place[-1] == key else place, "has too few values", f"{key}")
    description = ""
    table = _annotation(model, loc[:-1])
    if isinstance(table, type) and issubclass(table, BaseModel):
        fields = {info.alias or name: info for name, info in table.model_fields.items()}
        description = (fields[key].description or "") if key in fields else ""
    return Conflict(place[:-1], f"lacks the key {key}", remedy=f"Add {key}{f': {description}' if description else ''}.")


def _length(place: Place, value: object, context: Mapping[str, Any]) -> Conflict:
    length = len(value) if isinstance(value, Sequence | Mapping) else context.get("actual_length")
    if "min_length" in context:
        return Conflict(place, f"needs at least {context['min_length']}", str(length))
    return Conflict(place, f"takes at most {context['max_length']}", str(length))


def _in_file(data: object, loc: Sequence[str | int]) -> tuple[Place, object]:
    """Place in the file and value there: `loc` without what pydantic adds (tags of unions, "[key]")."""
    place: list[str | int] = []
    for i, part in enumerate(loc):
        last = i == len(loc) - 1
        if isinstance(data, Mapping):
            if part in data:
                data = data[part]
            elif not last or part == "[key]" or part in data.values():
                continue  # the tag of a union
            else:
                return (*place, part), None
        elif isinstance(data, Sequence) and not isinstance(data, str) and isinstance(part, int):
            if part >= len(data):
                return (*place, part), None
            data = data[part]
        else:
            continue
        place.append(part)
    return tuple(place), data


def _annotation(annotation: Any, loc: Sequence[str | int]) -> Any:
    """The type that the models give to what stands at `loc`; None if it cannot be told."""
    annotation = _bare(annotation)
    for part in loc:
        if part == "[key]":
            continue
        origin = get_origin(annotation)
        if isinstance(annotation, type) and issubclass(annotation, BaseModel):
            fields = {info.alias or name: info for name, info in annotation.model_fields.items()}
            if part not in fields:
                return None
            annotation = fields[str(part)].annotation
        elif origin is tuple:
            annotation = get_args(annotation)[0]
        elif origin is dict:
            annotation = get_args(annotation)[1]
        elif origin in (typing.Union, types.UnionType):
            annotation = _chosen(annotation, part)
        else:
            return None
        annotation = _bare(annotation)
    return annotation


def _chosen(union: Any, tag: str | int) -> Any:
    for member in get_args(union):
        for info in getattr(member, "model_fields", {}).values():
            if get_origin(info.annotation) is typing.Literal and get_args(info.annotation) == (tag,):
                return member
    return None


def _bare(annotation: Any) -> Any:
    """Without Annotated, and without an optional None."""
    while True:
        if get_origin(annotation) is Annotated:
            annotation = get_args(annotation)[0]
        elif get_origin(annotation) in (typing.Union, types.UnionType) and type(None) in get_args(annotation):
            rest = [member for member in get_args(annotation) if member is not type(None)]
            if len(rest) != 1:
                return annotation
            annotation = rest[0]
        else:
            return annotation


def _keys(table: Any) -> list[str]:
    if isinstance(table, type) and issubclass(table, BaseModel):
        return [info.alias or name for name, info in table.model_fields.items()]
    return []


def _words(annotation: Any) -> list[str]:
    return [str(word) for word in get_args(annotation)] if get_origin(annotation) is typing.Literal else []


def _tags(union: Any, key: str) -> list[str]:
    return [word for member in get_args(union) for word in _words(member.model_fields[key].annotation)]
