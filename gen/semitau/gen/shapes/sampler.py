"""Backgrounds by shape: events of a [[background]], drawn from the laws that its study file gives.

Every event is a function of (stream, event number): the same in any chunk and on any worker. Draw numbers belong to
observables, so that one more observable leaves the others as they were.
"""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.streams import uniforms

from ..study_file.categories import StudyCategory
from ..study_file.components import Background
from ..study_file.detector import Curve
from ..study_file.laws import Column, Histogram, Law
from ..study_file.names import OBSERVABLES
from ..study_file.places import place_in
from ..study_file.study import StudyConfig
from . import files as shape_files
from .copula import correlated_uniforms
from .density import LogDensity, table
from .quantile_table import Floats, QuantileTable, RowTable, from_density, from_sorted, rows

FIRST_DRAW = 128
ROW_DRAW = 160


@dataclass(frozen=True, eq=False)
class _Rows:
    """Columns of one tree that are drawn together: observable -> (rows,) float64."""

    table: RowTable
    columns: dict[str, Floats]


@dataclass(frozen=True, eq=False)
class DrawnLaws:
    """How one category is drawn: everything that its events depend on, besides their stream.

    correlated : observables that are drawn together, with their correlation matrix. draws : observable -> its number.
    """

    tables: dict[str, QuantileTable]
    trees: tuple[_Rows, ...]
    correlated: tuple[str, ...]
    correlation: Floats
    draws: dict[str, int]

    def draw(self, stream_key: int | np.uint64, first: int, n: int) -> dict[str, Floats]:
        """As `ShapeSampler.draw`."""
        drawn: dict[str, Floats] = {}
        if self.correlated:
            numbers = [self.draws[name] for name in self.correlated]
            together = correlated_uniforms(stream_key, first, n, numbers, self.correlation)
            drawn = {name: self.tables[name](u) for name, u in zip(self.correlated, together, strict=True)}
        for name, quantiles in self.tables.items():
            if name not in drawn:
                drawn[name] = quantiles(uniforms(stream_key, first, n, self.draws[name]))
        for k, tree in enumerate(self.trees):
            row = tree.table(uniforms(stream_key, first, n, ROW_DRAW + k))
            drawn |= {name: column[row] for name, column in tree.columns.items()}
        return drawn


