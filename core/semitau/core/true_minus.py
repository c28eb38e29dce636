"""Numbers for people: with a true minus sign, also in exponents. Files for programs keep the ASCII hyphen."""

from __future__ import annotations


def formatted(value: float, form: str) -> str:
    """`value` as `format` writes it, with "−" (U+2212) for "-"."""
    return format(value, form).replace("-", "−")
