"""Correlations of the fitted parameters, those that matter for the ratios first."""

from __future__ import annotations

import numpy as np
from matplotlib import rc_context
from matplotlib.colors import LinearSegmentedColormap
from matplotlib.patches import Rectangle

from ..results import Fit
from .sheet import Sheet
from .style import INK, PAPER, QUIET, RC, RULE

MOST = 22
"""Parameters shown at most: more would be unreadable in print."""

CELL = 0.33


def correlation_matrix(fit: Fit) -> Sheet:
    """A sheet with the matrix as coloured cells, in per cent."""
    chosen = shown_parameters(fit)
    matrix = np.array(fit.correlation)[np.ix_(chosen, chosen)]
    labels = [fit.parameters[index].label for index in chosen]
    margin = 0.25 + 0.059 * max(map(len, labels))
    side = CELL * len(chosen)
    left_out = len(fit.parameters) - len(chosen)
    note = (
        f"in per cent; {left_out} parameters with less to do with the ratios are left out"
        if left_out
        else "in per cent"
    )
    sheet = Sheet(margin + side + 0.3, margin + side + 0.65, "Correlations", note)
    axes = sheet.axes(margin, margin, side, side)
    colours = LinearSegmentedColormap.from_list("two_hues", ["#0072b2", PAPER, "#d55e00"])
    with rc_context(RC):
        shown = np.where(np.eye(len(chosen), dtype=bool), 0.0, matrix)
        axes.pcolormesh(shown[::-1], cmap=colours, vmin=-1, vmax=1, edgecolors=PAPER, linewidth=1.2)
    last = len(chosen) - 1
    for row, values in enumerate(matrix):
        for column, value in enumerate(values):
            percent = round(100 * value)
            if row == column:
                axes.add_patch(Rectangle((column, last - row), 1, 1, facecolor=RULE, edgecolor=PAPER, linewidth=1.2))
            elif percent:
                colour = PAPER if abs(value) > 0.65 else INK
                axes.text(
                    column + 0.5, last - row + 0.5, f"{percent}".replace("-", "−"), color=colour, fontsize=7,
                    ha="center", va="center",
                )  # fmt: skip
    axes.set_xticks(np.arange(len(chosen)) + 0.5, labels, rotation=90)
    axes.set_yticks(np.arange(len(chosen)) + 0.5, labels[::-1])
    axes.tick_params(length=0, labelcolor=INK, color=QUIET)
    for spine in axes.spines.values():
        spine.set_visible(False)
    return sheet


def shown_parameters(fit: Fit) -> list[int]:
    """Indices of the parameters to show: the ratios, then others in their order, the least correlated left out."""
    ratios = [index for index, parameter in enumerate(fit.parameters) if parameter.kind == "ratio"]
    others = [index for index, parameter in enumerate(fit.parameters) if parameter.kind != "ratio"]
    weight = {index: max((abs(fit.correlation[index][ratio]) for ratio in ratios), default=0.0) for index in others}
    room = max(MOST - len(ratios), 0)
    kept = set(sorted(others, key=lambda index: -weight[index])[:room])
    return ratios + [index for index in others if index in kept]
