"""Numbers as people write them."""

from __future__ import annotations

import math

import pytest
from semitau.study.numbers import counted, digits_beside, digits_for, percent, signed, with_error
from semitau.study.terminal.progress import duration

# Two significant digits of the error: the common practice of particle physics tables.
CASES = [
    (0.2994, 0.0123, "0.299 ± 0.012"),
    (0.3, 0.0996, "0.30 ± 0.10"),
    (0.3, 0.095, "0.300 ± 0.095"),
    (-1.25, 0.9, "−1.25 ± 0.90"),
    (1234.5, 67.0, "1234 ± 67"),
    (-0.0001, 0.5, "0.00 ± 0.50"),
    (1234.5, 670.0, "1234 ± 670"),
]


@pytest.mark.parametrize(("value", "error", "text"), CASES)
def test_two_digits_of_the_error(value: float, error: float, text: str) -> None:
    assert with_error(value, error).replace("\u00a0", " ") == text


def test_no_error_no_crash() -> None:
    assert digits_for(0.0) == digits_for(math.nan) == digits_for(math.inf) == 3


def test_signs_counts_and_shares() -> None:
    assert signed(0.4, 2, plus=True) == "+0.40"
    assert signed(-0.001, 2, plus=True) == "0.00"
    assert counted(12345.4) == "12\u202f345"
    assert counted(8.4) == "8.4"
    assert counted(8.0) == "8"
    assert percent(0.6827) == "68.3\u00a0%"


def test_durations() -> None:
    assert [duration(t) for t in (0.84, 9.96, 59.4, 59.6, 200.0)] == [
        "0.8 s",
        "10 s",
        "59 s",
        "1 min 0 s",
        "3 min 20 s",
    ]


def test_small_numbers_beside_others() -> None:
    """Common practice: as the others, unless nothing of the number would be seen."""
    assert signed(0.0063, digits_beside(0.0063, 0.026)) == "0.0063"
    assert signed(0.000031, digits_beside(0.000031, 0.018)) == "0.00003"
    assert signed(0.0, digits_beside(0.0, 0.018)) == "0.0000"
