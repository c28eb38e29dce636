"""Errors by source and expected significance against the amount of data."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

from matplotlib import rc_context
from matplotlib.axes import Axes
from matplotlib.ticker import FuncFormatter, NullFormatter

from .sheet import Panels, Sheet
from .style import INK, QUIET, RC, RULE, ratio_colour

SOURCE_LINES = ("#009e73", "#cc79a7", "#e69f00", "#56b4e9", "#0072b2", "#727b84")
DASHES = ("solid", (0, (5, 2)), (0, (1, 1.2)), (0, (5, 1.5, 1, 1.5)))


@dataclass(frozen=True)
class Errors:
    """One ratio: total error and source -> error at each place; wall: place where data matter less than all else."""

    label: str
    total: Sequence[float]
    rows: Mapping[str, Sequence[float]]
    wall: float | None


@dataclass(frozen=True)
class Significance:
    """Expected standard deviations at each place, the chances of 3 and 5, and the ratio's number; None for both."""

    label: str
    sigmas: Sequence[float]
    chances: Sequence[Sequence[float]]
    ratio: int | None


@dataclass(frozen=True)
class Curves:
    """What is drawn, against `places` on an axis called `label`."""

    label: str
    places: Sequence[float]
    errors: Sequence[Errors]
    significance: Sequence[Significance]


def reach_curves(curves: Curves) -> Sheet:
    """A panel with errors a ratio; then, if there is a deviation, its significance and the chance to see it."""
    seen = bool(curves.significance)
    panels = Panels(len(curves.errors) + 2 * seen, 2, width=4.0, height=2.8, left=0.8, foot=0.55, head=0.3)
    with rc_context(RC):
        sheet = Sheet(*panels.sheet_size, "Reach", "expected sets: medians, without fluctuations")
        for number, errors in enumerate(curves.errors):
            axes = sheet.axes(*panels.corner(number), panels.width, panels.height, xscale="log", yscale="log")
            _draw_errors(axes, curves, errors, ratio_colour(number))
        if seen:
            first = len(curves.errors)
            for number, draw in enumerate((_draw_sigmas, _draw_chances), first):
                axes = sheet.axes(*panels.corner(number), panels.width, panels.height, xscale="log")
                draw(axes, curves)
    return sheet


def _draw_errors(axes: Axes, curves: Curves, errors: Errors, colour: str) -> None:
    axes.plot(curves.places, errors.total, color=colour, linewidth=2.4, label="total")
    lowest = 0.02 * min(errors.total)
    shown = {name: row for name, row in errors.rows.items() if max(row) > lowest}
    for number, (name, row) in enumerate(shown.items()):
        colour_of_row = INK if number == 0 else SOURCE_LINES[(number - 1) % len(SOURCE_LINES)]
        axes.plot(
            curves.places, row, color=colour_of_row, linewidth=1.1, linestyle=DASHES[number % len(DASHES)], label=name
        )
    if errors.wall is not None:
        axes.axvline(errors.wall, color=QUIET, linewidth=0.8, linestyle=(0, (2, 2)))
    axes.set_xlabel(curves.label)
    axes.set_ylabel(f"error of {errors.label}")
    axes.set_xlim(curves.places[0], curves.places[-1])
    axes.set_ylim(max(0.5 * min(min(row) for row in shown.values()), 0.02 * min(errors.total)), 1.5 * max(errors.total))
    axes.yaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
    axes.yaxis.set_minor_formatter(NullFormatter())
    axes.legend(loc="lower left", fontsize=7, ncols=2, borderaxespad=0.1, columnspacing=1.2, handlelength=2.4)


def _draw_sigmas(axes: Axes, curves: Curves) -> None:
    for level in (3.0, 5.0):
        axes.axhline(level, color=RULE, linewidth=0.8)
        axes.text(curves.places[0], level, f" {level:g} σ", color=QUIET, fontsize=7.5, va="bottom")
    for line in curves.significance:
        colour = INK if line.ratio is None else ratio_colour(line.ratio)
        if len(curves.significance) == 1:  # bands of several would hide each other
            low, high = [max(s - 1.0, 0.0) for s in line.sigmas], [s + 1.0 for s in line.sigmas]
            axes.fill_between(curves.places, low, high, color=colour, alpha=0.12, linewidth=0)
        axes.plot(curves.places, line.sigmas, color=colour, linewidth=1.8, label=line.label)
    axes.set_xlabel(curves.label)
    axes.set_ylabel("expected standard deviations")
    axes.set_xlim(curves.places[0], curves.places[-1])
    axes.set_ylim(0.0, 1.05 * max(5.5, *(max(line.sigmas) for line in curves.significance)))
    axes.legend(loc="upper left", bbox_to_anchor=(0.1, 1.0))


def _draw_chances(axes: Axes, curves: Curves) -> None:
    for line in curves.significance:
        colour = INK if line.ratio is None else ratio_colour(line.ratio)
        for chances, style, level in zip(line.chances, ("solid", (0, (4, 2))), ("3", "5"), strict=True):
            axes.plot(
                curves.places, [100.0 * chance for chance in chances], color=colour, linestyle=style,
                label=f"{line.label}: {level} σ",
            )  # fmt: skip
    axes.set_xlabel(curves.label)
    axes.set_ylabel("chance to see it, per cent")
    axes.set_xlim(curves.places[0], curves.places[-1])
    axes.set_ylim(0.0, 102.0)
    axes.legend(loc="upper left", fontsize=7)
