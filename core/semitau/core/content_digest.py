"""Digests of what values hold, so that equal contents have equal keys, whatever file or process they come from."""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping, Sequence
from collections.abc import Set as AnySet
from dataclasses import fields, is_dataclass

import numpy as np


def content_digest(*values: object) -> str:
    """SHA-256, hexadecimal, of everything in the values: kinds, names, order and every bit of every number.

    Values are None, booleans, numbers, text, bytes, numpy arrays and numbers, and mappings, sequences, sets,
    dataclasses and named tuples of them. The order of a mapping counts. Two values that differ in any of this have
    different digests (but for a collision of SHA-256).

    Raises TypeError for anything else, e.g. a function: its contents cannot be seen, and a guess could be wrong.
    """
    digest = hashlib.sha256()
    for part in _parts(values):
        # The length in front keeps neighbours apart: ("ab", "c") is not ("a", "bc").
        digest.update(b"%d:" % len(part))
        digest.update(part)
    return digest.hexdigest()


def _parts(value: object) -> Iterator[bytes]:
    kind = type(value).__qualname__
    if value is None or isinstance(value, bool | int | float | complex | np.generic):
        yield f"{kind} {value!r}".encode()
    elif isinstance(value, str):
        yield f"str {value}".encode()
    elif isinstance(value, bytes):
        yield b"bytes " + value
    elif isinstance(value, np.ndarray):
        if value.dtype.hasobject:
            raise TypeError("an array of objects has no digest")
        yield f"array {value.dtype.str} {value.shape}".encode()
        yield np.ascontiguousarray(value).tobytes()
    elif is_dataclass(value) and not isinstance(value, type):
        names = tuple(field.name for field in fields(value))
        yield f"{kind} {len(names)}".encode()
        for name in names:
            yield name.encode()
            yield from _parts(getattr(value, name))
    elif isinstance(value, Mapping):
        yield f"mapping {len(value)}".encode()
        for key, item in value.items():
            yield from _parts(key)
            yield from _parts(item)
    elif isinstance(value, AnySet):
        members = sorted(content_digest(item) for item in value)
        yield f"set {' '.join(members)}".encode()
    elif isinstance(value, Sequence):
        names = tuple(getattr(value, "_fields", ()))
        yield f"{kind if names else 'sequence'} {len(value)} {' '.join(names)}".encode()
        for item in value:
            yield from _parts(item)
    else:
        raise TypeError(f"{type(value).__name__} has no digest")
