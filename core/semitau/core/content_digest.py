"""Digests of what values hold, so that equal contents have equal keys, whatever file or process they come from."""

from __future__ import annotations

import hashlib
from collections.abc import Mapping, Sequence
from collections.abc import Set as AnySet
from dataclasses import fields, is_dataclass
from functools import cache
from typing import Any

import numpy as np

_PLAIN = (bool, int, float, complex, np.generic)


def content_digest(*values: object) -> str:
    """SHA-256, hexadecimal, of everything in the values: kinds, names, order and every bit of every number.

    Values are None, booleans, numbers, text, bytes, numpy arrays and numbers, and mappings, sequences, sets,
    dataclasses and named tuples of them. The order of a mapping counts. Two values that differ in any of this have
    different digests (but for a collision of SHA-256).

    Raises TypeError for anything else, e.g. a function: its contents cannot be seen, and a guess could be wrong.
    """
    digest = hashlib.sha256()
    _feed(digest, values)
    return digest.hexdigest()


def _feed(digest: Any, value: object) -> None:
    """Each part with its kind and length in front, which keeps neighbours apart: ("ab", "c") is not ("a", "bc")."""
    kind = type(value)
    if kind is str:
        _add(digest, "str", value.encode())  # type: ignore[attr-defined]
    elif value is None or isinstance(value, _PLAIN):
        _add(digest, kind.__qualname__, repr(value).encode())
    elif isinstance(value, bytes):
        _add(digest, "bytes", value)
    elif isinstance(value, np.ndarray):
        if value.dtype.hasobject or value.dtype.names is not None:
            raise TypeError("an array of objects or of records has no digest")  # its `str` does not tell the fields
        _add(digest, f"array {value.dtype.str} {value.shape}", np.ascontiguousarray(value).tobytes())
    elif is_dataclass(value) and not isinstance(value, type):
        names = _names(kind)  # type: ignore[arg-type]
        _add(digest, kind.__qualname__, " ".join(names).encode())
        for name in names:
            _feed(digest, getattr(value, name))
    elif isinstance(value, Mapping):
        _add(digest, "mapping", b"%d" % len(value))
        for key, item in value.items():
            _feed(digest, key)
            _feed(digest, item)
    elif isinstance(value, AnySet):
        _add(digest, "set", " ".join(sorted(content_digest(item) for item in value)).encode())
    elif isinstance(value, str):
        _add(digest, "str", str(value).encode())
    elif isinstance(value, Sequence):
        if kind is tuple and set(map(type, value)) == {float}:
            # Most of what there is: form factors with their correlations.
            _add(digest, "floats", np.array(value).tobytes())
            return
        fields_of_tuple = getattr(value, "_fields", None)
        names = ("sequence",) if fields_of_tuple is None else (kind.__qualname__, *fields_of_tuple)
        _add(digest, " ".join(names), b"%d" % len(value))
        for item in value:
            _feed(digest, item)
    else:
        raise TypeError(f"{kind.__name__} has no digest")


def _add(digest: Any, kind: str, content: bytes) -> None:
    digest.update(b"%s %d:" % (kind.encode(), len(content)))
    digest.update(content)


@cache
def _names(kind: type) -> tuple[str, ...]:
    return tuple(field.name for field in fields(kind))
