"""Form-factor sets in files: TOML (shipped ones and those that users bring) and CSV.

TOML, one table a transition, "D", "Dst", "Dss", or "D+Dst" for parameters that both share:

    [D]
    parametrisation = "BCL"
    source = "where the numbers come from"
    values = { a0 = 0.9, ... }
    covariance = [[...], ...]                       # rows in the order of values
    # or errors = { a0 = 0.01, ... } and, if any, correlations = [["a0", "a1", 0.4], ...]

CSV: the heading `parameter,value,FIRST,SECOND,...` names the columns of the covariance; then a line a parameter. What
is not in a CSV file, parametrisation and transition, is given by whoever reads it.
"""

from __future__ import annotations

import csv
import io
import tomllib
from collections.abc import Iterator, Mapping, Sequence
from pathlib import Path
from typing import Any

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.toml_lines import TomlLines

from ..truth.kinematics import Floats
from .form_factor_parameters import SHARED, TRANSITIONS, parameter_problems, parametrisations, value_problems

MOST_BYTES = 1_000_000
MOST_PARAMETERS = 60
SYMMETRY = 1e-6
"""Largest difference between both sides of the diagonal, in units of the errors: numbers are printed rounded."""

DEFINITE = 1e-10
"""Smallest eigenvalue of a correlation matrix."""

_KEYS = ("parametrisation", "source", "values", "errors", "correlations", "covariance")

Member = tuple[str, str, tuple[str, ...], Floats, Floats, str]
"""Transition or SHARED, parametrisation, names, values, covariance, source."""


class _Table:
    """One table of a file, its problems placed; gives_errors : instead of a covariance."""

    def __init__(self, path: str, lines: TomlLines | None, table: str) -> None:
        self.path, self.lines, self.table = path, lines, table
        self.gives_errors = False
        self.problems: list[Problem] = []

    def add(self, problem: Problem, *keys: str | int) -> None:
        where = self.path
        if self.lines is not None:
            where += f":{self.lines.line((self.table, *keys))}: " + ".".join(map(str, (self.table, *keys)))
        elif keys:
            where += ": " + ".".join(map(str, keys))
        self.problems.append(problem.inside(where))


def read_members(path: Path, parametrisation: str | None = None, transition: str | None = None) -> list[Member]:
    """What a TOML or CSV file holds. parametrisation, transition : for CSV, which does not say.

    Raises InputError with everything that is wrong: file, numbers, parameters missing or unknown, a covariance that is
    not square, not symmetric or not positive definite.
    """
    text = _text(path)
    if path.suffix.lower() == ".csv":
        if parametrisation is None or transition is None:
            allowed = ", ".join(parametrisations(transition)) if transition else "and a transition"
            raise InputError(
                Problem(
                    "does not say its parametrisation", str(path), wanted=allowed, remedy="Give it beside the file."
                )
            )
        return [_csv_member(text, str(path), parametrisation, transition)]
    return toml_members(text, str(path))


def toml_members(text: str, path: str) -> list[Member]:
    """The tables of a TOML text. path : as messages name it."""
    try:
        tables = tomllib.loads(text)
    except (tomllib.TOMLDecodeError, RecursionError, ValueError) as error:
        raise InputError(Problem(f"is no TOML: {error}", path)) from None
    lines, members, problems = TomlLines(text), [], []
    allowed = ", ".join((*TRANSITIONS, f'"{SHARED}"'))
    if not tables:
        problems.append(Problem("holds no form factors", path, wanted=f"tables {allowed}"))
    for name, table in tables.items():
        here = _Table(path, lines, name)
        if name not in (*TRANSITIONS, SHARED):
            here.add(Problem("is no transition", got=name, wanted=allowed))
        elif not isinstance(table, dict):
            here.add(Problem("must be a table", got=str(table)[:60], remedy=f"Write [{name}]."))
        elif (member := _toml_member(here, name, table)) is not None:
            members.append(member)
        problems += here.problems
    described = [t for member in members for t in _transitions(member[0])]
    for transition in sorted({t for t in described if described.count(t) > 1}):
        problems.append(Problem(f"describes {TRANSITIONS[transition]} twice", path, remedy="Remove one table."))
    if problems:
        raise InputError(*problems)
    return members


def _text(path: Path) -> str:
    try:
        content = path.read_bytes()
    except FileNotFoundError:
        remedy = "Relative names are looked for beside the study file."
        raise InputError(Problem("there is no such file", str(path), remedy=remedy)) from None
    except (OSError, ValueError) as error:
        reason = getattr(error, "strerror", None) or str(error)
        raise InputError(Problem("cannot be read", str(path), got=reason)) from None
    if len(content) > MOST_BYTES:
        got, wanted = f"{len(content)} bytes", f"up to {MOST_BYTES} bytes"
        raise InputError(Problem("is too large for a form-factor set", str(path), got, wanted))
    try:
        return content.decode("utf-8-sig").replace("\r\n", "\n")
    except UnicodeDecodeError:
        raise InputError(Problem("is no UTF-8 text", str(path), remedy="Save the file as UTF-8 text.")) from None


