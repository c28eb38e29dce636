"""The bias matrix: shift of each ratio for everything made with one study and fitted with another."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import TYPE_CHECKING

from matplotlib import rc_context
from matplotlib.colors import LinearSegmentedColormap, Normalize
from matplotlib.patches import Rectangle

from ..numbers import shortened, signed
from .sheet import Sheet
from .style import INK, PAPER, QUIET, RC, RULE

if TYPE_CHECKING:
    from matplotlib.axes import Axes

    from ..bias.part import Bias, BiasRatio, BiasStudy

WIDTH, HEIGHT = 0.52, 0.27
"""Inches of a cell."""

BETWEEN, BESIDE, KEY = 0.42, 0.3, 0.65
WIDEST, NARROWEST = 7.2, 7.0
"""Inches of the sheet up to which the matrices stand side by side, and that the key needs."""

ROOM_FOR_KEY = 7.4
FULL = 1.0
"""Shift in errors of the full colours; larger ones are drawn alike and told apart by their numbers."""

LETTER = 0.068
"""Inches that a letter of a label takes."""


def bias_matrix(bias: Bias) -> Sheet:
    """A sheet with one matrix a ratio, in units of the error of the fit; what is not covered has a frame."""
    labels = [shortened(study.label, 26) for study in bias.studies]
    ratios = {ratio.ratio: ratio.label for pair in bias.pairs for ratio in pair.ratios}
    longest = LETTER * max(map(len, labels))
    margin, foot = 0.6 + longest, 0.15 + longest
    side, tall = WIDTH * len(labels), HEIGHT * len(labels)
    in_a_row = margin + len(ratios) * (side + BESIDE) <= WIDEST
    across, rows = (len(ratios), 1) if in_a_row else (1, len(ratios))
    height = KEY + foot + rows * (tall + BETWEEN) + 0.4
    width = max(margin + across * (side + BESIDE), NARROWEST)
    sheet = Sheet(width, height, "Bias matrix", "shift of the fitted ratio in units of its error, expected sets")
    for number, (name, label) in enumerate(ratios.items()):
        row, column = divmod(number, across)
        bottom = KEY + foot + (rows - 1 - row) * (tall + BETWEEN)
        axes = sheet.axes(margin + column * (side + BESIDE), bottom, side, tall)
        with rc_context(RC):
            _matrix(axes, bias.studies, _cells(bias, name))
            axes.set_title(label, color=INK, fontweight="bold", pad=5)
            nothing = [""] * len(labels)
            axes.set_yticks([i + 0.5 for i in range(len(labels))], nothing if column else labels[::-1])
            lowest = row == rows - 1
            axes.set_xticks([i + 0.5 for i in range(len(labels))], labels if lowest else nothing, rotation=90)
            axes.tick_params(length=0, labelcolor=INK)
            if not column:
                axes.set_ylabel("made with", color=QUIET)
            if lowest:
                axes.set_xlabel("fitted with", color=QUIET)
    _key(sheet, 0.12, bias.negligible)
    return sheet


Cells = Mapping[tuple[str, str], "BiasRatio"]


def _cells(bias: Bias, name: str) -> Cells:
    return {
        (pair.made_with, pair.fitted_with): ratio for pair in bias.pairs for ratio in pair.ratios if ratio.ratio == name
    }


def _matrix(axes: Axes, studies: Sequence[BiasStudy], cells: Cells) -> None:
    count = len(studies)
    axes.set_xlim(-0.03, count + 0.03)
    axes.set_ylim(-0.06, count + 0.06)
    for row, made in enumerate(studies):
        for column, fitted in enumerate(studies):
            corner = (column, count - 1 - row)
            ratio = cells.get((made.name, fitted.name))
            if made is fitted:
                axes.add_patch(Rectangle(corner, 1, 1, facecolor=RULE, edgecolor=PAPER, linewidth=1.2))
            elif ratio is None:
                _write(axes, corner, "failed", QUIET)
            else:
                _cell(axes, corner, ratio)
    for spine in axes.spines.values():
        spine.set_visible(False)


COLOURS = LinearSegmentedColormap.from_list("two_tints", ["#5aa6d6", PAPER, "#e88d4a"])
"""Tints of the blue and vermilion of style.py, light enough for ink to be read on them."""


def _cell(axes: Axes, corner: tuple[float, float], ratio: BiasRatio) -> None:
    colour = COLOURS(Normalize(-FULL, FULL, clip=True)(ratio.significance))
    axes.add_patch(Rectangle(corner, 1, 1, facecolor=colour, edgecolor=PAPER, linewidth=1.2))
    quiet = ratio.status == "negligible"
    text = signed(ratio.significance, 2, plus=True) + "?" * (ratio.status == "undecided")
    if ratio.status == "not covered":
        _frame(axes, corner)
    _write(axes, corner, text, QUIET if quiet else INK, ratio.status == "not covered")


def _frame(axes: Axes, corner: tuple[float, float]) -> None:
    inset = (0.035, 0.07)
    at = (corner[0] + inset[0], corner[1] + inset[1])
    frame = Rectangle(at, 1 - 2 * inset[0], 1 - 2 * inset[1], fill=False, edgecolor=INK, linewidth=1.4)
    axes.add_patch(frame)


def _write(axes: Axes, corner: tuple[float, float], text: str, colour: str, bold: bool = False) -> None:
    weight = "bold" if bold else "normal"
    axes.text(
        corner[0] + 0.5, corner[1] + 0.47, text, color=colour, fontsize=7, ha="center", va="center", weight=weight
    )


def _key(sheet: Sheet, left: float, negligible: float) -> None:
    """What frames and marks mean."""
    axes = sheet.axes(left, 0.18, sheet.width - 2 * left, HEIGHT)
    with rc_context(RC):
        axes.set_xlim(0, (sheet.width - 2 * left) / WIDTH)
        axes.set_ylim(0, 1)
        axes.axis("off")
        at = 0.0
        for text, weight, words in (
            ("+0.40", "bold", "not covered"),
            ("+0.40?", "normal", "not decided"),
            ("+0.40", "normal", "covered"),
            ("+0.03", "quiet", f"below {signed(negligible, 2)} of the error: negligible"),
        ):
            colour = COLOURS(Normalize(-FULL, FULL)(0.03 if weight == "quiet" else 0.4))
            axes.add_patch(Rectangle((at, 0), 1, 1, facecolor=colour, edgecolor=PAPER, linewidth=1.2))
            if weight == "bold":
                _frame(axes, (at, 0))
            _write(axes, (at, 0), text, QUIET if weight == "quiet" else INK, weight == "bold")
            axes.text(at + 1.15, 0.47, words, fontsize=7.5, color=INK, va="center")
            at += 1.5 + 0.125 * len(words)
