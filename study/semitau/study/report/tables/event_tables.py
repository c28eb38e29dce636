"""Events: the selection, weights, and the numbers behind the projections."""

from __future__ import annotations

from collections.abc import Iterator

from ...numbers import counted, percent
from ...results import Projection, Results
from ..table import Cell, Column, ReportTable, Row, count, number, share, table, words


def cut_flow_table(results: Results) -> ReportTable | None:
    """Expected events after each step."""
    steps = results.cut_flow[0].steps if results.cut_flow else ()
    columns = [Column("Component", text=True, names=("component", "label"))]
    columns += [Column(step.name, names=(f"{step.name}: events", f"{step.name}: efficiency")) for step in steps]
    columns.append(Column("purity"))
    rows = [
        [
            words(component.label, component.component, component.label),
            *(
                Cell(counted(step.events), (step.events, step.efficiency), percent(step.efficiency) if number else "")
                for number, step in enumerate(component.steps)
            ),
            share(component.purity),
        ]
        for component in results.cut_flow
    ]
    return table("cut_flow", "Expected events after each step of the selection", columns, rows)


def reweighting_table(results: Results) -> ReportTable | None:
    """Effective events of what is made by weights, the fewest first."""
    columns = [
        Column("Component", text=True, names=("component", "label")),
        Column("made by weights", text=True),
        Column("events"),
        Column("effective"),
        Column("share"),
    ]
    rows = [
        [
            words(part.label, part.component, part.label),
            words(part.where),
            count(part.events),
            count(part.effective),
            share(part.share),
        ]
        for part in sorted(results.reweightings, key=lambda part: part.share)
    ]
    return table("reweightings", "Effective events of what is made by weights, the fewest first", columns, rows)


def projection_tables(results: Results) -> Iterator[ReportTable]:
    """What each picture of a category shows: to be downloaded, the pictures are for reading."""
    labels = {component.name: component.label for component in results.components}
    for enhanced in (True, False):
        for category in results.categories:
            chosen = [p for p in results.projections if p.category == category.name and bool(p.region) == enhanced]
            if not chosen:
                continue
            names = list(dict.fromkeys(part.component for p in chosen for part in p.components))
            columns = [
                *map(Column, ("observable", "unit", "from", "to", "data", "fitted", "error of fitted")),
                *(Column(labels.get(name, name), names=(name,)) for name in names),
            ]
            rows = [row for projection in chosen for row in _bins(projection, names)]
            name = f"signal_{category.name}" if enhanced else f"projection_{category.name}"
            where = f" with {chosen[0].region}" if enhanced else ""
            found = table(name, f"Projections of {category.label}{where}", columns, rows)
            if found is not None:
                yield found


def _bins(projection: Projection, names: list[str]) -> Iterator[Row]:
    counts = {part.component: part.counts for part in projection.components}
    for place, (low, high) in enumerate(zip(projection.edges, projection.edges[1:], strict=False)):
        parts = [counts[name][place] if name in counts else None for name in names]
        fitted = sum(part for part in parts if part is not None)
        yield Row(
            (
                words(projection.observable),
                words(projection.unit),
                number(low, 3),
                number(high, 3),
                count(projection.data[place]),
                number(fitted, 1),
                number(projection.uncertainty[place], 1),
                *(number(part, 1) for part in parts),
            )
        )
