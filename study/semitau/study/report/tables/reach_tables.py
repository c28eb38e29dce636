"""Reach: expected errors and significance against the amount of data."""

from __future__ import annotations

from semitau.core.true_minus import formatted

from ...numbers import digits_for
from ...reach.part import Reach, ReachDeviation
from ...results import Results
from ..table import NOTHING, Cell, Column, ReportTable, number, share, table, words


def error_table(results: Results) -> ReportTable | None:
    """Expected error of each ratio at each amount of data, by source."""
    reach = results.reach
    if reach is None:
        return None
    labels = {part.ratio: part.label for part in reach.ratios}
    sources = list(dict.fromkeys(name for amount in reach.amounts for part in amount.errors for name in part.sources))
    columns = [
        Column("Data", unit="of the study", names=("times the data",)),
        Column(reach.unit),
        Column("ratio", text=True),
        Column("expected error"),
        Column("finite data"),
        Column("finite templates"),
        Column("systematic"),
        Column("largest systematic", text=True, names=("largest systematic", *(f"from {name}" for name in sources))),
    ]
    rows = []
    for amount in reach.amounts:
        for part in amount.errors:
            places = digits_for(part.total) + 1
            systematic = {k: v for k, v in part.sources.items() if k not in OTHER_SOURCES}
            largest = max(systematic, key=lambda name: systematic[name], default="")
            rows.append(
                [
                    Cell(f"× {amount.factor:.3g}", (amount.factor,)),
                    _amount(amount.amount),
                    words(labels.get(part.ratio, part.ratio)),
                    number(part.total, places),
                    number(part.statistical, places),
                    number(part.template_statistics, places),
                    number(part.systematic, places),
                    Cell(largest or NOTHING, (largest, *(part.sources.get(name) for name in sources))),
                ]
            )
    return table("reach", "Expected error against the amount of data", columns, rows)


OTHER_SOURCES = frozenset({"statistical", "template statistics", "finite data", "finite templates"})


def deviation_table(results: Results) -> ReportTable | None:
    """Expected significance and the chances to see it."""
    reach = results.reach
    if reach is None:
        return None
    columns = [
        Column("Data", unit="of the study", names=("times the data",)),
        Column(reach.unit),
        Column("compared", text=True),
        Column("expected", unit="σ"),
        Column("chance of 3 σ"),
        Column("chance of 5 σ"),
    ]
    rows = [
        [
            Cell(f"× {amount.factor:.3g}", (amount.factor,)),
            _amount(amount.amount),
            words(_label(reach, part)),
            number(part.sigmas, 2),
            share(part.evidence),
            share(part.discovery),
        ]
        for amount in reach.amounts
        for part in amount.deviations
    ]
    return table("reach_significance", "Expected significance against the amount of data", columns, rows)


def compared_table(results: Results) -> ReportTable | None:
    """True values and what they are compared with."""
    columns = [Column("Ratio", text=True), Column("assumed true"), Column("compared with", names=("value", "error"))]
    rows = []
    for part in results.reach.ratios if results.reach is not None else ():
        against = NOTHING if part.value is None else f"{part.value:.4g} ± {part.error or 0.0:.2g}"
        rows.append([words(part.label), number(part.true, 4), Cell(against, (part.value, part.error))])
    return table("reach_compared", "Assumed true ratios", columns, rows)


def _label(reach: Reach, part: ReachDeviation) -> str:
    return next((item.label for item in reach.needed if item.name == part.name), part.name)


def _amount(amount: float) -> Cell:
    return Cell(formatted(amount, ".2e" if amount >= 1e5 else ".4g"), (amount,))