def _toml_member(here: _Table, name: str, table: Mapping[str, Any]) -> Member | None:
    for key in table:
        if key not in _KEYS:
            here.add(Problem("unknown key", got=key, wanted=", ".join(_KEYS)), key)
    for key, kind in (("parametrisation", str), ("source", str), ("values", dict)):
        if not isinstance(table.get(key), kind):
            shown = "nothing" if key not in table else str(table[key])[:60]
            wanted = "a table of numbers" if kind is dict else "a text"
            here.add(
                Problem(f"lacks {key}" if key not in table else "has the wrong type", got=shown, wanted=wanted), key
            )
    if ("covariance" in table) == ("errors" in table):
        remedy = "Give covariance, or errors with correlations."
        here.add(Problem("needs either covariance or errors", remedy=remedy))
    if "correlations" in table and "covariance" in table:
        here.add(Problem("has correlations beside a covariance", remedy="Remove one of them."), "correlations")
    if here.problems:
        return None
    names = tuple(table["values"])
    here.gives_errors = "errors" in table
    values = _numbers(here, table["values"], names, "values")
    if "covariance" in table:
        covariance = _matrix(here, table["covariance"], names)
    else:
        covariance = _from_correlations(here, table, names)
    return _checked(here, name, table["parametrisation"], names, values, covariance, table["source"])


def _numbers(here: _Table, table: Any, names: Sequence[str], key: str) -> Floats | None:
    """In the order of names; None if something is wrong."""
    before = len(here.problems)
    if not isinstance(table, dict):
        here.add(Problem("must be a table of numbers", got=str(table)[:60]), key)
        return None
    for name in table:
        if name not in names:
            here.add(Problem("is no parameter of values", got=name, wanted=", ".join(names)), key, name)
    for name in names:
        if name not in table:
            here.add(Problem("lacks a parameter", got=", ".join(table) or "none", wanted=", ".join(names)), key)
            break
        if not _is_number(table[name]):
            here.add(Problem("must be a finite number", got=str(table[name])), key, name)
    return None if len(here.problems) > before else np.array([float(table[name]) for name in names])


def _is_number(value: object) -> bool:
    return isinstance(value, int | float) and not isinstance(value, bool) and bool(np.isfinite(value))


def _matrix(here: _Table, rows: Any, names: Sequence[str]) -> Floats | None:
    n = len(names)
    sound = isinstance(rows, list) and all(isinstance(row, list) for row in rows)
    if not sound or len(rows) != n or any(len(row) != n for row in rows):
        lengths = f"rows of {', '.join(str(len(row)) for row in rows)}" if sound else "no matrix"
        here.add(Problem("must be a square matrix, a row a parameter", got=lengths, wanted=f"{n} × {n}"), "covariance")
        return None
    for i, row in enumerate(rows):
        for j, value in enumerate(row):
            if not _is_number(value):
                got = f"{value} for {names[i]}, {names[j]}"
                here.add(Problem("must be finite numbers", got=got), "covariance", i)
                return None
    return np.array(rows, dtype=np.float64)


def _from_correlations(here: _Table, table: Mapping[str, Any], names: Sequence[str]) -> Floats | None:
    errors = _numbers(here, table["errors"], names, "errors")
    if errors is not None and (errors < 0).any():
        worst = names[int(np.argmin(errors))]
        here.add(Problem("must not be below 0", got=str(errors.min())), "errors", worst)
    given = table.get("correlations", [])
    correlation = np.eye(len(names))
    for k, item in enumerate(given if isinstance(given, list) else [given]):
        if not (isinstance(item, list) and len(item) == 3 and _is_number(item[2])):
            here.add(Problem("must be [parameter, parameter, number]", got=str(item)[:60]), "correlations", k)
            continue
        first, second, value = item
        unknown = [name for name in (first, second) if name not in names]
        if unknown or first == second:
            got = str(unknown[0] if unknown else first)
            here.add(Problem("needs two different parameters", got=got, wanted=", ".join(names)), "correlations", k)
            continue
        i, j = names.index(first), names.index(second)
        if correlation[i, j] != 0.0 and correlation[i, j] != value:
            got = f"{correlation[i, j]:g} and {value:g} for {first}, {second}"
            here.add(Problem("gives a correlation twice", got=got), "correlations", k)
        correlation[i, j] = correlation[j, i] = value
    return None if here.problems or errors is None else correlation * np.outer(errors, errors)


