"""The working points of a search: cuts at grid edges, and axes with edges from finest grids."""

from __future__ import annotations

from bisect import bisect_left, bisect_right
from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import pairwise
from math import inf, isfinite

from semitau.core.candidate_grid import CategoryGrid, GridAxis
from semitau.core.errors import InputError, Problem
from semitau.gen.study_file.categories import CategoryTable, StudyCategory, written_out
from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.design_conflicts import effective
from semitau.gen.study_file.names import CHARM_LABEL, LEPTON_LABEL, OBSERVABLES
from semitau.gen.study_file.study import StudyConfig

NATURAL_LOW = {"p_lepton": 0.0, "p_charm": 0.0, "el": 0.0, "e_res": 0.0}
"""Observables that cannot be negative."""

SPLIT = 2
"""Into how many parts each bin of the study is cut for the finest edges, if memory allows."""

Edges = tuple[int, ...]
Binning = tuple[tuple[str, Edges], ...]
"""Axes of one [[category]] table in order: observable and places of the inner edges on its grid axis."""


@dataclass(frozen=True)
class CutVariable:
    """A scanned cut. tables : places of the [[category]] tables that share it. values : increasing. start : place of
    the study's own value. name : e.g. "e_res.max", with the categories if it is one of several."""

    observable: str
    side: str
    tables: tuple[int, ...]
    values: tuple[float, ...]
    start: int
    name: str
    label: str


@dataclass(frozen=True)
class TableAxis:
    """An observable of one [[category]] table: its grid axis, and which stretch counts where no scanned cut says so.

    binned, open : places of the outer edges if it is an axis of the templates, and if it is not. options : places of
    edges that an axis may have; empty if it cannot be one. now : places of the study's inner edges, None if it is no
    axis of the study.
    """

    grid: GridAxis
    binned: tuple[int, int]
    open: tuple[int, int]
    options: Edges
    now: Edges | None


@dataclass(frozen=True)
class TableSpace:
    """One [[category]] table. categories : places among the categories of the study. names : of its cuts' variables by
    (observable, side)."""

    label: str
    categories: tuple[int, ...]
    axes: tuple[TableAxis, ...]
    start: Binning

    def axis(self, observable: str) -> TableAxis:
        """The axis of an observable."""
        return next(axis for axis in self.axes if axis.grid.observable == observable)


@dataclass(frozen=True)
class WorkingPoint:
    """cuts : place of each variable's value. binnings : one for each [[category]] table."""

    cuts: tuple[int, ...]
    binnings: tuple[Binning, ...]

    def with_cut(self, variable: int, value: int) -> WorkingPoint:
        return replace(self, cuts=(*self.cuts[:variable], value, *self.cuts[variable + 1 :]))

    def with_binning(self, table: int, binning: Binning) -> WorkingPoint:
        return replace(self, binnings=(*self.binnings[:table], binning, *self.binnings[table + 1 :]))


@dataclass(frozen=True)
class Space:
    """All working points of a study."""

    variables: tuple[CutVariable, ...]
    tables: tuple[TableSpace, ...]

    @property
    def start(self) -> WorkingPoint:
        """The study as it is."""
        return WorkingPoint(tuple(v.start for v in self.variables), tuple(table.start for table in self.tables))

    def grids(self, categories: Sequence[StudyCategory]) -> tuple[CategoryGrid, ...]:
        """The grid of each category of the study."""
        of = {place: table for table in self.tables for place in table.categories}
        return tuple(
            CategoryGrid(category.name, tuple(axis.grid for axis in of[place].axes))
            for place, category in enumerate(categories)
        )

    def edges(self, point: WorkingPoint, table: int) -> dict[str, Edges]:
        """Places of all edges along each grid axis of a table, the outer ones included."""
        binned = dict(point.binnings[table])
        found = {}
        for axis in self.tables[table].axes:
            observable = axis.grid.observable
            low, high = axis.binned if observable in binned else axis.open
            for variable, place in zip(self.variables, point.cuts, strict=True):
                if variable.observable == observable and table in variable.tables:
                    edge = axis.grid.index(variable.values[place])
                    low, high = (edge, high) if variable.side == "min" else (low, edge)
            found[observable] = (low, *(k for k in binned.get(observable, ()) if low < k < high), high)
        return found

    def template_axes(self, point: WorkingPoint, table: int) -> dict[str, tuple[float, ...]]:
        """Edges of the templates' axes of a table, in order."""
        edges = self.edges(point, table)
        space = self.tables[table]
        return {
            observable: tuple(space.axis(observable).grid.edges[k] for k in edges[observable])
            for observable, _ in point.binnings[table]
        }


def make_space(study: StudyConfig, design: DesignSection, columns: int) -> Space:
    """The working points that [design] asks for. columns : of the sums, for the memory that they take.

    Bins of the study are halved, the axes with fewest bins first, as long as the sums stay within the memory.

    Raises InputError if they take too much anyway.
    """
    rows_at_most = design.memory * 1_000_000 // (8 * columns)
    fine: dict[str, int] = {}
    space = _space(study, design, fine)
    if _rows(space) > rows_at_most:
        raise InputError(
            Problem(
                "the sums of candidates would take too much memory",
                where="[design]",
                got=f"{_rows(space) * 8 * columns / 1e6:.0f} MB",
                wanted=f"up to {design.memory} MB",
                remedy="Scan fewer values or fewer cuts, give fewer edges, or raise memory.",
            )
        )
    if design.binning:
        longest = {
            name: max(len(c.axes[name]) for c in study.categories if name in c.axes) for name in study.observables
        }
        for name in sorted(longest, key=lambda name: longest[name]):
            finer = _space(study, design, fine | {name: SPLIT}) if name not in design.axes else None
            if finer is not None and _rows(finer) <= rows_at_most:
                fine, space = fine | {name: SPLIT}, finer
    return space


