"""Measurements of two ratios with their average and a prediction: the plane, and each ratio in rows beside it."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np
from matplotlib import rc_context
from matplotlib.axes import Axes
from matplotlib.patches import Polygon
from matplotlib.patheffects import withStroke
from numpy.typing import NDArray

from ..numbers import shortened, with_error
from .sheet import HEADING, Sheet
from .style import BAND, INK, PAPER, QUIET, RC, RULE

Interval = tuple[float, float, float]
"""Low end, value, high end of one standard deviation."""

MEASUREMENT_HUES = ("#0072b2", "#009e73", "#cc79a7", "#e69f00", "#56b4e9", "#727b84")
PREDICTION_HUE = "#d55e00"
REGION_TINTS = ("#9aa6b2", "#ccd4dc", "#e9edf1")
PLANNED_DASHES = (0, (3, 1.5))
SIDE, LEFT, FOOT, NAMES, ROWS, VALUES, ROW = 4.6, 0.75, 0.55, 2.05, 2.3, 1.6, 0.27


@dataclass(frozen=True)
class Drawn:
    """A measurement, an average or a prediction.

    intervals : number of the ratio -> interval. outline : (points, 2) contour whose shadows are the intervals, if both.
    """

    name: str
    intervals: Mapping[int, Interval]
    outline: NDArray[np.float64] | None = None


@dataclass(frozen=True)
class RatioPlane:
    """What is drawn. labels : of the ratios, one or two. regions : confidence in words -> contour of the average.

    planned : the average with measurements that do not exist yet, dashed.
    """

    heading: str
    note: str
    labels: Sequence[str]
    measurements: Sequence[Drawn]
    average: Drawn
    regions: Mapping[str, NDArray[np.float64]]
    prediction: Drawn | None
    planned: Sequence[Drawn] = ()


def ratio_plane(plane: RatioPlane) -> Sheet:
    """A sheet with the plane, if there are two ratios, and rows with the intervals of each."""
    both = len(plane.labels) == 2
    blocks = [_rows_of(plane, ratio) for ratio in range(len(plane.labels))]
    heights = [ROW * len(rows) for rows in blocks]
    width = (LEFT + SIDE if both else 0.0) + NAMES + ROWS + VALUES
    height = max((SIDE if both else 0.0) + FOOT, sum(heights) + FOOT * len(blocks)) + 0.1 + HEADING
    limits = [_limits(plane, ratio) for ratio in range(len(plane.labels))]
    with rc_context(RC):
        sheet = Sheet(width, height, plane.heading, plane.note)
        top = height - HEADING - 0.1
        if both:
            axes = sheet.axes(LEFT, top - SIDE, SIDE, SIDE, xlim=limits[0], ylim=limits[1])
            axes.set(xlabel=plane.labels[0], ylabel=plane.labels[1])
            _draw_plane(axes, plane)
        for ratio, rows in enumerate(blocks):
            axes = sheet.axes(width - VALUES - ROWS, top - heights[ratio], ROWS, heights[ratio], xlim=limits[ratio])
            axes.set_xlabel(plane.labels[ratio])
            _draw_rows(axes, plane, ratio, rows)
            top -= heights[ratio] + FOOT
    return sheet


def _rows_of(plane: RatioPlane, ratio: int) -> list[tuple[int, Drawn]]:
    return [(number, drawn) for number, drawn in enumerate(plane.measurements, 1) if ratio in drawn.intervals] + [
        (0, drawn)
        for drawn in (plane.average, *plane.planned, plane.prediction)
        if drawn is not None and ratio in drawn.intervals
    ]


def _limits(plane: RatioPlane, ratio: int) -> tuple[float, float]:
    ends = [value for _, drawn in _rows_of(plane, ratio) for value in drawn.intervals[ratio]]
    if len(plane.labels) == 2:
        ends += [value for region in plane.regions.values() for value in region[:, ratio]]
    room = 0.06 * (max(ends) - min(ends))
    return min(ends) - room, max(ends) + room


def _draw_plane(axes: Axes, plane: RatioPlane) -> None:
    for (words, region), tint in list(zip(plane.regions.items(), REGION_TINTS, strict=False))[::-1]:
        axes.add_patch(Polygon(region, facecolor=tint, edgecolor=BAND, linewidth=0.6, zorder=1.5))
        lowest = region[region[:, 1].argmin()]
        axes.annotate(
            words, lowest, (0, 2), textcoords="offset points", ha="center", fontsize=7, color=INK, zorder=5,
            path_effects=[withStroke(linewidth=2.5, foreground=tint)],
        )  # fmt: skip
    for number, drawn in enumerate(plane.measurements, 1):
        colour = _hue(number)
        if drawn.outline is not None:
            axes.plot(*drawn.outline.T, color=colour, linewidth=1.3, zorder=3)
            _mark(axes, number, (drawn.intervals[0][1], drawn.intervals[1][1]), "data")
            continue
        for ratio, (low, value, high) in drawn.intervals.items():
            span, line = (axes.axvspan, axes.axvline) if ratio == 0 else (axes.axhspan, axes.axhline)
            span(low, high, color=colour, alpha=0.08, linewidth=0, zorder=1)
            for end in (low, high):
                line(end, color=colour, linewidth=0.8, linestyle=(0, (4, 2)), zorder=2)
            # Bands start at the edge, one after the other, so that their numbers do not hide each other.
            along = 0.97 - 0.055 * sum(d.outline is None for d in plane.measurements[: number - 1])
            if ratio == 0:
                _mark(axes, number, (value, along), axes.get_xaxis_transform())
            else:
                _mark(axes, number, (along, value), axes.get_yaxis_transform())
    for planned in plane.planned:
        if planned.outline is not None:
            axes.plot(*planned.outline.T, color=INK, linewidth=1.0, linestyle=PLANNED_DASHES, zorder=5)
    best = plane.average.intervals
    axes.plot(best[0][1], best[1][1], marker="+", color=INK, markersize=9, markeredgewidth=1.4, zorder=6)
    if plane.prediction is not None:
        _draw_prediction(axes, plane.prediction)


def _draw_prediction(axes: Axes, prediction: Drawn) -> None:
    if prediction.outline is None:
        for ratio, (low, _, high) in prediction.intervals.items():
            (axes.axvspan if ratio == 0 else axes.axhspan)(low, high, color=PREDICTION_HUE, alpha=0.5, zorder=4)
        return
    axes.add_patch(Polygon(prediction.outline, facecolor=PREDICTION_HUE, edgecolor=PREDICTION_HUE, zorder=4))
    place = (prediction.intervals[0][1], float(prediction.outline[:, 1].min()))
    axes.annotate(
        prediction.name, place, (0, -4), textcoords="offset points", ha="center", va="top",
        color=PREDICTION_HUE, fontsize=8, zorder=6,
    )  # fmt: skip


def _draw_rows(axes: Axes, plane: RatioPlane, ratio: int, rows: Sequence[tuple[int, Drawn]]) -> None:
    axes.set_ylim(len(rows) - 0.4, -0.6)
    axes.set_yticks([])
    axes.spines["left"].set_visible(False)
    low, _, high = plane.average.intervals[ratio]
    axes.axvspan(low, high, color=REGION_TINTS[1], alpha=0.6, linewidth=0, zorder=0)
    names, values = -0.02, 1.04
    for y, (number, drawn) in enumerate(rows):
        low, value, high = drawn.intervals[ratio]
        planned = any(drawn is other for other in plane.planned)
        colour = _hue(number) if number else PREDICTION_HUE if drawn is plane.prediction else INK
        weight = "normal" if number or planned else "bold"
        line = {"linewidth": 1.4} if number else {"linewidth": 2.0, "linestyle": PLANNED_DASHES if planned else "solid"}
        axes.plot([low, high], [y, y], color=colour, zorder=3, **line)
        axes.plot(value, y, marker="o" if number else "D", color=colour, markersize=4, zorder=4)
        across = axes.get_yaxis_transform()
        axes.text(
            names - 0.08 * (number > 0),
            y,
            shortened(drawn.name, 25),
            ha="right",
            va="center",
            weight=weight,
            transform=across,
        )
        if number:
            _mark(axes, number, (names - 0.02, y), across)
        text = _told(low, value, high)
        axes.text(values, y, text, va="center", color=QUIET if number else INK, weight=weight, transform=across)
    for y in range(1, len(rows)):
        axes.axhline(y - 0.5, color=RULE, linewidth=0.5, zorder=0.5)


def _told(low: float, value: float, high: float) -> str:
    up, down = high - value, value - low
    if abs(up - down) < 0.005 * (up + down):
        return with_error(value, 0.5 * (up + down))
    number, error = with_error(value, 0.5 * (up + down)).split("\u00a0±\u00a0")
    places = len(error.partition(".")[2])
    return f"{number} +{up:.{places}f} −{down:.{places}f}"


def _hue(number: int) -> str:
    return MEASUREMENT_HUES[(number - 1) % len(MEASUREMENT_HUES)]


def _mark(axes: Axes, number: int, place: tuple[float, float], coordinates: Any) -> None:
    """The number of a measurement in a disc of its colour."""
    axes.annotate(
        str(number), place, xycoords=coordinates, ha="center", va="center", color=PAPER, fontsize=6.5, weight="bold",
        zorder=7, annotation_clip=False,
        bbox={"boxstyle": "circle,pad=0.22", "facecolor": _hue(number), "edgecolor": PAPER, "linewidth": 0.6},
    )  # fmt: skip
