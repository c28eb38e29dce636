"""Numbers for people."""

from __future__ import annotations

import pytest
from semitau.core.true_minus import formatted


@pytest.mark.parametrize(
    ("value", "form", "shown"),
    [
        (-0.25, "+.2f", "−0.25"),
        (0.25, "+.2f", "+0.25"),
        (3.21e-5, ".2g", "3.2 × 10⁻⁵"),
        (-7e11, ".1e", "−7.0 × 10¹¹"),
        (12.0, "g", "12"),
        (float("-inf"), "g", "−inf"),
    ],
)
def test_formatted(value: float, form: str, shown: str) -> None:
    assert formatted(value, form).replace("\u00a0", " ") == shown
