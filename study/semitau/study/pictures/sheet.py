"""A figure laid out in inches, and how it becomes files with the same bytes every time."""

from __future__ import annotations

import io
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from matplotlib import rc_context
from matplotlib.axes import Axes
from matplotlib.backends.backend_agg import FigureCanvasAgg
from matplotlib.figure import Figure
from semitau.core.whole_files import write_whole

from .style import QUIET, RC

PIXELS_PER_INCH = 160
HEADING, RIGHT_MARGIN = 0.5, 0.25


@dataclass(frozen=True)
class Picture:
    """A drawn picture: `name` of its files, `title` and `caption` for people, `svg` as text."""

    name: str
    title: str
    caption: str
    svg: str


@dataclass(frozen=True)
class Panels:
    """Places of equal panels in rows of at most `columns`, all in inches.

    width, height : of a panel. left, foot : room at its left and below it for labels. head : room above it.
    """

    count: int
    columns: int
    width: float
    height: float
    left: float
    foot: float
    head: float

    @property
    def sheet_size(self) -> tuple[float, float]:
        """Width and height of the sheet, with a heading and a margin at the right."""
        rows = -(-self.count // self.columns)
        across = min(self.count, self.columns)
        return (
            across * (self.left + self.width) + RIGHT_MARGIN,
            rows * (self.foot + self.height + self.head) + HEADING,
        )

    def corner(self, number: int) -> tuple[float, float]:
        """Lower left corner of the panel `number`; the first one is at the upper left."""
        row, column = divmod(number, self.columns)
        height = self.sheet_size[1] - HEADING
        pitch = self.foot + self.height + self.head
        return self.left + column * (self.left + self.width), height - (row + 1) * pitch + self.foot


class Sheet:
    """A figure of `width` times `height` inches with a heading; places are in inches from the lower left corner."""

    def __init__(self, width: float, height: float, heading: str = "", note: str = "") -> None:
        self.width, self.height = width, height
        with rc_context(RC):
            self.figure = Figure(figsize=(width, height))
            FigureCanvasAgg(self.figure)
        if heading:
            self.text(0.12, height - 0.24, heading, size=10.5, weight="bold")
        if note:
            self.text(0.12, height - 0.43, note, color=QUIET, size=8)

    def text(self, x: float, y: float, text: str, **style: Any) -> None:
        """Write `text` with its left end of the base line at (x, y)."""
        with rc_context(RC):
            self.figure.text(x / self.width, y / self.height, text, **style)

    def axes(self, left: float, bottom: float, width: float, height: float, **how: Any) -> Axes:
        """Axes with their frame at this place."""
        box = (left / self.width, bottom / self.height, width / self.width, height / self.height)
        with rc_context(RC):
            return self.figure.add_axes(box, **how)

    def save(self, folder: Path, name: str, title: str, caption: str, key: str = "") -> Picture:
        """Write NAME.svg and NAME.png into `folder`, each whole or not at all.

        key : what the picture was drawn from; both files hold it.

        Raises
        ------
        RunError : they cannot be written.
        """
        with rc_context(RC):
            svg, png = io.BytesIO(), io.BytesIO()
            # No date, no version: the same picture has the same bytes.
            told = {"Title": title, "Identifier": key} if key else {"Title": title}
            self.figure.savefig(svg, format="svg", metadata={"Date": None, "Creator": "semitau", **told})
            self.figure.savefig(png, format="png", dpi=PIXELS_PER_INCH, metadata={"Software": None, **told})
        write_whole(folder / f"{name}.svg", svg.getvalue())
        write_whole(folder / f"{name}.png", png.getvalue())
        return Picture(name, title, caption, svg.getvalue().decode())
