"""Numbers as people write them: errors with two digits, thin gaps between thousands."""

from __future__ import annotations

import math

GAP = "\u00a0"
"""Between what belongs on one line."""


def digits_for(error: float) -> int:
    """Decimal places that show two significant digits of `error` (10 to 99 in units of the last place)."""
    if not (error > 0 and math.isfinite(error)):
        return 3
    places = 1 - math.floor(math.log10(error))
    # 0.0996 shows as 0.10, not as 0.100.
    if round(error * 10.0**places) >= 100:
        places -= 1
    return max(places, 0)


def digits_beside(value: float, error: float) -> int:
    """Decimal places for a number beside others with this error: one more than theirs, or more to show a digit."""
    return max(digits_for(error) + 1, digits_for(value) - 1 if value > 0 else 0)


def with_error(value: float, error: float) -> str:
    """E.g. "0.299 ± 0.012"."""
    places = digits_for(error)
    return f"{signed(value, places)}{GAP}±{GAP}{error:.{places}f}"


def bracketed(value: float, error: float) -> str:
    """The error in units of the last digits, e.g. "0.0810(18)"; three digits where it is below them."""
    if not error > 0.005 * abs(value):
        return signed(value, digits_for(abs(value)) + 1) if value else "0"
    places = digits_for(error)
    return f"{signed(value, places)}({round(error * 10**places)})"


def signed(value: float, places: int, plus: bool = False) -> str:
    """Fixed decimal places, a true minus sign, no "-0"."""
    text = f"{value:+.{places}f}" if plus else f"{value:.{places}f}"
    if float(text) == 0:
        text = text.lstrip("+-")
    return text.replace("-", "−")


def counted(number: float) -> str:
    """A count with a thin gap between thousands: 12 345, 8.4 (one decimal below 10 if it is not whole)."""
    if abs(number) < 10 and number != round(number):
        return f"{number:.1f}"
    return f"{round(number):,}".replace(",", "\u202f")


def percent(fraction: float, places: int = 1) -> str:
    """E.g. "4.2 %"."""
    return f"{signed(100 * fraction, places)}{GAP}%"


def shortened(name: str, length: int = 28) -> str:
    """A name cut to a length that fits a table or a picture."""
    return name if len(name) <= length else name[: length - 1].rstrip() + "…"


def duration(seconds: float) -> str:
    """Seconds in words, e.g. "0.8 s", "42 s", "3 min 20 s"."""
    if seconds < 9.95:
        return f"{seconds:.1f} s"
    whole = round(seconds)
    return f"{whole} s" if whole < 60 else f"{whole // 60} min {whole % 60} s"
