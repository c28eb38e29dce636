"""Projections of one category: fitted components stacked, data on top, residuals underneath."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from matplotlib.axes import Axes
from matplotlib.lines import Line2D
from matplotlib.patches import Patch
from numpy.typing import NDArray

from ..results import ComponentInfo, Projection
from .sheet import Sheet
from .style import BAND, INK, PAPER, QUIET, RULE

GAP, LEFT, LEGEND = 0.8, 0.76, 1.85
UPPER, LOWER, FOOT, HEAD = 2.35, 0.72, 0.5, 0.62
LEGEND_ROWS = 0.45
WIDE, NARROW = 3.0, 2.6
"""Width of a panel: up to two stand beside the legend, three stand under it and are narrower, to be read in print."""


def stacked_projections(
    projections: Sequence[Projection],
    components: Sequence[ComponentInfo],
    colours: Mapping[str, str],
    heading: str,
    note: str,
    data_label: str,
) -> Sheet:
    """A sheet with one panel a projection (all of one category), and one legend for them all."""
    count = len(projections)
    beside = count <= 2
    panel = WIDE if beside else NARROW
    width = LEFT + count * panel + (count - 1) * GAP + (LEGEND if beside else 0.15)
    height = FOOT + LOWER + 0.1 + UPPER + HEAD + (0 if beside else LEGEND_ROWS)
    sheet = Sheet(width, height, heading, note)
    for number, projection in enumerate(projections):
        left = LEFT + number * (panel + GAP)
        lower = sheet.axes(left, FOOT, panel, LOWER)
        upper = sheet.axes(left, FOOT + LOWER + 0.1, panel, UPPER, sharex=lower)
        _draw_stack(upper, projection, colours)
        _draw_residuals(lower, projection)
        if number == 0:
            lower.set_ylabel("residual / σ")
        for axes in (lower, upper):
            axes.yaxis.set_label_coords(-0.53 / panel, 0.5)
    _draw_legend(sheet, projections, components, colours, data_label, beside)
    return sheet


def poisson_interval(counts: NDArray[np.float64]) -> tuple[NDArray[np.float64], NDArray[np.float64]]:
    """Lengths of the central 68.27 % error bars below and above each count (Garwood, Biometrika 28 (1936) 437)."""
    from scipy.special import gammaincinv

    tail = 0.15865525393145707
    below = counts - np.where(counts > 0, gammaincinv(np.maximum(counts, 1e-9), tail), 0.0)
    above = gammaincinv(counts + 1.0, 1.0 - tail) - counts
    return below, above


def _draw_stack(axes: Axes, projection: Projection, colours: Mapping[str, str]) -> None:
    edges = np.asarray(projection.edges)
    widths = np.diff(edges)
    floor = np.zeros(len(widths))
    for component in projection.components:
        roof = floor + np.asarray(component.counts)
        axes.stairs(
            roof / widths,
            edges,
            baseline=floor / widths,
            fill=True,
            facecolor=colours[component.component],
            linewidth=0,
        )
        # A gap of paper keeps neighbours apart in grey print, too.
        axes.stairs(roof / widths, edges, color=PAPER, linewidth=0.6, baseline=None)
        floor = roof
    spread = np.asarray(projection.uncertainty)
    axes.stairs(
        (floor + spread) / widths,
        edges,
        baseline=np.maximum(floor - spread, 0) / widths,
        fill=True,
        facecolor="none",
        edgecolor=BAND,
        hatch="//////",
        linewidth=0,
    )
    axes.stairs(floor / widths, edges, color=INK, linewidth=0.9, baseline=None)
    data = np.asarray(projection.data)
    below, above = poisson_interval(data)
    axes.errorbar(
        (edges[1:] + edges[:-1]) / 2,
        data / widths,
        yerr=(below / widths, above / widths),
        fmt="o",
        color=INK,
        markersize=3,
        elinewidth=0.9,
        zorder=5,
    )
    top = max(((data + above) / widths).max(), ((floor + spread) / widths).max(), 1e-9)
    axes.set_ylim(0, 1.06 * top)
    axes.set_ylabel(f"events per {projection.unit}" if projection.unit else "events per unit")
    axes.tick_params(labelbottom=False)


def _draw_residuals(axes: Axes, projection: Projection) -> None:
    edges = np.asarray(projection.edges)
    fitted = np.sum([component.counts for component in projection.components], axis=0)
    data = np.asarray(projection.data)
    # An empty bin of the fit has no spread to compare with: it shows no residual.
    residual = np.divide(data - fitted, np.sqrt(fitted), out=np.zeros_like(fitted), where=fitted > 0)
    limit = max(3.0, 1.1 * float(np.abs(residual).max()))
    for level in (-2, 2):
        axes.axhline(level, color=RULE, linewidth=0.7, linestyle=(0, (3, 3)))
    axes.stairs(residual, edges, fill=True, facecolor=BAND, edgecolor=PAPER, linewidth=0.4)
    axes.axhline(0, color=QUIET, linewidth=0.7)
    axes.set_ylim(-limit, limit)
    axes.set_yticks([-2, 0, 2] if limit < 6 else [-round(limit / 2), 0, round(limit / 2)])
    axes.set_xlim(edges[0], edges[-1])
    axes.set_xlabel(f"{projection.label} / {projection.unit}" if projection.unit else projection.label)


def _draw_legend(
    sheet: Sheet,
    projections: Sequence[Projection],
    components: Sequence[ComponentInfo],
    colours: Mapping[str, str],
    data_label: str,
    beside: bool,
) -> None:
    shown = {component.component for projection in projections for component in projection.components}
    data = Line2D([], [], color=INK, marker="o", markersize=3.5, linewidth=0.9)
    entries = [(data, data_label), (Patch(facecolor="none", edgecolor=BAND, hatch="//////", linewidth=0), "fit, ±1 σ")]
    # From above, as in the stack.
    entries += [
        (Patch(facecolor=colours[component.name]), component.label)
        for component in reversed(components)
        if component.name in shown
    ]
    # To the right of the panels, or in two rows under the heading.
    left = sheet.width - LEGEND + 0.12 if beside else LEFT
    columns = 1 if beside else -(-len(entries) // 2)
    sheet.figure.legend(
        [handle for handle, _ in entries],
        [label for _, label in entries],
        loc="upper left",
        bbox_to_anchor=(left / sheet.width, (sheet.height - HEAD + 0.08) / sheet.height),
        ncols=columns,
        borderaxespad=0,
        handlelength=1.3,
        handleheight=0.9,
        labelspacing=0.55,
        columnspacing=1.6,
    )
