"""One measured number beside its aim, and how a run of them is printed."""

from __future__ import annotations

from collections.abc import Iterable
from dataclasses import asdict, dataclass
from typing import Literal


@dataclass(frozen=True)
class Figure:
    """A result. `aim` is a bound from issue 2, "at least" or "at most"; None if there is none."""

    what: str
    value: float
    unit: str
    aim: float | None = None
    bound: Literal["at least", "at most"] = "at most"
    note: str = ""

    @property
    def reached(self) -> bool | None:
        if self.aim is None:
            return None
        return self.value >= self.aim if self.bound == "at least" else self.value <= self.aim

    def line(self) -> str:
        aim = "" if self.aim is None else f"{self.bound} {number(self.aim)}"
        verdict = {None: "", True: "reached", False: "MISSED"}[self.reached]
        row = f"  {self.what:<58}{number(self.value):>12} {self.unit:<12}{aim:<19}{verdict:<8}"
        return row.rstrip() + (f"\n      {self.note}" if self.note else "")

    def as_data(self) -> dict[str, object]:
        return asdict(self) | {"reached": self.reached}


def number(value: float) -> str:
    """Three digits, large numbers with separators."""
    if value >= 1000:
        digits = 3 - len(str(int(value)))
        return f"{round(value, digits):,.0f}"
    return f"{value:.3g}"


def table(title: str, figures: Iterable[Figure]) -> str:
    return "\n".join([title, *(figure.line() for figure in figures), ""])
