"""Study files: read, checked whole, every problem told at once with file, line, key, value and remedy."""

from __future__ import annotations

import re
import tomllib
from collections.abc import Iterable, Mapping
from pathlib import Path
from typing import Any

from semitau.core.errors import InputError, Problem
from semitau.core.toml_lines import TomlLines

from .alternative_studies import alternative_conflicts
from .checking import checked_alone
from .places import key_of
from .sections import Conflict
from .study import StudyConfig

MOST_BYTES = 4_000_000

TYPESET = "“”„‟‘’‚«»\u00a0\u2007\u202f"
"""Letters that stand in the place of quotes and blanks in typeset text."""


def read_study(path: Path | str) -> StudyConfig:
    """The study in a TOML file, with its text and path.

    Raises InputError with every problem found: a file that cannot be read or is no TOML, unknown or missing keys, wrong
    types and units, broken rules within and between tables, files that the study names but that are not there.
    """
    path = Path(path)
    text = text_of(path)
    data = tables_of(text, path)
    study, found = checked(data, path.parent)
    if study is None:
        lines = TomlLines(text)
        raise InputError(*problems_at(found, data, lines, path))
    return study.read_from(path, text)


def text_of(path: Path) -> str:
    """The text of a TOML file. InputError if it cannot be read, is too large or no UTF-8."""
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        raise InputError(Problem("there is no such file", str(path))) from None
    except IsADirectoryError:
        raise InputError(Problem("is a folder", str(path), remedy="Name the file in it.")) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(Problem("cannot be read", str(path), got=reason)) from None
    if len(content) > MOST_BYTES:
        problem = Problem("is too large", str(path), f"{len(content)} bytes", f"up to {MOST_BYTES} bytes")
        raise InputError(problem)
    if not content.strip():
        raise InputError(Problem("is empty", str(path), remedy="Examples are in configs/ and docs/."))
    try:
        # universal newlines, as TOML asks; a byte-order mark, which some editors write, is no harm
        return content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError as error:
        line = content[: error.start].count(b"\n") + 1
        remedy = "Save the file as UTF-8 text."
        raise InputError(Problem("is no UTF-8 text", f"{path}:{line}", remedy=remedy)) from None


def tables_of(text: str, path: Path) -> dict[str, Any]:
    """Text of a TOML file as nested tables. InputError with line and column if it is no TOML."""
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        message, place = _syntax(str(error), text)
        line = text.splitlines()[int(place.partition(":")[0]) - 1] if text.strip() else ""
        odd = sorted({letter for letter in line if letter in TYPESET})
        got = ", ".join(f"{letter} (U+{ord(letter):04X})" for letter in odd)
        remedy = "Write straight quotes and plain blanks; word processors replace them." if odd else ""
        raise InputError(Problem(f"is no TOML: {message}", f"{path}:{place}", got=got, remedy=remedy)) from None
    except RecursionError:
        raise InputError(Problem("is no TOML: nested too deeply", str(path))) from None
    except ValueError as error:  # such as a date that does not exist, or a number of too many digits
        raise InputError(Problem(f"is no TOML: {_lower(str(error))}", str(path))) from None


def _syntax(message: str, text: str) -> tuple[str, str]:
    """Message and "line:column" of a syntax error."""
    match = re.fullmatch(r"(.*?)\s*\(at (?:line (\d+), column (\d+)|end of document)\)", message, re.DOTALL)
    if match is None:
        return _lower(message), "1:1"
    last = text.rstrip().rfind("\n")
    end = (text.rstrip().count("\n") + 1, len(text.rstrip()) - last)
    line, column = (match[2], match[3]) if match[2] else end
    return _lower(match[1]) + ("" if match[2] else " at the end of the file"), f"{line}:{column}"


def _lower(message: str) -> str:
    return message[:1].lower() + message[1:]


def checked(data: Mapping[str, Any], folder: Path) -> tuple[StudyConfig | None, list[Conflict]]:
    """The study in tables as read from TOML, or None and all that is wrong with them, its alternatives included.

    folder : where files that the study names are looked for.
    """
    study, found = checked_alone(data, folder)
    if study is not None:
        found = alternative_conflicts(study, data, folder)
    return (None if found else study), found


def problems_at(found: Iterable[Conflict], data: Mapping[str, Any], lines: TomlLines, path: Path) -> list[Problem]:
    """What is wrong as problems with file, line and key, in the order of the file."""
    placed = [(lines.line(item.place), item) for item in dict.fromkeys(found)]
    placed.sort(key=lambda pair: pair[0])
    return [
        Problem(item.what, f"{path}:{line}{_after_colon(key_of(item.place, data))}", item.got, item.wanted, item.remedy)
        for line, item in placed
    ]


def _after_colon(key: str) -> str:
    return f": {key}" if key else ""
