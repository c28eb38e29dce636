"""The uncertainty of each ratio by source, as bars."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np

from ..results import Budget
from .sheet import Sheet
from .style import QUIET, RULE, ratio_colour

BAR, BETWEEN = 0.165, 0.1
"""Inches: thickness of a bar, and the gap between two sources."""


def budget_bars(
    budgets: Sequence[Budget], values: Mapping[str, float], labels: Mapping[str, str], scale: str = "fitted"
) -> Sheet:
    """A sheet with one group of bars a source, the largest first, in per cent of the ratio.

    values, labels : ratio name -> value, label. scale : which value that is, "fitted" or "injected".
    """
    named = {row.source: row.label for budget in budgets for row in budget.rows}
    share = {
        budget.ratio: {row.source: 100 * row.error / abs(values[budget.ratio]) for row in budget.rows}
        for budget in budgets
    }
    sources = sorted(named, key=lambda source: -max(parts.get(source, 0.0) for parts in share.values()))
    rows = ["total", *sources]
    totals = {budget.ratio: 100 * budget.total / abs(values[budget.ratio]) for budget in budgets}
    margin = 0.4 + 0.068 * max(len(named.get(row, "total")) for row in rows)
    row = BAR * len(budgets) + BETWEEN
    height = row * len(rows)
    sheet = Sheet(margin + 5.6, height + 1.2, "Uncertainty by source", f"in per cent of the {scale} ratio")
    axes = sheet.axes(margin, 0.5, 5.0, height)
    thickness = BAR / row
    for number, budget in enumerate(budgets):
        lengths = np.array([totals[budget.ratio], *(share[budget.ratio].get(source, 0.0) for source in sources)])
        offsets = np.arange(len(rows)) + (number - (len(budgets) - 1) / 2) * thickness
        axes.barh(offsets, lengths, thickness * 0.92, color=ratio_colour(number), label=labels[budget.ratio])
        for offset, length in zip(offsets, lengths, strict=True):
            axes.annotate(
                f"{length:.1f}" if length >= 0.05 else "< 0.1", (length, offset), xytext=(3, 0),
                textcoords="offset points", va="center", fontsize=7, color=QUIET,
            )  # fmt: skip
    axes.set_yticks(np.arange(len(rows)), ["total", *(named[source] for source in sources)])
    axes.set_ylim(len(rows) - 0.5, -0.5)
    axes.axhline(0.5, color=RULE, linewidth=0.7)
    axes.set_xlim(0, 1.1 * max(totals.values()))
    axes.set_xlabel("error / ratio  (%)")
    axes.tick_params(axis="y", length=0)
    axes.spines["left"].set_visible(False)
    axes.legend(loc="lower right", bbox_to_anchor=(1.0, 0.02))
    return sheet
