"""The average with other measurements."""

from __future__ import annotations

from semitau.core.true_minus import formatted

from ...averages.part import AverageResults, WhatIf
from ...averages.summary import OUTCOMES
from ...averages.tables import RATIOS
from ...numbers import GAP, digits_for, signed
from ...results import Results
from ..table import NOTHING, Cell, Column, ReportTable, measured, number, share, table, words


def input_table(results: Results) -> ReportTable | None:
    """Each measured ratio, its weights and its pull."""
    average = results.average
    if average is None:
        return None
    columns = [
        Column("Measurement", text=True),
        Column("ratio", text=True),
        Column("value"),
        Column("statistical", names=("statistical, up", "statistical, down")),
        Column("systematic", names=("systematic, up", "systematic, down")),
        *(Column(f"weight in {ratio.label}") for ratio in average.ratios),
        Column("pull"),
    ]
    rows = []
    for entry in average.inputs:
        places = digits_for(min(filter(None, (*entry.statistical, *entry.systematic)), default=0.0))
        rows.append(
            [
                words(entry.measurement),
                words(RATIOS.get(entry.ratio, entry.ratio)),
                number(entry.value, places),
                _sides(entry.statistical, places),
                _sides(entry.systematic, places),
                *(share(entry.weights.get(ratio.name)) for ratio in average.ratios),
                number(entry.pull, 2, plus=True),
            ]
        )
    return table("average_inputs", "Measurements and their weights", columns, rows)


def ratio_table(results: Results) -> ReportTable | None:
    """The average, as it is and with each planned measurement."""
    average = results.average
    if average is None:
        return None
    columns = [Column("Average", text=True, names=("with", "found at"))]
    for ratio in average.ratios:
        columns.append(Column(ratio.label, names=(ratio.label, f"error of {ratio.label}")))
    columns += [Column("correlation"), Column("from the prediction", unit="σ"), Column("p")]
    rows = [[Cell("as it is", ("", "")), *_numbers(average, average)]]
    for case in average.planned:
        label = f"with {case.planned}, found {OUTCOMES[case.found_at]}"
        rows.append([Cell(label, (case.planned, case.found_at)), *_numbers(average, case)])
    return table("average", "Average, as it is and with planned measurements", columns, rows)


def _numbers(average: AverageResults, case: AverageResults | WhatIf) -> list[Cell]:
    ratios = {ratio.name: ratio for ratio in case.ratios}
    tension = case.tension
    p_value = None if tension is None else tension.p_value
    return [
        *(measured(ratios[ratio.name].value, ratios[ratio.name].error) for ratio in average.ratios),
        number(case.correlation, 2, plus=True),
        number(None if tension is None else tension.sigmas, 2),
        Cell(NOTHING if p_value is None else formatted(p_value, ".2g"), (p_value,)),
    ]


def source_table(results: Results) -> ReportTable | None:
    """Common sources of systematic errors."""
    average = results.average
    if average is None:
        return None
    columns = [Column("Common source", text=True), Column("correlation")]
    columns += [Column(f"error of {ratio.label}") for ratio in average.ratios]
    rows = [
        [
            words(source.label),
            number(source.correlation, 2),
            *(number(source.errors.get(ratio.name), digits_for(ratio.error) + 1) for ratio in average.ratios),
        ]
        for source in average.sources
    ]
    return table("average_sources", "Common sources", columns, rows)


def _sides(spread: tuple[float, float], places: int) -> Cell:
    up, down = spread
    same = signed(up, places)
    return Cell(same if up == down else f"+{same}{GAP}{signed(-down, places)}", (up, -down))
