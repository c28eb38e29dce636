"""Nuisances, parameters and quality of the fit."""

from __future__ import annotations

from ...numbers import digits_for
from ...results import NuisanceResult, Results
from ..table import Cell, Column, ReportTable, chance, count, measured, number, table, words


def nuisance_table(results: Results) -> ReportTable | None:
    """What the fit learned of each constrained parameter, and how far it moves each ratio."""
    errors = {ratio.name: ratio.error for ratio in results.ratios}
    columns = [
        Column("Nuisance", text=True, names=("nuisance", "label")),
        Column("group", text=True),
        Column("pull", unit="σ"),
        Column("constraint"),
    ]
    for ratio in results.ratios:
        columns += [Column(f"moves {ratio.label}, up"), Column(f"moves {ratio.label}, down")]
    rows = [_nuisance_cells(nuisance, errors) for nuisance in results.nuisances]
    return table("nuisances", "Constrained parameters, the strongest first", columns, rows)


def _nuisance_cells(nuisance: NuisanceResult, errors: dict[str, float]) -> list[Cell]:
    shifts = {shift.ratio: shift for shift in nuisance.shifts}
    cells = [
        words(nuisance.label, nuisance.name, nuisance.label),
        words(nuisance.group),
        number(nuisance.pull, 2, plus=True),
        number(nuisance.constraint, 2),
    ]
    for ratio, error in errors.items():
        places = digits_for(error) + 1
        shift = shifts.get(ratio)
        cells.append(number(None if shift is None else shift.up, places, plus=True))
        cells.append(number(None if shift is None else shift.down, places, plus=True))
    return cells


def parameter_table(results: Results) -> ReportTable | None:
    """Every parameter of the fit."""
    columns = [
        Column("Parameter", text=True, names=("parameter", "label")),
        Column("kind", text=True),
        Column("made with"),
        Column("constraint"),
        Column("fitted", names=("fitted", "error")),
    ]
    rows = [
        [
            words(parameter.label, parameter.name, parameter.label),
            words(parameter.kind),
            number(parameter.injected, digits_for(parameter.error)),
            Cell("free" if parameter.constraint is None else f"± {parameter.constraint:.2f}", (parameter.constraint,)),
            measured(parameter.value, parameter.error),
        ]
        for parameter in results.fit.parameters
    ]
    return table("parameters", "Parameters of the fit", columns, rows)


def correlation_table(results: Results) -> ReportTable | None:
    """The whole correlation matrix: to be downloaded, too large to be read."""
    names = [parameter.name for parameter in results.fit.parameters]
    rows = [
        [words(name), *(number(value, 2) for value in values)]
        for name, values in zip(names, results.fit.correlation, strict=False)
    ]
    return table("correlations", "Correlations of all parameters", [Column("parameter"), *map(Column, names)], rows)


def category_table(results: Results) -> ReportTable | None:
    """Goodness of fit of each category."""
    columns = [Column("Category", text=True), Column("statistic"), Column("bins"), Column("p")]
    found = results.quality.categories if results.quality is not None else ()
    rows = [[words(c.label), number(c.statistic, 1), count(c.bins), chance(c.p_value)] for c in found]
    return table("quality", "Goodness of fit by category", columns, rows)


def shape_table(results: Results) -> ReportTable | None:
    """Shape of each projection."""
    columns = [Column("Category", text=True), Column("observable", text=True), Column("distance"), Column("p")]
    found = results.quality.projections if results.quality is not None else ()
    rows = [[words(p.label), words(p.observable), number(p.distance, 3), chance(p.p_value)] for p in found]
    return table("shapes", "Shape of each projection: Kolmogorov distance", columns, rows)


def worst_table(results: Results) -> ReportTable | None:
    """Bins with the largest contributions."""
    columns = [
        Column("Category", text=True),
        Column("range", text=True),
        Column("seen"),
        Column("fitted"),
        Column("significance", unit="σ"),
    ]
    found = results.quality.worst if results.quality is not None else ()
    rows = [
        [
            words(place.category),
            words(place.where),
            count(place.observed),
            number(place.expected, 1),
            number(place.significance, 1, plus=True),
        ]
        for place in found
    ]
    return table("worst_bins", "Bins that the fit describes worst", columns, rows)
