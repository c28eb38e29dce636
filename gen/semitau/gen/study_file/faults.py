"""From what the models reject to problems in words: what is wrong, what was found, what is allowed, what to do."""

from __future__ import annotations

import types
import typing
from collections.abc import Mapping, Sequence
from typing import Annotated, Any, NamedTuple, get_args, get_origin

from pydantic import BaseModel
from pydantic.fields import FieldInfo
from pydantic_core import ErrorDetails

from .rules import RULE, shown, suggestion
from .sections import Conflict, Place

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
    place, value, annotation = _spot(model, data, error["loc"])
    context: Mapping[str, Any] = error.get("ctx") or {}
    kind = error["type"]
    if kind == RULE:
        got = shown(value) if context["got"] is None else context["got"]
        return Conflict(place, context["what"], got, context["wanted"], context["remedy"])
    if kind == "extra_forbidden":
        keys = list(_fields(_spot(model, data, error["loc"][:-1]).annotation))
        return Conflict(place, "unknown key", "", ", ".join(keys), suggestion(place[-1], keys))
    if kind == "missing":
        return _missing(place, _spot(model, data, error["loc"][:-1]).annotation)
    if kind in ("union_tag_not_found", "union_tag_invalid"):
        key = str(context["discriminator"]).strip("'")
        tags = _tags(annotation, key)
        if kind == "union_tag_not_found":
            if not isinstance(value, Mapping):
                return Conflict(place, "must be a table", shown(value), remedy=f"Write {{ {key} = ..., ... }}.")
            return Conflict(place, f"lacks the key {key}", "", ", ".join(tags))
        given = value[key] if isinstance(value, Mapping) and key in value else context.get("tag")
        return Conflict((*place, key), f"is no {key}", shown(given), ", ".join(tags), suggestion(given, tags))
    if kind == "literal_error":
        allowed = _words(annotation)
        near = suggestion(value, allowed)
        return Conflict(place, "is not known here", shown(value), ", ".join(allowed), near)
    if kind in ("too_short", "too_long"):
        return _length(place, value, context)
    if kind in _LIMITS:
        return Conflict(place, _LIMITS[kind][0].format(**context), shown(value))
    return Conflict(place, _TYPES.get(kind, error["msg"]), shown(value), remedy=_other_brackets(place, value, kind))


def _other_brackets(place: Place, value: object, kind: str) -> str:
    """Advice where a list stands for a single thing, or the other way round."""
    header = ".".join(str(part) for part in place if isinstance(part, str))
    if kind == "tuple_type" and isinstance(value, str):
        return f"Write [{shown(value)}]."
    if kind == "tuple_type" and isinstance(value, Mapping):
        return f"Write [[{header}]] instead of [{header}]."
    if _TYPES.get(kind) == "must be a table" and isinstance(value, list) and value and isinstance(value[0], Mapping):
        return f"Write [{header}] instead of [[{header}]]."
    return ""


def _missing(place: Place, table: Any) -> Conflict:
    key = place[-1]
    if isinstance(key, int):
        return Conflict(place[:-1], "has too few values", str(key))
    info = _fields(table).get(key)
    meaning = f": {info.description}" if info and info.description else ""
    return Conflict(place[:-1], f"lacks the key {key}", remedy=f"Add {key}{meaning}.")


def _length(place: Place, value: object, context: Mapping[str, Any]) -> Conflict:
    length = len(value) if isinstance(value, Sequence | Mapping) else context.get("actual_length")
    if "min_length" in context:
        return Conflict(place, f"needs at least {context['min_length']}", str(length))
    return Conflict(place, f"takes at most {context['max_length']}", str(length))


class _Spot(NamedTuple):
    """Where an error is: place in the file, value found there, type that the models give to it (None if unclear)."""

    place: Place
    value: object
    annotation: Any


def _spot(model: type[BaseModel], data: object, loc: Sequence[str | int]) -> _Spot:
    """The spot of `loc`, which has more parts than the file: tags of unions, and "[key]" after a key that is wrong."""
    place: Place = ()
    annotation: Any = model
    for i, part in enumerate(loc):
        annotation = _bare(annotation)
        origin = get_origin(annotation)
        if origin in (typing.Union, types.UnionType):
            annotation = _chosen(annotation, part)
            continue
        if origin is dict and loc[i + 1 :] == ("[key]",):
            return _Spot((*place, part), part, _bare(get_args(annotation)[0]))
        if not (isinstance(data, list | tuple) and isinstance(part, str)):  # a table that was written as a list
            place += (part,)
            data = _within(data, part)
        if isinstance(annotation, type) and issubclass(annotation, BaseModel):
            info = _fields(annotation).get(str(part))
            annotation = info.annotation if info else None
        elif origin is tuple:
            annotation = get_args(annotation)[0]
        elif origin is dict:
            annotation = get_args(annotation)[1]
        else:
            annotation = None
    return _Spot(place, data, _bare(annotation))


def _within(data: object, part: str | int) -> object:
    if isinstance(data, Mapping):
        return data.get(part)
    if isinstance(data, Sequence) and isinstance(part, int) and part < len(data):
        return data[part]
    return None


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


def _fields(table: Any) -> dict[str, FieldInfo]:
    """Fields of a model by their name in the file; none for anything else."""
    if isinstance(table, type) and issubclass(table, BaseModel):
        return {info.alias or name: info for name, info in table.model_fields.items()}
    return {}


def _words(annotation: Any) -> list[str]:
    return [str(word) for word in get_args(annotation)] if get_origin(annotation) is typing.Literal else []


def _tags(union: Any, key: str) -> list[str]:
    return [word for member in get_args(union) for word in _words(member.model_fields[key].annotation)]
