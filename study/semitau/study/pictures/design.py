"""Pictures of a design: error against each cut, binnings compared, information along the axes."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from functools import partial

from matplotlib import rc_context
from matplotlib.axes import Axes
from matplotlib.ticker import FuncFormatter, LogLocator, MaxNLocator, NullFormatter

from ..design.part import Design, DesignAxis, DesignChoice, DesignCurve, DesignMerging
from .sheet import Panels, Sheet
from .style import BAND, INK, QUIET, RC, RULE, ratio_colour

Drawing = tuple[str, str, str, Callable[[], Sheet]]

START, PROPOSED = "#e69f00", "#0072b2"
MOST_SHOWN = 25.0
"""Per cent above which a curve leaves its panel: what matters lies near the minimum."""
LINE = 0.21
"""Height of a line of the binnings, inches."""
OVER_RULES = {"facecolor": "white", "edgecolor": "none", "pad": 1.0}
"""Words that stand on a rule hide it."""


def design_drawings(design: Design) -> Iterator[Drawing]:
    """Name, title, caption and drawing of each picture of a design."""
    if design.curves:
        yield (
            "design_cuts",
            "Error against each cut",
            f"Expected error, relative to the study as it is. Band: the proposed one rises by {100 * design.flat:g} %.",
            partial(error_against_cuts, design),
        )
    if design.choices:
        yield (
            "design_binnings",
            "Binnings compared",
            "Expected error with other axes, relative to the proposed point; and how it grows as edges are taken away.",
            partial(binnings_compared, design),
        )
    if design.axes:
        yield (
            "design_axes",
            "Information along the axes",
            "Share of each bin of an axis in the information on the ratios, summed over all other axes.",
            partial(information_along_axes, design),
        )


def error_against_cuts(design: Design) -> Sheet:
    """A panel a cut, with starting and proposed point."""
    panels = Panels(len(design.curves), 3, width=2.6, height=2.0, left=0.75, foot=0.55, head=0.32)
    with rc_context(RC):
        sheet = Sheet(*panels.sheet_size, "Expected error against each cut", _note(design))
        for number, curve in enumerate(design.curves):
            axes = sheet.axes(*panels.corner(number), panels.width, panels.height)
            _draw_curve(axes, design, curve)
            if number == 0:
                axes.legend(loc="upper center", fontsize=7, handlelength=2.2)
    return sheet


def _note(design: Design) -> str:
    what = {"mean": "mean of the relative errors", "area": "size of the joint region"}.get(design.minimised)
    labels = dict(zip(design.ratios, design.labels, strict=True))
    return what or f"error of {labels.get(design.minimised, design.minimised)}"


def _draw_curve(axes: Axes, design: Design, curve: DesignCurve) -> None:
    gained = design.proposed.merit / design.start.merit
    axes.axvspan(*curve.flat, color=BAND, alpha=0.22, linewidth=0)
    lines = (("now", curve.at_start, 1.0, START, "dashed"), ("proposed", curve.at_proposed, gained, PROPOSED, "solid"))
    low = 0.0
    for label, merits, scale, colour, style in lines:
        known = [(x, 100.0 * (m * scale - 1.0)) for x, m in zip(curve.values, merits, strict=True) if m is not None]
        axes.plot(*zip(*known, strict=True), color=colour, linestyle=style, marker=".", markersize=3, label=label)
        low = min(low, *(y for _, y in known))
    axes.plot([curve.start], [0.0], marker="o", markersize=6, markerfacecolor="white", color=START, clip_on=False)
    axes.plot([curve.proposed], [100.0 * (gained - 1.0)], marker="D", markersize=5.5, color=PROPOSED, clip_on=False)
    top = max(_top(curve.at_start, 1.0), _top(curve.at_proposed, gained))
    span = max(top - low, 1.0)
    axes.set_ylim(low - 0.12 * span, top + 0.3 * span)
    axes.set_xlim(curve.values[0], curve.values[-1])
    axes.set_title("does not matter" if not curve.matters else "", fontsize=8, color=QUIET, loc="right")
    axes.set_xlabel(f"{curve.label} / {curve.unit}" if curve.unit else curve.label, fontsize=8)
    axes.set_ylabel("change of the error, %")
    axes.xaxis.set_major_locator(MaxNLocator(6))


def _top(merits: Sequence[float | None], scale: float) -> float:
    return min(max(100.0 * (m * scale - 1.0) for m in merits if m is not None), MOST_SHOWN)


def binnings_compared(design: Design) -> Sheet:
    """A line a choice of axes, by table; beside it the error against the number of bins."""
    tables = list(dict.fromkeys(choice.table for choice in design.choices))
    mine = {table: [choice for choice in design.choices if choice.table == table] for table in tables}
    heights = {table: max(LINE * len(own), 1.5) for table, own in mine.items()}
    total = sum(height + 0.95 for height in heights.values()) + 0.6
    with rc_context(RC):
        sheet = Sheet(9.4, total, "Binnings compared", "expected error, relative to the proposed point; edges merged")
        top = total - 0.6
        for table in tables:
            bottom = top - heights[table] - 0.3
            sheet.text(0.12, top - 0.14, table, size=9, weight="bold")
            axes = sheet.axes(1.75, bottom, 3.6, heights[table])
            _draw_choices(axes, sorted(mine[table], key=lambda own: own.merit if own.merit is not None else 1e9))
            merging = next((own for own in design.mergings if own.table == table), None)
            if merging is not None:
                _draw_merging(sheet.axes(6.35, bottom, 2.7, heights[table]), merging)
            top = bottom - 0.65
    return sheet


def _draw_choices(axes: Axes, choices: Sequence[DesignChoice]) -> None:
    rises = [None if own.merit is None else 100.0 * (own.merit - 1.0) for own in choices]
    known = [rise for rise in rises if rise is not None]
    right = min(max([*known, 1.0]), 4.0 * MOST_SHOWN)
    left = min([*known, 0.0])
    axes.set_xlim(left - 0.06 * (right - left), right * 1.28)
    axes.set_ylim(len(choices) - 0.4, -0.6)
    axes.axvline(0.0, color=RULE, linewidth=0.8)
    for line, (choice, rise) in enumerate(zip(choices, rises, strict=True)):
        axes.axhline(line, color=RULE, linewidth=0.4, zorder=0)
        marks = [word for word, holds in (("axes of the study", choice.now), ("proposed", choice.chosen)) if holds]
        words = ", ".join([f"{choice.bins} bins", *marks])
        if rise is None or rise > right:
            shown = "no fit" if rise is None else f"{rise:.0f} %"
            axes.text(right * 1.26, line, shown, ha="right", va="center", size=7, bbox=OVER_RULES)
            continue
        fill = PROPOSED if choice.chosen else "white"
        colour = PROPOSED if choice.chosen else START if choice.now else INK
        axes.plot(
            [rise], [line], marker="D" if choice.chosen else "o", markersize=5, color=colour, markerfacecolor=fill
        )
        beside = (-7, "right") if rise > 0.6 * right else (7, "left")
        axes.annotate(
            words, (rise, line), (beside[0], 0), "data", "offset points", size=7, va="center", ha=beside[1],
            bbox=OVER_RULES,
        )  # fmt: skip
    axes.set_yticks(range(len(choices)), [" × ".join(own.observables) for own in choices], fontsize=7.5)
    axes.tick_params(axis="y", length=0)
    axes.set_xlabel("rise of the error, %")


def _draw_merging(axes: Axes, merging: DesignMerging) -> None:
    rises = [100.0 * (merit - 1.0) for merit in merging.merit]
    axes.plot(merging.bins, rises, color=PROPOSED)
    if merging.chosen in merging.bins:
        at = merging.bins.index(merging.chosen)
        axes.plot([merging.chosen], [rises[at]], marker="D", markersize=5.5, color=PROPOSED)
        axes.annotate(
            f"{merging.chosen} bins", (merging.chosen, rises[at]), (-6, 6), "data", "offset points", size=7, ha="right"
        )
    axes.set_xscale("log")
    axes.xaxis.set_major_locator(LogLocator(subs=(1.0, 2.0, 5.0)))
    axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.xaxis.set_minor_formatter(NullFormatter())
    axes.set_xlim(max(merging.bins) * 1.1, max(min(merging.bins) * 0.9, 1.0))
    axes.set_ylim(0.0, min(max(*rises, 0.5), MOST_SHOWN) * 1.1)
    axes.set_xlabel("bins of a category, merged from the finest")
    axes.set_ylabel("rise of the error, %")


def information_along_axes(design: Design) -> Sheet:
    """A panel an axis: share of each bin over its width, one outline a ratio."""
    panels = Panels(len(design.axes), 3, width=2.6, height=1.75, left=0.75, foot=0.55, head=0.5)
    with rc_context(RC):
        sheet = Sheet(*panels.sheet_size, "Information along the axes", "at the proposed point, from the counts")
        for number, axis in enumerate(design.axes):
            axes = sheet.axes(*panels.corner(number), panels.width, panels.height)
            _draw_axis(axes, design, axis)
            if number == 0:
                axes.legend(loc="upper right", fontsize=7, handlelength=1.6, ncols=2)
    return sheet


def _draw_axis(axes: Axes, design: Design, axis: DesignAxis) -> None:
    for number, (label, shares) in enumerate(zip(design.labels, axis.shares, strict=True)):
        colour, style = ratio_colour(number), ("solid", (0, (4, 1.5)))[number % 2]
        percents = [100.0 * share for share in shares]
        axes.stairs(percents, axis.edges, color=colour, linewidth=1.6, linestyle=style, label=label)
        axes.stairs(percents, axis.edges, color=colour, fill=True, alpha=0.10)
    loss = "no fit without it" if axis.loss is None else f"without it {100.0 * axis.loss:+.1f} %".replace("-", "−")
    axes.set_title(f"{axis.table}\n{loss}", fontsize=7.5)
    axes.set_xlabel(f"{axis.label} / {axis.unit}" if axis.unit else axis.label, fontsize=8)
    axes.set_ylabel("information in a bin, %")
    axes.set_xlim(axis.edges[0], axis.edges[-1])
    # Room for the legend above the highest bin.
    axes.set_ylim(0.0, 1.25 * max(100.0 * share for shares in axis.shares for share in shares))