def _rows(space: Space) -> int:
    return sum(
        len(table.categories) * CategoryGrid("", tuple(axis.grid for axis in table.axes)).rows for table in space.tables
    )


def _space(study: StudyConfig, design: DesignSection, fine: Mapping[str, int]) -> Space:
    tables = _tables(study)
    variables = tuple(_variables(study, design, tables))
    places = {category.name: k for k, category in enumerate(study.categories)}
    spaces = []
    for number, (table, categories) in enumerate(tables):
        mine = [variable for variable in variables if number in variable.tables]
        axes = tuple(_axes(study, design, categories, mine, fine))
        start = tuple((axis.grid.observable, axis.now) for axis in axes if axis.now is not None)
        order = list(table.observables)
        start = tuple(sorted(start, key=lambda own: order.index(own[0])))
        spaces.append(TableSpace(_label(table), tuple(places[c.name] for c in categories), axes, start))
    return Space(variables, tuple(spaces))


def _tables(study: StudyConfig) -> list[tuple[CategoryTable, tuple[StudyCategory, ...]]]:
    return [(table, written_out([table], study.selection)) for table in study.category_tables]


def _label(table: CategoryTable) -> str:
    return f"{', '.join(CHARM_LABEL[c] for c in table.charm)} with {', '.join(LEPTON_LABEL[x] for x in table.leptons)}"


def _variables(
    study: StudyConfig, design: DesignSection, tables: Sequence[tuple[CategoryTable, tuple[StudyCategory, ...]]]
) -> Iterator[CutVariable]:
    for observable, scan in design.cuts.items():
        for side in ("min", "max"):
            ends = getattr(scan, side)
            if ends is None:
                continue
            starts = effective(study, observable, side)
            acting = [k for k, (_, own) in enumerate(tables) if any(c.name in starts for c in own)]
            for group in ([k] for k in acting) if scan.by_category else [acting]:
                start = starts[next(c.name for k in group for c in tables[k][1] if c.name in starts)]
                step = (ends[1] - ends[0]) / (scan.steps - 1)
                even = {float(f"{ends[0] + k * step:.4g}") for k in range(scan.steps - 1)} | {ends[1], start}
                values = tuple(sorted(even))
                several = scan.by_category and len(acting) > 1
                where = ", ".join(c.name for k in group for c in tables[k][1])
                label = f"{OBSERVABLES[observable].label} {'from' if side == 'min' else 'below'}"
                yield CutVariable(
                    observable, side, tuple(group), values, values.index(start),
                    f"{observable}.{side}" + (f" ({where})" if several else ""),
                    label + (f" ({_label(tables[group[0]][0])})" if several else ""),
                )  # fmt: skip


def _axes(
    study: StudyConfig,
    design: DesignSection,
    categories: Sequence[StudyCategory],
    variables: Sequence[CutVariable],
    fine: Mapping[str, int],
) -> Iterator[TableAxis]:
    first = categories[0]
    names = dict.fromkeys([*first.axes, *(v.observable for v in variables), *(design.axes if design.binning else ())])
    drawn_by_all = _drawn_by_all(study, categories)
    for name in names:
        cut = first.cuts.get(name)
        floor = cut.min if cut is not None and cut.min is not None else NATURAL_LOW.get(name, -inf)
        ceiling = cut.max if cut is not None and cut.max is not None else inf
        scans = {v.side: v.values for v in variables if v.observable == name}
        low, high = scans.get("min", (floor,))[0], scans.get("max", (ceiling,))[-1]
        own = first.axes.get(name)
        options = _options(study, design, name, fine) if name in drawn_by_all and (design.binning or own) else ()
        wanted = {low, high, *scans.get("min", ()), *scans.get("max", ())}
        inner = sorted(wanted | {edge for edge in (*options, *(own or ())) if low < edge < high})
        grid = GridAxis(name, tuple(inner), inner.index(scans["min"][-1]) if "min" in scans else 0)
        # Without a scanned cut the templates' axis ends where the study's does, or else with the last edge there is.
        reach = own or options or (low, high)
        outer = (
            0 if "min" in scans else bisect_left(inner, reach[0]),
            len(inner) - 1 if "max" in scans else bisect_right(inner, reach[-1]) - 1,
        )
        bounded = isfinite(inner[outer[0]]) and isfinite(inner[outer[1]]) and bool(options)
        places = tuple(inner.index(edge) for edge in inner if edge in {*options, *wanted}) if bounded else ()
        now = None if own is None else tuple(inner.index(edge) for edge in own[1:-1] if low < edge < high)
        yield TableAxis(grid, outer, (0, len(inner) - 1), places, now)


def _options(study: StudyConfig, design: DesignSection, name: str, fine: Mapping[str, int]) -> tuple[float, ...]:
    """Finest edges of an observable: those of all its axes in the study, each bin cut into parts, and those given."""
    edges = sorted({edge for category in study.categories for edge in category.axes.get(name, ())})
    parts = fine.get(name, 1)
    parted = (low + k * (high - low) / parts for low, high in pairwise(edges) for k in range(1, parts))
    cut = set(edges) | {float(f"{edge:.10g}") for edge in parted}
    return tuple(sorted(cut | set(design.axes[name].edges if name in design.axes else ())))


def _drawn_by_all(study: StudyConfig, categories: Sequence[StudyCategory]) -> set[str]:
    """Observables that every background of these categories draws: the others cannot be axes."""
    found = set(OBSERVABLES) - {"delta_m"}
    for background in study.backgrounds:
        for category in categories:
            if background.expected.get(category.name):
                found &= set(background.laws(category.name, category.charm))
    return found
