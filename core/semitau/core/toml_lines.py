"""Where keys stand in a TOML file: the standard library's reader tells values but no lines.

The scanner follows a text that the reader has accepted, so it need not find faults, only places. It knows tables,
arrays of tables, dotted and quoted keys, inline tables and arrays over many lines, comments and all kinds of strings.
"""

from __future__ import annotations

import re
import tomllib
from bisect import bisect_right
from collections.abc import Sequence

Path = tuple[str | int, ...]

_BARE = re.compile(r"[A-Za-z0-9_-]+")
_SKIP = re.compile(r"(?:[ \t\r\n]+|#[^\n]*)*")
_BLANK = re.compile(r"[ \t]*")
_SCALAR = re.compile(r"[^,\]\}\n#]*")
_STRINGS = tuple(
    re.compile(pattern, re.DOTALL)
    for pattern in (
        r'"""(?:\\.|[^\\])*?"{3,5}(?!")',
        r"'''.*?'{3,5}(?!')",
        r'"(?:\\.|[^"\\])*"',
        r"'[^']*'",
    )
)


class TomlLines:
    """Lines (from 1) of every key, table and array element of a valid TOML text."""

    def __init__(self, text: str) -> None:
        self._text = text
        self._at = 0
        self._lines: dict[Path, int] = {}
        self._tables: dict[Path, int] = {}  # arrays of tables: how many elements so far
        self._starts = [0, *(match.end() for match in re.finditer("\n", text))]
        self._scan()

    def line(self, path: Sequence[str | int]) -> int:
        """Line of the key or element at `path`, or of the innermost table or array around it; 1 for the top."""
        for length in range(len(path), 0, -1):
            if (found := self._lines.get(tuple(path[:length]))) is not None:
                return found
        return 1

    def _scan(self) -> None:
        table: Path = ()
        while self._at < len(self._text):
            self._skip(_SKIP)
            if self._next("[["):
                table = self._header(many=True)
                self._next("]]")
            elif self._next("["):
                table = self._header(many=False)
                self._next("]")
            elif self._at < len(self._text):
                self._pair(table)

    def _header(self, *, many: bool) -> Path:
        line = self._line_here()
        keys = self._keys()
        path: Path = ()
        for i, key in enumerate(keys):
            path += (key,)
            last = i == len(keys) - 1
            self._lines.setdefault(path, line)
            if last and many:
                self._tables[path] = self._tables.get(path, 0) + 1
            if path in self._tables and (many or not last):
                path += (self._tables[path] - 1,)
                self._lines.setdefault(path, line)
        # [a.b] may come after a dotted key of a, or before; its own line serves better than an implied one
        self._lines[path] = line
        return path

    def _pair(self, table: Path) -> None:
        line = self._line_here()
        path = table
        for key in self._keys():
            path += (key,)
            self._lines.setdefault(path, line)
        self._skip(_BLANK)
        if not self._next("="):
            self._at = len(self._text)  # not TOML after all: give no more places rather than wrong ones
            return
        self._value(path)

    def _value(self, path: Path) -> None:
        self._skip(_BLANK)
        if self._next("["):
            index = 0
            while not self._closed("]"):
                start = self._at
                self._lines[(*path, index)] = self._line_here()
                self._value((*path, index))
                index += 1
                if self._at == start:
                    self._at = len(self._text)
        elif self._next("{"):
            while not self._closed("}"):
                self._pair(path)
        elif not self._string():
            self._skip(_SCALAR)

    def _closed(self, bracket: str) -> bool:
        self._skip(_SKIP)
        if self._next(","):
            self._skip(_SKIP)
        return self._at >= len(self._text) or self._next(bracket)

    def _keys(self) -> list[str]:
        keys: list[str] = []
        while True:
            self._skip(_BLANK)
            start = self._at
            if self._string():
                keys.append(_unquoted(self._text[start : self._at]))
            else:
                self._skip(_BARE)
                keys.append(self._text[start : self._at])
            self._skip(_BLANK)
            if not self._next("."):
                return keys

    def _string(self) -> bool:
        for pattern in _STRINGS:
            if match := pattern.match(self._text, self._at):
                self._at = match.end()
                return True
        return False

    def _skip(self, pattern: re.Pattern[str]) -> None:
        if match := pattern.match(self._text, self._at):
            self._at = match.end()

    def _next(self, token: str) -> bool:
        if self._text.startswith(token, self._at):
            self._at += len(token)
            return True
        return False

    def _line_here(self) -> int:
        return bisect_right(self._starts, self._at)


def _unquoted(text: str) -> str:
    value = tomllib.loads(f"key = {text}")["key"]
    return str(value)
