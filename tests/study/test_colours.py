"""Colours of the components stay apart for readers with any of the three colour blindnesses."""

from __future__ import annotations

from itertools import combinations

import numpy as np
import pytest
from semitau.study.pictures.style import BACKGROUND_HUES, FEED_DOWN_HUES, NORMALISATION_TINTS, RATIO_HUES

# Linear RGB as the dichromat sees it: Machado, Oliveira, Fernandes, IEEE Trans. Vis. Comput. Graph. 15 (2009) 1291,
# severity 1, from memory.
SEEN = {
    "everybody": np.eye(3),
    "protanopia": np.array(
        [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]]
    ),
    "deuteranopia": np.array(
        [[0.367322, 0.860646, -0.227968], [0.280085, 0.672501, 0.047413], [-0.011820, 0.042940, 0.968881]]
    ),
    "tritanopia": np.array(
        [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]]
    ),
}
# Linear sRGB to CIE XYZ, D65 (IEC 61966-2-1).
XYZ = np.array([[0.4124, 0.3576, 0.1805], [0.2126, 0.7152, 0.0722], [0.0193, 0.1192, 0.9505]])
APART = 9.0
"""CIE 1976 colour difference; about 2 is just noticeable side by side (common practice)."""

COLOURS = (*RATIO_HUES[:2], *NORMALISATION_TINTS[:2], *FEED_DOWN_HUES[:2], *BACKGROUND_HUES[:3])


def linear(colour: str) -> np.ndarray:
    parts = np.array([int(colour[i : i + 2], 16) for i in (1, 3, 5)]) / 255
    return np.where(parts <= 0.04045, parts / 12.92, ((parts + 0.055) / 1.055) ** 2.4)


def lab(rgb: np.ndarray) -> np.ndarray:
    """CIE L*a*b* (1976) of a linear sRGB colour."""
    t = XYZ @ np.clip(rgb, 0, 1) / XYZ.sum(axis=1)
    f = np.where(t > (6 / 29) ** 3, np.cbrt(t), t / (3 * (6 / 29) ** 2) + 4 / 29)
    return np.array([116 * f[1] - 16, 500 * (f[0] - f[1]), 200 * (f[1] - f[2])])


def test_white_stays_white() -> None:
    for matrix in SEEN.values():
        np.testing.assert_allclose(matrix @ np.ones(3), 1.0, atol=2e-6)
    np.testing.assert_allclose(lab(np.ones(3)), [100, 0, 0], atol=1e-9)


@pytest.mark.parametrize("reader", SEEN)
def test_components_are_told_apart(reader: str) -> None:
    for one, other in combinations(COLOURS, 2):
        difference = np.linalg.norm(lab(SEEN[reader] @ linear(one)) - lab(SEEN[reader] @ linear(other)))
        assert difference > APART, (one, other, difference)
