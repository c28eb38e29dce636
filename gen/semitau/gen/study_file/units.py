"""Numbers of study files: bare in the program's own units, or strings with a unit such as "300 MeV" or "17 deg"."""

from __future__ import annotations

import math
import re
from decimal import Decimal

# Factors to GeV, GeV², rad, mm and ps; decimal, so that "1.2 mrad" is the float nearest to 0.0012.
UNITS: dict[str, dict[str, Decimal]] = {
    "energy": {
        "GeV": Decimal(1),
        "MeV": Decimal("1e-3"),
        "keV": Decimal("1e-6"),
        "eV": Decimal("1e-9"),
        "TeV": Decimal("1e3"),
    },
    "energy squared": {"GeV2": Decimal(1), "GeV^2": Decimal(1), "GeV²": Decimal(1), "MeV2": Decimal("1e-6")},
    "angle": {
        "rad": Decimal(1),
        "mrad": Decimal("1e-3"),
        "urad": Decimal("1e-6"),
        "deg": Decimal(math.pi) / 180,
    },
    "length": {"mm": Decimal(1), "um": Decimal("1e-3"), "cm": Decimal(10), "m": Decimal(1000)},
    "time": {"ps": Decimal(1), "fs": Decimal("1e-3"), "ns": Decimal(1000)},
}

_QUANTITY = re.compile(r"\s*([+-]?(?:\d+\.?\d*|\.\d+)(?:[eE][+-]?\d{1,3})?)\s*(\S*)\s*")


class UnitError(ValueError):
    """A quantity that cannot be read: `what` rule is broken, what is `wanted`, and the `remedy`."""

    def __init__(self, what: str, wanted: str, remedy: str = "") -> None:
        super().__init__(what)
        self.what, self.wanted, self.remedy = what, wanted, remedy


def quantity(text: str, dimension: str) -> float:
    """Value of `text` ("300 MeV") in the program's unit of `dimension`, a key of `UNITS`; correctly rounded.

    Raises UnitError if the text is no number with a unit, if the unit is unknown or belongs to another dimension.
    """
    units = UNITS[dimension]
    wanted = f"a number in {next(iter(units))}, or a string with one of {', '.join(units)}"
    match = _QUANTITY.fullmatch(text)
    if match is None:
        raise UnitError("must be a number, or a number with a unit", wanted)
    number, unit = match.groups()
    if not unit:
        raise UnitError("is a string without a unit", wanted, "Take the quotation marks away or add the unit.")
    if unit not in units:
        for other, names in UNITS.items():
            if unit in names:
                raise UnitError(f"has the unit of {_article(other)}, not of {_article(dimension)}", wanted)
        alike = [name for name in units if name.casefold() == unit.casefold()]
        raise UnitError("has an unknown unit", wanted, f'Did you mean "{alike[0]}"?' if alike else "")
    return float(Decimal(number) * units[unit])


def _article(dimension: str) -> str:
    return f"an {dimension}" if dimension[0] in "aeiou" else f"a {dimension}"
