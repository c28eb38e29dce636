"""Digests of contents: equal for equal contents only. SHA-256 itself is taken for granted (FIPS 180-4)."""

from __future__ import annotations

import itertools
import math
import subprocess
import sys
from dataclasses import dataclass
from types import MappingProxyType
from typing import NamedTuple

import numpy as np
import pytest
from semitau.core.content_digest import content_digest


@dataclass(frozen=True)
class Point:
    x: float
    y: float


@dataclass(frozen=True)
class Spot:
    x: float
    y: float


class Pair(NamedTuple):
    x: float
    y: float


class Couple(NamedTuple):
    x: float
    z: float


DIFFERENT: list[object] = [
    None, True, 1, 1.0, 1 + 0j, "1", b"1", np.float64(1.0), np.int64(1), np.float32(1.0), np.array(1.0),
    np.array([1.0]),
    np.array([1]), np.array([[1.0]]), 0.0, -0.0, math.nan, math.inf, math.nextafter(1.0, 2.0), "", b"", (), {},
    frozenset(),
    (1.0,), (1,), ((1.0,),), (1.0, 2.0), (1.0, 2), (2.0, 1.0), ("ab", "c"), ("a", "bc"), ("a", ("b", "c")),
    (("a", "b"), "c"), {"a": 1.0}, {"a": 1}, {"b": 1.0}, {"a": 1.0, "b": 2.0}, {"b": 2.0, "a": 1.0}, {1.0, 2.0},
    Point(1.0, 2.0), Point(2.0, 1.0), Spot(1.0, 2.0), Pair(1.0, 2.0), Couple(1.0, 2.0), np.array([1.0, 2.0]),
    np.array([1.0, 2.0], dtype=">f8"), np.zeros((2, 0)), np.zeros((0, 2)), (np.array([1.0]), np.array([2.0])),
]  # fmt: skip


def test_different_contents_have_different_digests() -> None:
    digests = [content_digest(value) for value in DIFFERENT]
    for (i, first), (j, second) in itertools.combinations(enumerate(digests), 2):
        assert first != second, f"{DIFFERENT[i]!r} and {DIFFERENT[j]!r}"


def test_equal_contents_have_equal_digests() -> None:
    assert content_digest({"a": (1.0, "x")}) == content_digest(MappingProxyType({"a": [1.0, "x"]}))
    assert content_digest({3.0, 1.0, 2.0}) == content_digest({1.0, 2.0, 3.0})
    transposed = np.arange(6.0).reshape(3, 2).T
    assert content_digest(transposed) == content_digest(transposed.copy())
    assert content_digest(1.0, 2.0) != content_digest((1.0, 2.0))


def test_digests_are_the_same_in_another_process() -> None:
    """Whatever the seed of Python's own hashes."""
    code = "from semitau.core.content_digest import content_digest as d; print(d({'a', 'b', 'c'}, {'x': (1.5, None)}))"
    out = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True).stdout
    assert out.strip() == content_digest({"a", "b", "c"}, {"x": (1.5, None)})


@pytest.mark.parametrize(
    "value",
    [
        lambda: 1, object(), {"a": print}, np.array([object()], dtype=object), iter(()),
        np.zeros(2, dtype=[("x", "f8"), ("y", "f8")]),
    ],
)  # fmt: skip
def test_what_cannot_be_seen_has_no_digest(value: object) -> None:
    with pytest.raises(TypeError, match="has no digest"):
        content_digest(value)
