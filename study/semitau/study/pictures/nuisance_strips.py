"""Nuisances: what the fit learned of each, beside how far each moves the ratios.

One line a nuisance. At the left its auxiliary measurement as a grey strip of one standard deviation to both sides, and
on it the fitted value with its error. At the right one column a ratio: a wedge from nothing to the change of the ratio
when the nuisance goes up by its fitted error, filled, and when it goes down, open. Lengths are in errors of the ratio.
"""

from __future__ import annotations

from collections.abc import Sequence

from matplotlib.axes import Axes
from matplotlib.patches import Polygon

from ..results import NuisanceResult, RatioResult
from .sheet import Sheet
from .style import INK, PAPER, QUIET, RULE, ratio_colour

MOST = 24
ROW, LEARNED, MOVED, GAP, FOOT, HEAD = 0.24, 2.1, 2.3, 0.35, 0.5, 0.95


def nuisance_strips(nuisances: Sequence[NuisanceResult], ratios: Sequence[RatioResult]) -> Sheet:
    """A sheet with the strongest nuisances on top."""
    shown = nuisances[:MOST]
    margin = 0.4 + 0.068 * max(len(nuisance.label) for nuisance in shown)
    height = ROW * len(shown)
    note = "strongest first; filled: nuisance higher by its fitted error, open: lower"
    if len(nuisances) > MOST:
        note += f"; {len(nuisances) - MOST} weaker ones are not shown"
    width = margin + LEARNED + len(ratios) * (GAP + MOVED) + 0.3
    sheet = Sheet(width, height + FOOT + HEAD, "Nuisances", note)
    axes = sheet.axes(margin, FOOT, LEARNED, height)
    _draw_learned(axes, shown)
    axes.set_yticks(range(len(shown)), [nuisance.label for nuisance in shown])
    errors = {ratio.name: ratio.error for ratio in ratios}
    reach = max(
        (abs(end) / errors[shift.ratio] for n in shown for shift in n.shifts for end in (shift.down, shift.up) if end),
        default=1.0,
    )
    for number, ratio in enumerate(ratios):
        left = margin + LEARNED + GAP + number * (GAP + MOVED)
        _draw_moved(sheet.axes(left, FOOT, MOVED, height), shown, ratio, ratio_colour(number), 1.12 * reach)
    return sheet


def _plain(axes: Axes, rows: int) -> None:
    axes.set_ylim(rows - 0.5, -0.5)
    axes.spines["left"].set_visible(False)
    axes.tick_params(axis="y", length=0)


def _draw_learned(axes: Axes, nuisances: Sequence[NuisanceResult]) -> None:
    reach = max(1.35, *(abs(nuisance.pull) + nuisance.constraint + 0.1 for nuisance in nuisances))
    axes.barh(range(len(nuisances)), [2.0] * len(nuisances), 0.62, left=-1.0, color=RULE, alpha=0.55)
    axes.axvline(0, color=PAPER, linewidth=1.0)
    for row, nuisance in enumerate(nuisances):
        axes.plot(
            [nuisance.pull - nuisance.constraint, nuisance.pull + nuisance.constraint], [row, row], color=INK, lw=1.6
        )
        axes.plot(nuisance.pull, row, marker="|", markersize=7, markeredgewidth=1.6, color=INK)
    _plain(axes, len(nuisances))
    axes.set_xlim(-reach, reach)
    axes.set_title("what the fit learned", color=QUIET, fontsize=8.5)
    axes.set_xlabel("σ of the auxiliary measurement")


def _draw_moved(axes: Axes, nuisances: Sequence[NuisanceResult], ratio: RatioResult, colour: str, reach: float) -> None:
    for row, nuisance in enumerate(nuisances):
        for shift in nuisance.shifts:
            if shift.ratio != ratio.name:
                continue
            for end, filled in ((shift.up, True), (shift.down, False)):
                if end is not None:
                    tip = end / ratio.error
                    corners = [(0.0, row - 0.3), (0.0, row + 0.3), (tip, row)]
                    axes.add_patch(
                        Polygon(corners, facecolor=colour if filled else PAPER, edgecolor=colour, linewidth=0.9)
                    )
    _plain(axes, len(nuisances))
    axes.set_yticks([])
    axes.axvline(0, color=QUIET, linewidth=0.7)
    axes.set_xlim(-reach, reach)
    axes.set_title(f"moves {ratio.label}", color=INK, weight="bold", fontsize=8.5)
    axes.set_xlabel("errors of the ratio")
