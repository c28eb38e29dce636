"""Lines of keys. The standard library's reader is the reference for what keys there are; lines were counted by hand."""

from __future__ import annotations

import tomllib
from collections.abc import Iterator
from pathlib import Path

import pytest
from hypothesis import given
from hypothesis import strategies as st
from semitau.core.toml_lines import TomlLines

ROOT = Path(__file__).parents[2]

AWKWARD = r'''# a comment with [brackets] and key = 1
title = "not # a comment [nor a table]"
a.b.c = 1
a . d = [ 1, # one ]
  2,
  [3,
   4], {x = 1, y = { z = "}" }},
]
"quo.ted" = """
[not.a.table]
k = 1 \""" still """""
'lit = eral' = ~~~
r"""~~~
empty = {}
none = []
date = 1979-05-27 07:32:00   # with a space
[t]
k = { a = 1, b.c = [1, 2] }

  [ t . "u v" ]
  w = true
[[m]]
n = -1.5e3
[m.sub]
p = 2
[[m.arr]]
q = 1
[[m.arr]]
q = 2
[[m]]
n = 3
[m."s.u b"]
r = """
two lines"""
s = 1
'''.replace("~", "'")

LINES: dict[tuple[str | int, ...], int] = {
    ("title",): 2,
    ("a",): 3,
    ("a", "b", "c"): 3,
    ("a", "d"): 4,
    ("a", "d", 0): 4,
    ("a", "d", 1): 5,
    ("a", "d", 2, 0): 6,
    ("a", "d", 2, 1): 7,
    ("a", "d", 3, "y", "z"): 7,
    ("quo.ted",): 9,
    ("lit = eral",): 12,
    ("empty",): 14,
    ("none",): 15,
    ("date",): 16,
    ("t",): 17,
    ("t", "k", "b", "c", 1): 18,
    ("t", "u v"): 20,
    ("t", "u v", "w"): 21,
    ("m",): 22,
    ("m", 0): 22,
    ("m", 0, "n"): 23,
    ("m", 0, "sub", "p"): 25,
    ("m", 0, "arr", 0, "q"): 27,
    ("m", 0, "arr", 1): 28,
    ("m", 0, "arr", 1, "q"): 29,
    ("m", 1): 30,
    ("m", 1, "n"): 31,
    ("m", 1, "s.u b", "r"): 33,
    ("m", 1, "s.u b", "s"): 35,
}


def paths(value: object, path: tuple[str | int, ...] = ()) -> Iterator[tuple[str | int, ...]]:
    if path:
        yield path
    items = value.items() if isinstance(value, dict) else enumerate(value) if isinstance(value, list) else ()
    for key, item in items:
        yield from paths(item, (*path, key))


def test_awkward_layout() -> None:
    assert AWKWARD.count("\n") == 35
    lines = TomlLines(AWKWARD)
    assert {path: lines.line(path) for path in LINES} == LINES


def test_what_is_not_there_has_the_line_around_it() -> None:
    lines = TomlLines(AWKWARD)
    assert lines.line(("m", 1, "missing")) == 30
    assert lines.line(("t", "k", "missing", "deeper")) == 18
    assert lines.line(("nothing",)) == 1
    assert lines.line(()) == 1


@pytest.mark.parametrize("name", ["marlow_small.toml", "marlow.toml"])
def test_every_key_of_the_shipped_studies(name: str) -> None:
    """Each key stands on the line that is told for it."""
    text = (ROOT / "configs" / name).read_text(encoding="utf-8")
    lines, rows = TomlLines(text), text.split("\n")
    for path in paths(tomllib.loads(text)):
        row = rows[lines.line(path) - 1]
        if isinstance(path[-1], str):
            assert path[-1] in row, path


KEYS = st.text(st.sampled_from("ab-_19 .#\"'[]=é\\"), min_size=1, max_size=4)
SCALARS = st.one_of(
    st.integers(-5, 5), st.booleans(), st.text(st.sampled_from('ab#[]{},="\\ \n'), max_size=6), st.floats(0, 1)
)
VALUES = st.recursive(SCALARS, lambda inner: st.lists(inner, max_size=3) | st.dictionaries(KEYS, inner, max_size=3))


def quoted(text: str) -> str:
    escaped = text.replace("\\", "\\\\").replace('"', '\\"').replace("\n", "\\n")
    return f'"{escaped}"'


def written(value: object) -> str:
    if isinstance(value, bool):
        return str(value).lower()
    if isinstance(value, str):
        return quoted(value)
    if isinstance(value, list):
        return "[" + "".join(f"\n{written(item)}, # ]\n" for item in value) + "]"
    if isinstance(value, dict):
        return "{" + ", ".join(f"{quoted(key)} = {written(item)}" for key, item in value.items()) + "}"
    return repr(value)


@given(st.lists(st.dictionaries(KEYS, VALUES, min_size=1, max_size=3), min_size=1, max_size=4), KEYS)
def test_written_files(tables: list[dict[str, object]], name: str) -> None:
    """Arrays of tables with any keys and values: every path of the reader is found, on lines that do not go back."""
    text = "\n".join(
        f"[[{quoted(name)}]] # [\n" + "".join(f"{quoted(key)} = {written(item)}\n\n" for key, item in table.items())
        for table in tables
    )
    data = tomllib.loads(text)
    lines, rows = TomlLines(text), text.split("\n")
    last = 1
    for path in paths(data):
        line = lines.line(path)
        assert line >= last, path
        last = line
        if isinstance(path[-1], str):
            assert quoted(path[-1]) in rows[line - 1], path
