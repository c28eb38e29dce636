"""Quantities with units. Conversions are those of the SI brochure (9th edition, tables 7 and 8): prefixes, π/180."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st
from semitau.gen.study_file.units import UNITS, UnitError, quantity


@pytest.mark.parametrize(
    ("text", "dimension", "value"),
    [
        ("300 MeV", "energy", 0.3),
        ("0.3GeV", "energy", 0.3),
        ("  1.2e3 keV ", "energy", 0.0012),
        ("-5 eV", "energy", -5e-9),
        ("7 TeV", "energy", 7000.0),
        (".5 GeV2", "energy squared", 0.5),
        ("1 GeV²", "energy squared", 1.0),
        ("2 GeV^2", "energy squared", 2.0),
        ("5e5 MeV2", "energy squared", 0.5),
        ("1.2 mrad", "angle", 0.0012),
        ("17 deg", "angle", math.radians(17)),
        ("180 deg", "angle", math.pi),
        ("50 urad", "angle", 5e-5),
        ("30 um", "length", 0.03),
        ("1 cm", "length", 10.0),
        ("1519 fs", "time", 1.519),
    ],
)
def test_values(text: str, dimension: str, value: float) -> None:
    # equal to the last bit: the conversion is decimal and rounds once (an angle in degrees may be one rounding off)
    tolerance = 4e-16 if "deg" in text else 0.0
    assert quantity(text, dimension) == pytest.approx(value, rel=tolerance, abs=0.0)


@given(st.integers(-(10**6), 10**6), st.integers(0, 3))
def test_decimal_numbers_round_once(digits: int, places: int) -> None:
    """300.1 MeV is the float nearest to 0.3001: Python's own parser of decimal text is the reference."""
    text = f"{digits}e-{places} MeV"
    assert quantity(text, "energy") == float(f"{digits}e-{places + 3}")


@pytest.mark.parametrize(
    ("text", "dimension", "what", "more"),
    [
        ("300", "energy", "is a string without a unit", "quotation marks"),
        ("fast", "energy", "must be a number, or a number with a unit", ""),
        ("", "energy", "must be a number, or a number with a unit", ""),
        ("1 2 MeV", "energy", "must be a number, or a number with a unit", ""),
        ("nan MeV", "energy", "must be a number, or a number with a unit", ""),
        ("3 deg", "energy", "has the unit of an angle, not of an energy", ""),
        ("3 GeV", "energy squared", "has the unit of an energy, not of an energy squared", ""),
        ("3 GeV", "length", "has the unit of an energy, not of a length", ""),
        ("3 mev", "energy", "has an unknown unit", 'Did you mean "MeV"?'),
        ("3 furlong", "length", "has an unknown unit", ""),
    ],
)
def test_errors(text: str, dimension: str, what: str, more: str) -> None:
    with pytest.raises(UnitError) as error:
        quantity(text, dimension)
    assert error.value.what == what
    assert more in error.value.remedy
    assert next(iter(UNITS[dimension])) in error.value.wanted


@given(st.text(max_size=30), st.sampled_from(sorted(UNITS)))
def test_any_text_is_a_number_or_a_unit_error(text: str, dimension: str) -> None:
    try:
        value = quantity(text, dimension)
    except UnitError:
        return
    assert isinstance(value, float)