class ShapeSampler:
    """Draws the events of one background of a study.

    background : one of study.backgrounds. All tables are made here, and all files read here.
    InputError names the place in the study file: a file that is missing, foreign or damaged, an object or branch that
    is not in it, contents that are not finite, negative or all zero, a law that leaves nothing within its range.
    """

    def __init__(self, background: Background, study: StudyConfig) -> None:
        self.background = background
        self._study = study
        self._index = study.backgrounds.index(background)
        self._correlated = background.correlated
        self._correlation = background.correlation_matrix
        self._memory: dict[tuple[str, ...], QuantileTable] = {}
        by_name = {category.name: category for category in study.categories}
        self._laws = {name: self._prepare(by_name[name]) for name in background.events_in}

    @property
    def categories(self) -> tuple[str, ...]:
        """Categories that have events."""
        return tuple(self._laws)

    def laws(self, category: str) -> DrawnLaws:
        """How a category is drawn. KeyError if the background has no events in the category."""
        return self._laws[category]

    def draw(self, category: str, stream_key: int | np.uint64, first: int, n: int) -> dict[str, Floats]:
        """Observables of the events first ... first + n - 1 of a category: name -> (n,) float64, in GeV or GeV².

        KeyError if the background has no events in the category.
        """
        return self._laws[category].draw(stream_key, first, n)

    def _prepare(self, category: StudyCategory) -> DrawnLaws:
        laws = self.background.laws(category.name, category.charm)
        rate = None
        if self.background.misidentified:
            identification = self._study.detector.lepton_id
            rate = identification.hadron_as_e if category.lepton == "e" else identification.hadron_as_mu
        together: dict[tuple[str, str], dict[str, Column]] = {}
        tables: dict[str, QuantileTable] = {}
        for observable, law in laws.items():
            curve = rate if observable == "p_lepton" else None
            if isinstance(law, Column) and not law.smooth:
                together.setdefault((law.file, law.tree), {})[observable] = law
                continue
            key = (observable, law.model_dump_json(), "" if curve is None else curve.model_dump_json())
            if key not in self._memory:
                with self._place(category, observable):
                    self._memory[key] = self._table(law, curve)
            tables[observable] = self._memory[key]
        trees = tuple(self._rows(category, columns, rate) for columns in together.values())
        draws = {name: _draw(name) for name in (*tables, *self._correlated)}
        return DrawnLaws(tables, trees, self._correlated, self._correlation, draws)

    def _table(self, law: Law, curve: Curve | None) -> QuantileTable:
        factor, breaks = (None, ()) if curve is None else (_logarithm(curve), curve.momentum)
        match law:
            case Histogram():
                edges, contents = shape_files.histogram(self._study.beside(law.file), law.name, law.range)
                return _from_histogram(edges, contents, factor, breaks)
            case Column():
                (values,) = shape_files.columns(self._study.beside(law.file), law.tree, [law.branch])
                values = np.sort(_within(values, law))
                return from_sorted(values, None if curve is None else curve.at(values))
        return table(law, factor, breaks)

    def _rows(self, category: StudyCategory, laws: dict[str, Column], rate: Curve | None) -> _Rows:
        observable, law = next(iter(laws.items()))
        with self._place(category, observable):
            branches = [column.branch for column in laws.values()]
            read = shape_files.columns(self._study.beside(law.file), law.tree, branches)
            keep = np.ones(len(read[0]), dtype=bool)
            for values, column in zip(read, laws.values(), strict=True):
                if column.range:
                    keep &= (values >= column.range[0]) & (values < column.range[1])
            columns = {name: values[keep] for name, values in zip(laws, read, strict=True)}
            weights = rate.at(columns["p_lepton"]) if rate and "p_lepton" in columns else np.ones(int(keep.sum()))
            return _Rows(rows(weights), columns)

    @contextmanager
    def _place(self, category: StudyCategory, observable: str) -> Iterator[None]:
        """Adds the place in the study file to what goes wrong."""
        try:
            yield
        except (InputError, ValueError) as error:
            keys = (*self.background.overrides(category.name, category.charm), None)
            key = next(k for k in keys if observable in (self.background.shape_in[k] if k else self.background.shape))
            table_place = ("shape",) if key is None else ("shape_in", key)
            where = place_in(self._study, "background", self._index, *table_place, observable)
            if not isinstance(error, InputError):
                remedy = "Check its range" + (" and the misidentification rate." if observable == "p_lepton" else ".")
                raise InputError(Problem("leaves nothing to draw", where, remedy=remedy)) from None
            problems = (
                Problem(item.what, f"{where}: {item.where}", item.got, item.wanted, item.remedy)
                for item in error.problems
            )
            raise InputError(*problems) from None


def _draw(observable: str) -> int:
    return FIRST_DRAW + 2 * list(OBSERVABLES).index(observable)


def _within(values: Floats, law: Column) -> Floats:
    if law.range is None:
        return values
    kept = values[(values >= law.range[0]) & (values < law.range[1])]
    if not len(kept):
        raise ValueError("nothing to draw from")
    return kept


def _logarithm(curve: Curve) -> LogDensity:
    def logarithm(momentum: Floats) -> Floats:
        rate = curve.at(momentum)
        return np.log(rate, out=np.full_like(rate, -np.inf), where=rate > 0)

    return logarithm


def _from_histogram(
    edges: Floats, contents: Floats, factor: LogDensity | None, breaks: tuple[float, ...]
) -> QuantileTable:
    with np.errstate(divide="ignore"):
        logs = np.log(contents / np.diff(edges))

    def log_density(x: Floats) -> Floats:
        inside = np.clip(np.searchsorted(edges, x, side="right") - 1, 0, len(logs) - 1)
        return logs[inside]

    if factor is None:
        return from_density(log_density, edges, contents)
    nodes = np.unique(np.concatenate([edges, np.clip(breaks, edges[0], edges[-1])]))
    return from_density(lambda x: log_density(x) + factor(x), nodes)


def samplers(study: StudyConfig) -> tuple[ShapeSampler, ...]:
    """A sampler for every background of a study. Raises InputError with the problems of all of them."""
    ready: list[ShapeSampler] = []
    problems: list[Problem] = []
    for background in study.backgrounds:
        try:
            ready.append(ShapeSampler(background, study))
        except InputError as error:
            problems += error.problems
    if problems:
        raise InputError(*problems)
    return tuple(ready)
