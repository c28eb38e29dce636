"""Likelihood curves of the ratios, and the region of two of them."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib import rc_context
from matplotlib.axes import Axes
from numpy.typing import NDArray

from .sheet import Panels, Sheet
from .style import BAND, INK, QUIET, RC, RULE, ratio_colour


@dataclass(frozen=True)
class Curve:
    """−2 ln L above its minimum against one ratio: (points,) arrays; low, high: ends of the 68.3 % interval."""

    label: str
    points: NDArray[np.float64]
    heights: NDArray[np.float64]
    low: float
    high: float


@dataclass(frozen=True)
class Plane:
    """−2 ln L above its minimum over two ratios, (first points, second points), with the best and the injected values.

    injected : None while the ratios are hidden: the distance would look like a tension and is none.
    levels : confidence in words -> height.
    """

    labels: tuple[str, str]
    first: NDArray[np.float64]
    second: NDArray[np.float64]
    heights: NDArray[np.float64]
    best: tuple[float, float]
    injected: tuple[float, float] | None
    levels: Mapping[str, float]


def likelihood(curves: Sequence[Curve], plane: Plane | None, hidden: bool = False) -> Sheet:
    """A sheet with one panel a curve, and the region at the right. hidden : the ratios are not the true ones."""
    count = len(curves) + (plane is not None)
    panels = Panels(count=count, columns=3, width=3.2, height=2.9, left=0.85, foot=0.5, head=0.2)
    note = "all other parameters fitted at each point" + ("; the ratios are hidden" if hidden else "")
    with rc_context(RC):
        sheet = Sheet(*panels.sheet_size, "Likelihood", note)
        for number, curve in enumerate(curves):
            axes = sheet.axes(*panels.corner(number), panels.width, panels.height)
            _draw_curve(axes, curve, ratio_colour(number))
            if number == 0:
                axes.set_ylabel("−2 ln L above the minimum")
        if plane is not None:
            _draw_plane(sheet.axes(*panels.corner(len(curves)), panels.width, panels.height), plane)
    return sheet


def _draw_curve(axes: Axes, curve: Curve, colour: str) -> None:
    for level in (1.0, 4.0):
        axes.axhline(level, color=RULE, linewidth=0.7, linestyle=(0, (3, 3)))
    axes.axvspan(curve.low, curve.high, color=colour, alpha=0.15, linewidth=0)
    axes.plot(curve.points, curve.heights, color=colour, linewidth=1.4)
    axes.set_xlim(curve.points[0], curve.points[-1])
    axes.set_ylim(0, min(9.0, 1.02 * float(np.nanmax(curve.heights))))
    axes.set_xlabel(curve.label)


def _draw_plane(axes: Axes, plane: Plane) -> None:
    names, heights = zip(*sorted(plane.levels.items(), key=lambda level: level[1]), strict=True)
    drawn = axes.contour(
        plane.first,
        plane.second,
        plane.heights.T,
        levels=list(heights),
        # The inner one is for reading off errors; confidence falls off with the ink.
        colors=[BAND, INK, INK, QUIET],
        linewidths=[0.9, 1.5, 1.0, 0.8],
        linestyles=[(0, (3, 2)), "solid", "solid", "solid"],
    )
    axes.clabel(drawn, fmt=dict(zip(heights, names, strict=True)), fontsize=7)
    axes.plot(*plane.best, marker="+", color=INK, markersize=8, linestyle="", label="fitted")
    if plane.injected is not None:
        axes.plot(*plane.injected, marker="x", color=ratio_colour(0), markersize=6, linestyle="", label="made with")
    axes.set_xlabel(plane.labels[0])
    axes.set_ylabel(plane.labels[1])
    axes.legend(loc="upper right", borderaxespad=0, handlelength=1)