def _checked(
    here: _Table,
    name: str,
    parametrisation: str,
    names: tuple[str, ...],
    values: Floats | None,
    covariance: Floats | None,
    source: str,
) -> Member | None:
    for transition in _transitions(name):
        known = parametrisations(transition) if name != SHARED else ("HQE",)
        if parametrisation not in known:
            what = f"is no parametrisation of {TRANSITIONS[transition]}"
            here.add(Problem(what, got=parametrisation, wanted=", ".join(known)), "parametrisation")
            return None
    for problem in parameter_problems(parametrisation, _transitions(name)[0], names):
        here.add(problem, "values")
    if values is not None and not here.problems:
        for problem in value_problems(parametrisation, dict(zip(names, values.tolist(), strict=True))):
            here.add(problem, "values")
    if len(names) > MOST_PARAMETERS:
        here.add(Problem("has too many parameters", got=str(len(names)), wanted=f"up to {MOST_PARAMETERS}"), "values")
    if covariance is not None:
        for problem in covariance_problems(covariance, names):
            here.add(problem, "correlations" if here.gives_errors else "covariance")
    if here.problems or values is None or covariance is None:
        return None
    return name, parametrisation, names, values, 0.5 * (covariance + covariance.T), source


def covariance_problems(covariance: Floats, names: Sequence[str]) -> Iterator[Problem]:
    """Why a matrix is no covariance, with the numbers; a parameter whose row is zero is fixed, which is fine."""
    variances = np.diag(covariance)
    if (variances < 0).any():
        i = int(np.argmin(variances))
        yield Problem("has a negative variance", got=f"{variances[i]:g} for {names[i]}")
        return
    errors = np.sqrt(variances)
    scale = np.outer(errors, errors)
    difference = np.abs(covariance - covariance.T)
    limit = SYMMETRY * scale + 1e-300
    if (difference > limit).any():
        worst = int(np.argmax(difference / np.maximum(scale, 1e-300)))
        i, j = sorted(divmod(worst, len(names)))
        got = f"{covariance[i, j]:g} for {names[i]}, {names[j]} and {covariance[j, i]:g} the other way round"
        yield Problem("is not symmetric", got=got, remedy="Both must be the same number.")
        return
    loose = (errors == 0) & (np.abs(covariance).max(axis=1, initial=0.0) > 0)
    if loose.any():
        name = names[int(np.argmax(loose))]
        yield Problem("is not positive definite", got=f"no variance but a covariance of {name}")
        return
    free = np.flatnonzero(errors > 0)
    correlation = covariance[np.ix_(free, free)] / scale[np.ix_(free, free)]
    eigenvalues, vectors = np.linalg.eigh(0.5 * (correlation + correlation.T))
    if len(free) and eigenvalues[0] < DEFINITE:
        parts = vectors[:, 0]
        largest = np.argsort(-np.abs(parts))[:3]
        along = ", ".join(f"{parts[k]:+.2f} {names[free[k]]}" for k in largest)
        yield Problem(
            "is not positive definite",
            got=f"eigenvalue {eigenvalues[0]:.3g} of the correlation matrix, along {along}",
            wanted=f"eigenvalues above {DEFINITE:g}",
            remedy="Check signs and digits of the correlations; rounding alone may need one more digit.",
        )


def _csv_member(text: str, path: str, parametrisation: str, transition: str) -> Member:
    here = _Table(path, None, "")
    rows = [row for row in csv.reader(io.StringIO(text)) if row and not row[0].lstrip().startswith("#")]
    rows = [[cell.strip() for cell in row] for row in rows]
    heading = rows[0] if rows else []
    wanted = "parameter,value and a column of the covariance for each parameter"
    if heading[:2] != ["parameter", "value"]:
        raise InputError(Problem("has no such heading", path, got=",".join(heading)[:60] or "nothing", wanted=wanted))
    names, columns = tuple(row[0] for row in rows[1:]), tuple(heading[2:])
    if names != columns:
        raise InputError(
            Problem(
                "must name the same parameters in its lines and columns, in one order",
                path,
                got=f"lines {', '.join(names) or 'none'}; columns {', '.join(columns) or 'none'}",
            )
        )
    numbers = np.zeros((len(names), 1 + len(names)))
    for i, row in enumerate(rows[1:]):
        if len(row) != 2 + len(names):
            here.add(Problem("has the wrong number of columns", got=str(len(row)), wanted=str(2 + len(names))), row[0])
            continue
        for j, cell in enumerate(row[1:]):
            try:
                numbers[i, j] = float(cell)
            except ValueError:
                numbers[i, j] = np.nan
            if not np.isfinite(numbers[i, j]):
                here.add(Problem("must be a finite number", got=cell), row[0], heading[1 + j])
                numbers[i, j] = np.nan
    if here.problems:
        raise InputError(*here.problems)
    member = _checked(here, transition, parametrisation, names, numbers[:, 0], numbers[:, 1:], f"the file {path}")
    if member is None:
        raise InputError(*here.problems)
    return member


def _transitions(table: str) -> tuple[str, ...]:
    return ("D", "Dst") if table == SHARED else (table,)
