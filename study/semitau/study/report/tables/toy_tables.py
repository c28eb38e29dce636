"""Toys at the injected ratios, and the line of fitted against injected ratio."""

from __future__ import annotations

from ...numbers import GAP, digits_for, percent
from ...results import Results, ToyRatio
from ..table import NOTHING, Cell, Column, ReportTable, chance, count, measured, number, table, words


def toy_table(results: Results) -> ReportTable | None:
    """Bias, pulls and coverage of each ratio."""
    ratios = results.toys.ratios if results.toys is not None else ()
    levels = [part.level for part in ratios[0].coverage] if ratios else []
    columns = [
        Column("Ratio", text=True),
        Column("bias", names=("bias", "error of bias")),
        Column("bias / error of one fit", names=("bias / error of one fit", "its error")),
        Column("pull mean", names=("pull mean", "error of pull mean")),
        Column("pull width", names=("pull width", "error of pull width")),
    ]
    for level in levels:
        name = f"coverage at {percent(level).replace(GAP, ' ')}"
        columns.append(Column(name, names=(name, f"{name}, low", f"{name}, high")))
    columns.append(Column("toys for a bias below a tenth", names=("toys needed",)))
    return table("toys", "Bias, pulls and coverage", columns, [_toy_cells(ratio) for ratio in ratios])


def _toy_cells(ratio: ToyRatio) -> list[Cell]:
    relative, error = ratio.bias / ratio.mean_error, ratio.bias_error / ratio.mean_error
    return [
        words(ratio.label),
        measured(ratio.bias, ratio.bias_error),
        Cell(f"{percent(relative)}{GAP}±{GAP}{percent(error)}", (relative, error)),
        measured(ratio.pull_mean, ratio.pull_mean_error),
        measured(ratio.pull_width, ratio.pull_width_error),
        *(
            Cell(
                percent(part.fraction),
                (part.fraction, part.low, part.high),
                f"{percent(part.low)} to {percent(part.high)}",
            )
            for part in ratio.coverage
        ),
        Cell(NOTHING, (None,)) if ratio.toys_needed <= 0 else count(ratio.toys_needed),
    ]


def line_table(results: Results) -> ReportTable | None:
    """The straight line through the points of each ratio."""
    columns = [
        Column("Ratio", text=True),
        Column("slope", names=("slope", "error of slope")),
        Column("intercept", names=("intercept", "error of intercept")),
        Column("p of the line"),
    ]
    rows = [
        [
            words(line.label),
            measured(line.slope, line.slope_error),
            measured(line.intercept, line.intercept_error),
            chance(line.p_value),
        ]
        for line in results.linearity
    ]
    return table("linearity", "Straight line through mean fitted against injected ratio", columns, rows)


def point_table(results: Results) -> ReportTable | None:
    """The points themselves."""
    columns = [
        Column("Ratio", text=True),
        Column("injected"),
        Column("mean fitted", names=("mean fitted", "error of mean")),
        Column("error of one fit"),
        Column("toys"),
        Column("failed"),
    ]
    rows = [
        [
            words(line.label),
            number(point.injected, digits_for(point.mean_error)),
            measured(point.mean, point.mean_error),
            number(point.spread, digits_for(point.spread) + 1),
            count(point.toys),
            count(point.failures),
        ]
        for line in results.linearity
        for point in line.points
    ]
    return table("linearity_points", "Mean fitted ratio at each injected one", columns, rows)
