"""A working point as a study, and as TOML to paste into a study file."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from semitau.gen.study_file.categories import Axis, CategoryTable, Cut
from semitau.gen.study_file.study import StudyConfig

from .space import Space, WorkingPoint

Cuts = Mapping[str, Cut]


def study_at(study: StudyConfig, space: Space, point: WorkingPoint) -> StudyConfig:
    """The study with the cuts and binnings of a working point."""
    selection, tables = _changed(study, space, point)
    return study.model_copy(update={"selection": dict(selection), "category_tables": tables})


def snippet(study: StudyConfig, space: Space, point: WorkingPoint) -> str:
    """[selection] and all [[category]] tables of a working point; "" if it is the study as it is."""
    if point == space.start:
        return ""
    selection, tables = _changed(study, space, point)
    lines = ["# In the place of [selection] and all [[category]] tables.", "[selection]", *_cut_lines(selection)]
    for table in tables:
        lines += ["", *_table_lines(table)]
    return "\n".join(lines) + "\n"


def _changed(study: StudyConfig, space: Space, point: WorkingPoint) -> tuple[Cuts, tuple[CategoryTable, ...]]:
    selection = dict(study.selection)
    own = [dict(table.selection) for table in study.category_tables]
    for variable, place in zip(space.variables, point.cuts, strict=True):
        value = {variable.side: variable.values[place]}
        shared = _acts_on_all(study, variable.observable, variable.tables)
        if shared:
            selection[variable.observable] = selection[variable.observable].model_copy(update=value)
        for number in variable.tables:
            cut = own[number].get(variable.observable, None if shared else selection.get(variable.observable))
            if cut is not None:
                own[number][variable.observable] = cut.model_copy(update=value)
    tables = []
    for number, table in enumerate(study.category_tables):
        axes = space.template_axes(point, number)
        observables = {name: Axis.model_validate({"edges": edges}) for name, edges in axes.items()}
        tables.append(table.model_copy(update={"observables": observables, "selection": own[number]}))
    return selection, tuple(tables)


def _acts_on_all(study: StudyConfig, observable: str, tables: tuple[int, ...]) -> bool:
    """Whether a cut of [selection] has one value for all tables that take it from there."""
    takers = {k for k, table in enumerate(study.category_tables) if observable not in table.selection}
    return observable in study.selection and takers <= set(tables)


def _table_lines(table: CategoryTable) -> Iterator[str]:
    yield "[[category]]"
    yield f"charm = [{', '.join(_quoted(name) for name in table.charm)}]"
    yield f"leptons = [{', '.join(_quoted(name) for name in table.leptons)}]"
    yield "[category.observables]"
    for name, axis in table.observables.items():
        yield f"{name} = [{', '.join(_number(edge) for edge in axis.edges)}]"
    if table.selection:
        yield "[category.selection]"
        yield from _cut_lines(table.selection)


def _cut_lines(cuts: Cuts) -> Iterator[str]:
    for name, cut in cuts.items():
        ends = {"min": cut.min, "max": cut.max}
        inner = ", ".join(f"{side} = {_number(value)}" for side, value in ends.items() if value is not None)
        yield f"{name} = {{ {inner} }}"


def _quoted(text: str) -> str:
    return f'"{text}"'


def _number(value: float) -> str:
    text = f"{value:.10g}"
    return text if any(mark in text for mark in ".e") else f"{text}.0"
