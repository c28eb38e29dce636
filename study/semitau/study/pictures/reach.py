"""Errors by source and expected significance against the amount of data."""

from __future__ import annotations

from matplotlib import rc_context
from matplotlib.axes import Axes
from matplotlib.ticker import FuncFormatter, NullFormatter

from ..reach.axis import MULTIPLES
from ..reach.part import Reach, ReachDeviation
from .sheet import Panels, Sheet
from .style import INK, QUIET, RC, RULE, ratio_colour

SOURCE_LINES = ("#009e73", "#cc79a7", "#e69f00", "#56b4e9", "#0072b2", "#727b84")
DASHES = ("solid", (0, (5, 2)), (0, (1, 1.2)), (0, (5, 1.5, 1, 1.5)))
LEGEND_SHARE = 0.38
"""Room for the legend below the lines, over the height that these take."""

CAPTION = (
    "Expected error of each ratio by source against the amount of data; a dashed line marks where the finite data "
    "matter as much as all else. Where ratios are compared: expected significance, and the chances to see 3 and 5 σ."
)


def reach_curves(part: Reach) -> Sheet:
    """A panel with errors a ratio; then, if there is a deviation, its significance and the chance to see it."""
    seen = bool(part.needed)
    panels = Panels(len(part.ratios) + 2 * seen, 2, width=4.0, height=2.8, left=0.8, foot=0.55, head=0.3)
    growing = "; generated events grow with the data" if part.generated == "grows" else ""
    with rc_context(RC):
        sheet = Sheet(*panels.sheet_size, "Reach", f"expected sets: medians, without fluctuations{growing}")
        for number in range(len(part.ratios)):
            axes = sheet.axes(*panels.corner(number), panels.width, panels.height, xscale="log", yscale="log")
            _draw_errors(axes, part, number)
        if seen:
            for number, draw in enumerate((_draw_sigmas, _draw_chances), len(part.ratios)):
                axes = sheet.axes(*panels.corner(number), panels.width, panels.height, xscale="log")
                draw(axes, part)
    return sheet


def _places(part: Reach, axes: Axes) -> list[float]:
    places = [amount.amount for amount in part.amounts]
    axes.set_xlabel("data, relative to the templates" if part.unit == MULTIPLES else part.unit)
    axes.set_xlim(places[0], places[-1])
    return places


def _draw_errors(axes: Axes, part: Reach, number: int) -> None:
    ratio, places = part.ratios[number], _places(part, axes)
    errors = [next(error for error in amount.errors if error.ratio == ratio.ratio) for amount in part.amounts]
    total = [error.total for error in errors]
    rows = {source: [error.sources[source] for error in errors] for source in errors[0].sources}
    axes.plot(places, total, color=ratio_colour(number), linewidth=2.4, label="total")
    lowest = 0.02 * min(total)
    shown = {name: row for name, row in rows.items() if max(row) > lowest}
    for line, (name, row) in enumerate(shown.items()):
        colour = INK if line == 0 else SOURCE_LINES[(line - 1) % len(SOURCE_LINES)]
        axes.plot(places, row, color=colour, linewidth=1.1, linestyle=DASHES[line % len(DASHES)], label=name)
    wall = next((wall.factor for wall in part.walls if wall.ratio == ratio.ratio), None)
    if wall is not None:
        axes.axvline(wall * places[0] / part.amounts[0].factor, color=QUIET, linewidth=0.8, linestyle=(0, (2, 2)))
    axes.set_ylabel(f"error of {ratio.label}")
    low, high = max(0.7 * min(min(row) for row in shown.values()), 0.02 * min(total)), 1.5 * max(total)
    axes.set_ylim(low / (high / low) ** LEGEND_SHARE, high)
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:.9f}".rstrip("0").rstrip(".")))
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.legend(loc="lower left", fontsize=7, ncols=2, borderaxespad=0.1, columnspacing=1.2, handlelength=2.4)


def _lines(part: Reach) -> list[tuple[str, str, list[ReachDeviation]]]:
    """Label, colour and deviations of everything that is compared."""
    colours = {ratio.ratio: ratio_colour(number) for number, ratio in enumerate(part.ratios)}
    return [
        (
            needed.label if needed.name in colours else "together",
            colours.get(needed.name, INK),
            [next(seen for seen in amount.deviations if seen.name == needed.name) for amount in part.amounts],
        )
        for needed in part.needed
    ]


def _draw_sigmas(axes: Axes, part: Reach) -> None:
    places, lines = _places(part, axes), _lines(part)
    for level in (3.0, 5.0):
        axes.axhline(level, color=RULE, linewidth=0.8)
        axes.text(places[0], level, f" {level:g} σ", color=QUIET, fontsize=7.5, va="bottom")
    for label, colour, seen in lines:
        sigmas = [deviation.sigmas for deviation in seen]
        if len(lines) == 1:  # bands of several would hide each other
            low, high = [max(s - 1.0, 0.0) for s in sigmas], [s + 1.0 for s in sigmas]
            axes.fill_between(places, low, high, color=colour, alpha=0.12, linewidth=0)
        axes.plot(places, sigmas, color=colour, linewidth=1.8, label=label)
    axes.set_ylabel("expected standard deviations")
    axes.set_ylim(0.0, 1.05 * max(5.5, *(max(deviation.sigmas for deviation in seen) for _, _, seen in lines)))
    axes.legend(loc="upper left", bbox_to_anchor=(0.1, 1.0))


def _draw_chances(axes: Axes, part: Reach) -> None:
    places = _places(part, axes)
    for label, colour, seen in _lines(part):
        chances = {"3": [found.evidence for found in seen], "5": [found.discovery for found in seen]}
        for (level, row), style in zip(chances.items(), ("solid", (0, (4, 2))), strict=True):
            axes.plot(
                places, [100.0 * chance for chance in row], color=colour, linestyle=style, label=f"{label}: {level} σ"
            )
    axes.set_ylabel("chance to see it, per cent")
    axes.set_ylim(0.0, 102.0)
    axes.legend(loc="upper left", fontsize=7)
