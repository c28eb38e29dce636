"""Precision and coverage against the events, needed events, and the prediction against generated templates."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Sequence
from functools import partial

from matplotlib.axes import Axes
from matplotlib.ticker import FuncFormatter, MaxNLocator, NullFormatter
from semitau.fit.toys.pulls import LEVELS

from ..numbers import counted, shortened
from ..sizing.part import Sizing, SizingRatio, SizingToyRatio, SizingToys, SizingVerification
from .sheet import Panels, Sheet
from .style import BAND, INK, QUIET, RULE, ratio_colour

Drawing = tuple[str, str, str, Callable[[], Sheet]]
LOWER, BETWEEN = 1.25, 0.16
MARKS = ("o", "s", "^", "D")
ROW = 0.27
"""Height of a row of a sample, in inches."""


def sizing_drawings(sizing: Sizing) -> Iterator[Drawing]:
    """Name, title, caption and drawing of each picture."""
    toys = [each for each in sizing.toys if each.what == "all"]
    coverage = "; below, how often intervals of one error hold the true value" if toys else ""
    yield (
        "sizing_events",
        "Precision and coverage against the events",
        (
            "Expected error of each ratio against the events of all components, and with toys in which the templates "
            f"are drawn anew{coverage}."
        ),
        partial(against_events, sizing),
    )
    yield (
        "sizing_needed",
        "Needed events",
        "Events with which each component costs its share of the error at most, over those that there are.",
        partial(needed_events, sizing),
    )
    for verification in sizing.verifications:
        if verification.what == "fewer":
            yield (
                "sizing_checks",
                "Template statistics, predicted and generated",
                (
                    "Part of the error from each component with fewer events: as predicted, as the new templates show "
                    "it, and as ratios fitted with them scatter."
                ),
                partial(checked, sizing, verification),
            )


def against_events(sizing: Sizing) -> Sheet:
    """A column a ratio: error above, coverage below if there are toys."""
    toys = [each for each in sizing.toys if each.what == "all" and each.factor is not None]
    height = 3.9 if toys else 2.6
    panels = Panels(count=len(sizing.ratios), columns=2, width=3.7, height=height, left=0.85, foot=0.5, head=0.3)
    note = f"{counted(toys[0].number)} toys at each point; every toy has templates of its own" if toys else ""
    sheet = Sheet(*panels.sheet_size, "Precision and coverage against the events", note)
    for number, ratio in enumerate(sizing.ratios):
        left, bottom = panels.corner(number)
        raised = LOWER + BETWEEN if toys else 0.0
        upper = sheet.axes(left, bottom + raised, panels.width, panels.height - raised, xscale="log")
        _draw_errors(upper, sizing, ratio, toys, ratio_colour(number))
        lowest = upper
        if toys:
            lowest = sheet.axes(left, bottom, panels.width, LOWER, xscale="log", sharex=upper)
            _draw_coverage(lowest, ratio, toys, ratio_colour(number))
            upper.tick_params(labelbottom=False)
        lowest.set_xlabel("events, relative to those that there are")
        lowest.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
        upper.set_title(ratio.label, weight="bold")
        for axes in {upper, lowest}:
            axes.yaxis.set_label_coords(-0.16, 0.5)
    return sheet


def _draw_errors(axes: Axes, sizing: Sizing, ratio: SizingRatio, toys: Sequence[SizingToys], colour: str) -> None:
    curve = next(c for c in sizing.curves if c.ratio == ratio.ratio and c.sample == "")
    low, high = _range([each.factor or 1.0 for each in toys])
    shown = [(x, y) for x, y in zip(curve.factors, curve.errors, strict=True) if low <= x <= high]
    axes.plot(*zip(*shown, strict=True), color=colour, label="expected")
    axes.axhline(ratio.exact, color=INK, linewidth=0.9, linestyle=(0, (4, 2)), label="exact templates")
    first = min((each.multiple for each in toys), default=1.0)
    drawn = [(each.factor or 1.0, _of(each, ratio)) for each in toys if each.multiple == first]
    if drawn:
        places = [x for x, _ in drawn]
        axes.errorbar(
            places, [part.spread for _, part in drawn], yerr=[part.spread_error for _, part in drawn], fmt="o",
            color=INK, markersize=4, elinewidth=1.0, label="scatter of toys",
        )  # fmt: skip
        axes.plot(
            places, [part.mean_error for _, part in drawn], "D", color=colour, markerfacecolor="none", markersize=5.5,
            label="error that they report",
        )  # fmt: skip
    axes.set_ylabel(f"error of {ratio.label}")
    axes.set_xlim(low, high)
    axes.margins(y=0.1)
    _legend_above(axes, 0.3)


def _draw_coverage(axes: Axes, ratio: SizingRatio, toys: Sequence[SizingToys], colour: str) -> None:
    axes.axhline(100 * LEVELS[1], color=INK, linewidth=0.9)
    multiples = sorted({each.multiple for each in toys})
    for number, multiple in enumerate(multiples):
        drawn = [(each.factor or 1.0, _of(each, ratio)) for each in toys if each.multiple == multiple]
        share = [100 * part.coverage for _, part in drawn]
        ends = [
            [100 * (part.coverage - part.coverage_low) for _, part in drawn],
            [100 * (part.coverage_high - part.coverage) for _, part in drawn],
        ]
        same = multiple == 1.0
        axes.errorbar(
            [x * 1.05 ** (number - 0.5 * (len(multiples) - 1)) for x, _ in drawn], share, yerr=ends,
            fmt=MARKS[number % len(MARKS)], color=colour if number else INK, markersize=4, elinewidth=1.0,
            markerfacecolor=INK if number == 0 else "none",
            label="true ratios as in the templates" if same else f"true ratios {multiple:g} times that",
        )  # fmt: skip
    axes.set_ylabel("coverage, %")
    axes.margins(y=0.1)
    _legend_above(axes, 0.35)


def _legend_above(axes: Axes, room: float) -> None:
    """The legend in a part `room` of the height that is added above all that is drawn."""
    low, high = axes.get_ylim()
    axes.set_ylim(low, low + (high - low) / (1.0 - room))
    axes.legend(loc="upper right", ncols=2, fontsize=7.5, handletextpad=0.3, columnspacing=1.0, borderaxespad=0.1)


def _of(toys: SizingToys, ratio: SizingRatio) -> SizingToyRatio:
    return next(part for part in toys.ratios if part.ratio == ratio.ratio)


def _range(factors: Sequence[float]) -> tuple[float, float]:
    return min([0.03, *(0.7 * x for x in factors)]), max([10.0, *(1.4 * x for x in factors)])


def needed_events(sizing: Sizing) -> Sheet:
    """A panel a ratio, a row a sample."""
    rows = len(sizing.samples)
    panels = Panels(
        count=len(sizing.ratios), columns=2, width=3.0, height=ROW * rows + 0.15, left=1.75, foot=0.5, head=0.3
    )
    note = (
        "dots: for precision, bias and reported error; bars: for precision by the formula; right of 1 there are too few"
    )
    sheet = Sheet(*panels.sheet_size, "Needed events", note)
    for number, ratio in enumerate(sizing.ratios):
        axes = sheet.axes(*panels.corner(number), panels.width, panels.height, xscale="log")
        costs = {cost.sample: cost for cost in sizing.costs if cost.ratio == ratio.ratio}
        positive = [cost.needed for cost in costs.values() if cost.needed > 0.0]
        low, high = min([0.1, *(0.5 * x for x in positive)]), max([10.0, *(2.0 * x for x in positive)])
        axes.axvspan(1.0, high, color=BAND, alpha=0.18, linewidth=0)
        axes.axvline(1.0, color=INK, linewidth=0.9)
        for row, sample in enumerate(sizing.samples):
            cost = costs[sample.sample]
            axes.axhline(row, color=RULE, linewidth=0.5)
            if cost.needed > 0.0:
                axes.errorbar(
                    [cost.needed], [row], xerr=[cost.needed_error], fmt="o", color=ratio_colour(number), markersize=5,
                )  # fmt: skip
                axes.plot([cost.needed_formula], [row], "|", color=INK, markersize=10, markeredgewidth=1.2)
            else:
                axes.text(low * 1.1, row, "any number", color=QUIET, fontsize=7.5, va="center")
        axes.set_xlim(low, high)
        _name_rows(axes, sizing)
        axes.set_xlabel("needed events, relative to those that there are")
        axes.xaxis.set_major_formatter(FuncFormatter(lambda value, _: f"{value:g}"))
        axes.xaxis.set_minor_formatter(NullFormatter())
        axes.set_title(ratio.label, weight="bold")
    return sheet


def checked(sizing: Sizing, verification: SizingVerification) -> Sheet:
    """A panel a ratio, a row a sample: prediction, mean of what the sets show, scatter of fits."""
    rows = len(sizing.samples) + 1
    panels = Panels(
        count=len(sizing.ratios), columns=2, width=3.0, height=ROW * rows + 0.55, left=1.75, foot=0.5, head=0.3
    )
    note = (
        f"{verification.sets} sets of templates, each with {verification.fraction:.3g} of the events; "
        f"{counted(verification.events)} events in all"
    )
    sheet = Sheet(*panels.sheet_size, "Template statistics, predicted and generated", note)
    for number, ratio in enumerate(sizing.ratios):
        axes = sheet.axes(*panels.corner(number), panels.width, panels.height)
        checks = {check.sample: check for check in verification.checks if check.ratio == ratio.ratio}
        for row, name in enumerate(["", *(sample.sample for sample in sizing.samples)], start=-1):
            check, first = checks[name], row == -1
            axes.axhline(row, color=RULE, linewidth=0.5)
            axes.plot(
                [check.predicted], [row], "|", color=INK, markersize=13, markeredgewidth=1.6,
                label="predicted" if first else None,
            )  # fmt: skip
            axes.plot(
                [check.measured], [row], "s", color=INK, markerfacecolor="none", markersize=5,
                label="by variances" if first else None,
            )  # fmt: skip
            if check.scatter is not None:
                axes.errorbar(
                    [check.scatter], [row], xerr=[check.scatter_error or 0.0], fmt="o", color=ratio_colour(number),
                    markersize=4.5, elinewidth=1.1, label="scatter of fits" if first else None,
                )  # fmt: skip
        axes.set_xlim(left=0.0)
        axes.xaxis.set_major_locator(MaxNLocator(5))
        _name_rows(axes, sizing, first="all together")
        axes.set_xlabel(f"part of the error of {ratio.label}")
        axes.set_title(ratio.label, weight="bold")
        axes.set_ylim(len(sizing.samples) + 0.6, -1.7)
        axes.legend(loc="lower right", ncols=3, fontsize=7, handletextpad=0.2, columnspacing=0.9, borderaxespad=0.1)
    return sheet


def _name_rows(axes: Axes, sizing: Sizing, first: str = "") -> None:
    names = [*([first] if first else []), *(shortened(sample.label, 24) for sample in sizing.samples)]
    axes.set_yticks(range(-1 if first else 0, len(sizing.samples)), names)
    axes.set_ylim(len(sizing.samples) - 0.4, -0.6)
    axes.tick_params(axis="y", length=0)
