"""Pulls of the toys beside the unit Gaussian that they should follow."""

from __future__ import annotations

import math

import numpy as np
from matplotlib.axes import Axes

from ..numbers import counted, with_error
from ..results import ToyRatio, Toys
from .sheet import Panels, Sheet
from .style import INK, QUIET, ratio_colour


def toy_pulls(toys: Toys) -> Sheet:
    """A sheet with one panel a ratio."""
    panels = Panels(count=len(toys.ratios), columns=2, width=3.7, height=2.5, left=0.72, foot=0.5, head=0.68)
    valid = toys.number - toys.failures
    note = f"{counted(valid)} toys fitted, {counted(toys.failures)} failed"
    sheet = Sheet(*panels.sheet_size, "Pulls of the toys", note)
    for number, ratio in enumerate(toys.ratios):
        axes = sheet.axes(*panels.corner(number), panels.width, panels.height)
        _draw(axes, ratio, ratio_colour(number))
        axes.set_ylabel("toys per bin")
    return sheet


def _draw(axes: Axes, ratio: ToyRatio, colour: str) -> None:
    edges, counts = np.asarray(ratio.pulls.edges), np.asarray(ratio.pulls.counts, dtype=float)
    axes.stairs(counts, edges, fill=True, facecolor=colour, alpha=0.30, label="toys")
    axes.stairs(counts, edges, color=colour, linewidth=0.9)
    x = np.linspace(edges[0], edges[-1], 400)
    expected = (counts.sum() + ratio.pulls.outside) * np.diff(edges).mean() / math.sqrt(2 * math.pi)
    axes.plot(x, expected * np.exp(-(x**2) / 2), color=INK, linewidth=1.2, label="unit Gaussian")
    axes.set_xlim(edges[0], edges[-1])
    axes.set_ylim(0, 1.12 * max(counts.max(), expected))
    axes.set_xlabel(f"({ratio.label} fitted − injected) / error")
    axes.set_title(ratio.label, pad=30, weight="bold", color=INK)
    coverage = ",  ".join(f"{100 * c.level:.1f} %: {100 * c.fraction:.1f} %" for c in ratio.coverage)
    lines = (
        f"mean {with_error(ratio.pull_mean, ratio.pull_mean_error)},  "
        f"width {with_error(ratio.pull_width, ratio.pull_width_error)}\ncoverage at {coverage}"
    )
    axes.text(0, 1.02, lines, transform=axes.transAxes, fontsize=8, color=QUIET, va="bottom", linespacing=1.35)
    axes.legend(loc="upper right", borderaxespad=0, handlelength=1.3)
