"""Numbers for people: with a true minus sign, and powers of ten raised. Files for programs keep the ASCII forms."""

from __future__ import annotations

import math

GAP = "\u00a0"
RAISED = str.maketrans("0123456789-", "⁰¹²³⁴⁵⁶⁷⁸⁹⁻")


def with_sign(value: float, error: float) -> str:
    """A difference beside its error, which has two digits: "+0.0013 ± 0.0017"."""
    places = max(1 - math.floor(math.log10(error)), 0) if error > 0.0 and math.isfinite(error) else 3
    return f"{formatted(value, f'+.{places}f')} ± {error:.{places}f}"


def formatted(value: float, form: str) -> str:
    """`value` as `format` writes it, with "−" (U+2212) for "-" and "3 × 10⁻⁵" for "3e-05"."""
    mantissa, exponential, exponent = format(value, form).partition("e")
    text = mantissa.replace("-", "−")
    return f"{text}{GAP}×{GAP}10{str(int(exponent)).translate(RAISED)}" if exponential else text
