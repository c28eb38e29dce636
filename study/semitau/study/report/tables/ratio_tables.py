"""Ratios beside what went in, and their uncertainty by source."""

from __future__ import annotations

from collections.abc import Iterator, Mapping

from ...numbers import digits_for
from ...results import Budget, Results
from ..table import Cell, Column, ReportTable, Row, number, table, words


def ratio_table(results: Results) -> ReportTable | None:
    """Each ratio, fitted and injected, with the three parts of its error."""
    columns = [
        Column("Ratio", text=True),
        Column("injected"),
        Column("fitted"),
        Column("error"),
        Column("pull"),
        Column("finite data"),
        Column("finite templates"),
        Column("systematic"),
    ]
    rows = []
    for ratio in results.ratios:
        places = digits_for(ratio.error) + 1
        rows.append(
            [
                words(ratio.label),
                number(ratio.injected, places),
                number(ratio.value, places),
                number(ratio.error, places),
                number(ratio.pull, 2, plus=True, absent="hidden"),
                number(ratio.statistical, places),
                number(ratio.template_statistics, places),
                number(ratio.systematic, places),
            ]
        )
    return table("ratios", "Fitted ratios and the parts of their error", columns, rows)


def budget_table(results: Results) -> ReportTable | None:
    """Error of each ratio by source, and by how much it falls with the source held."""
    labels = {ratio.name: ratio.label for ratio in results.ratios}
    columns = [Column("Source", text=True)]
    for budget in results.budget:
        label = labels[budget.ratio]
        columns += [Column(f"error of {label}"), Column(f"fall of {label} error if held")]
    sources = {row.source: row.label for budget in results.budget for row in budget.rows}
    largest = {
        source: max(
            row.error / budget.total for budget in results.budget for row in budget.rows if row.source == source
        )
        for source in sources
        if all(budget.total for budget in results.budget)
    }
    ordered = sorted(sources, key=lambda source: -largest.get(source, 0.0))
    rows = [Row((words(sources[source]), *_cells(results, source))) for source in ordered]
    if rows:
        total = [cell for budget in results.budget for cell in (_number(budget.total, budget), Cell("", (None,)))]
        rows.append(Row((words("total"), *total), total=True))
    return table("budget", "Error of each ratio by source", columns, rows)


def _cells(results: Results, source: str) -> Iterator[Cell]:
    for budget in results.budget:
        errors: Mapping[str, tuple[float, float | None]] = {row.source: (row.error, row.held) for row in budget.rows}
        error, held = errors.get(source, (None, None))
        yield _number(error, budget)
        yield _number(held, budget)


def _number(value: float | None, budget: Budget) -> Cell:
    return number(value, digits_for(budget.total) + 1)
