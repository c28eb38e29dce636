"""Reference numbers of tests/reference/*.toml; one without a source is an error."""

from __future__ import annotations

import tomllib
from dataclasses import dataclass
from pathlib import Path

FOLDER = Path(__file__).parents[1] / "reference"


@dataclass(frozen=True)
class Reference:
    value: float
    error: float
    digits: int
    source: str
    recipe: str

    @property
    def last_digit(self) -> float:
        """Half a unit of the last significant digit that is quoted."""
        exponent = int(f"{abs(self.value):.{self.digits - 1}e}".split("e")[1])
        return 0.5 * 10.0 ** (exponent - self.digits + 1)


def load(name: str) -> dict[str, Reference]:
    """All numbers of one file."""
    tables = tomllib.loads((FOLDER / f"{name}.toml").read_text(encoding="utf-8"))
    return {key: Reference(**table) for key, table in tables.items()}
