"""Tables of the report: what a page shows, rounded for people, and what a download holds, to the last digit."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from urllib.parse import quote

from ..numbers import counted, percent, signed, with_error

Raw = str | float | int | bool | None
NOTHING = "–"
"""Shown where there is no number."""


@dataclass(frozen=True)
class Cell:
    """One cell. shown : rounded, for people. beside : smaller, below it. raw : what the download has in its place."""

    shown: str
    raw: tuple[Raw, ...]
    beside: str = ""


@dataclass(frozen=True)
class Column:
    """One column of the page and its columns of the download.

    heading : above the column. unit : of its numbers, "" if they have none. names : headings in the download, one for
    each raw value of a cell; empty if the heading says it all. text : words, to the left, not numbers.
    """

    heading: str
    unit: str = ""
    names: tuple[str, ...] = ()
    text: bool = False

    @property
    def downloaded(self) -> tuple[str, ...]:
        """Headings in the download, with the unit."""
        unit = f" ({self.unit})" if self.unit else ""
        return tuple(name + unit for name in self.names or (self.heading,))


@dataclass(frozen=True)
class Row:
    """Cells in the order of the columns; the first one is the heading of the row. total : the sum of those above."""

    cells: tuple[Cell, ...]
    total: bool = False


@dataclass(frozen=True)
class ReportTable:
    """A table. name : identifier, also of the file to download. title : above it, and for those who hear the page."""

    name: str
    title: str
    columns: tuple[Column, ...]
    rows: tuple[Row, ...]

    def __post_init__(self) -> None:
        for row in self.rows:
            if [len(cell.raw) for cell in row.cells] != [len(column.downloaded) for column in self.columns]:
                raise ValueError(f"{self.name}: a row does not fit the columns: {[cell.shown for cell in row.cells]}")

    @property
    def csv(self) -> str:
        """Comma-separated values (RFC 4180) with a line of headings; nothing is rounded, what is not known is empty."""
        text = io.StringIO()
        writer = csv.writer(text)
        writer.writerow([name for column in self.columns for name in column.downloaded])
        writer.writerows([_written(raw) for cell in row.cells for raw in cell.raw] for row in self.rows)
        return text.getvalue()

    @property
    def address(self) -> str:
        """The download as an address that needs no file and no network (RFC 2397)."""
        return f"data:text/csv;charset=utf-8,{quote(self.csv, safe='')}"


def table(name: str, title: str, columns: Sequence[Column], rows: Iterable[Sequence[Cell] | Row]) -> ReportTable | None:
    """The table, or None if it has no rows."""
    whole = tuple(row if isinstance(row, Row) else Row(tuple(row)) for row in rows)
    return ReportTable(name, title, tuple(columns), whole) if whole else None


def words(shown: str, *raw: Raw) -> Cell:
    """Text; the download has the same, or `raw`."""
    return Cell(shown, raw or (shown,))


def number(value: float | None, places: int, plus: bool = False, absent: str = NOTHING) -> Cell:
    """A number with fixed decimal places. absent : shown if there is none."""
    return Cell(absent if value is None else signed(value, places, plus), (value,))


def count(value: float | None) -> Cell:
    """A number of events or the like."""
    return Cell(NOTHING if value is None else counted(value), (value,))


def measured(value: float, error: float) -> Cell:
    """A number with its error; two columns of the download."""
    return Cell(with_error(value, error), (value, error))


def share(value: float | None, places: int = 1) -> Cell:
    """A fraction in per cent; the download has the fraction."""
    return Cell(NOTHING if value is None else percent(value, places), (value,))


def chance(p_value: float | None) -> Cell:
    """A p-value: three places, or "< 0.001"."""
    if p_value is not None and 0 <= p_value < 0.0005:
        return Cell("< 0.001", (p_value,))
    return number(p_value, 3)


def _written(raw: Raw) -> str:
    if raw is None:
        return ""
    return str(raw).lower() if isinstance(raw, bool) else str(raw)
