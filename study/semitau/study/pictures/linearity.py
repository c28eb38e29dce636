"""Fitted against injected ratio: the fit must follow what goes in."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from matplotlib.axes import Axes

from ..numbers import counted, with_error
from ..results import Linearity
from .sheet import Panels, Sheet
from .style import BAND, INK, QUIET, ratio_colour

LOWER, BETWEEN = 0.85, 0.12


def linearity(ratios: Sequence[Linearity]) -> Sheet:
    """A sheet with one panel a ratio: means above, bias in units of the fit error below."""
    panels = Panels(count=len(ratios), columns=2, width=3.65, height=3.27, left=0.8, foot=0.5, head=0.5)
    toys = ratios[0].points[0].toys + ratios[0].points[0].failures
    sheet = Sheet(*panels.sheet_size, "Linearity", f"{counted(toys)} toys at each point")
    for number, ratio in enumerate(ratios):
        left, bottom = panels.corner(number)
        lower = sheet.axes(left, bottom, panels.width, LOWER)
        raised = LOWER + BETWEEN
        upper = sheet.axes(left, bottom + raised, panels.width, panels.height - raised, sharex=lower)
        _draw_means(upper, ratio, ratio_colour(number))
        _draw_bias(lower, ratio, ratio_colour(number))
        lower.set_ylabel("bias / σ")
        for axes in (lower, upper):
            axes.yaxis.set_label_coords(-0.15, 0.5)
    return sheet


def _draw_means(axes: Axes, ratio: Linearity, colour: str) -> None:
    injected = np.array([point.injected for point in ratio.points])
    mean = np.array([point.mean for point in ratio.points])
    spread = np.array([point.spread for point in ratio.points])
    margin = 0.5 * (injected.max() - injected.min()) / max(len(injected) - 1, 1) or 0.1 * injected[0]
    ends = np.array([injected.min() - margin, injected.max() + margin])
    axes.plot(ends, ends, color=INK, linewidth=0.9)
    axes.errorbar(injected, mean, yerr=spread, fmt="o", color=colour, markersize=4.5, elinewidth=1.2)
    axes.set_xlim(*ends)
    axes.set_ylabel(f"mean fitted {ratio.label}")
    axes.tick_params(labelbottom=False)
    axes.set_title(ratio.label, weight="bold", pad=18)
    text = f"slope {with_error(ratio.slope, ratio.slope_error)}; bars: error of one fit"
    axes.text(0, 1.02, text, transform=axes.transAxes, fontsize=8, color=QUIET, va="bottom")


def _draw_bias(axes: Axes, ratio: Linearity, colour: str) -> None:
    injected = np.array([point.injected for point in ratio.points])
    spread = np.array([point.spread for point in ratio.points])
    bias = (np.array([point.mean for point in ratio.points]) - injected) / spread
    error = np.array([point.mean_error for point in ratio.points]) / spread
    axes.axhspan(-0.1, 0.1, color=BAND, alpha=0.25, linewidth=0)
    axes.axhline(0, color=INK, linewidth=0.9)
    axes.errorbar(injected, bias, yerr=error, fmt="o", color=colour, markersize=4.5, elinewidth=1.2)
    limit = max(0.25, 1.15 * float((np.abs(bias) + error).max()))
    axes.set_ylim(-limit, limit)
    axes.set_xlabel(f"injected {ratio.label}")
