"""Differential rates in q² with the bands that the form factors leave open."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from matplotlib import rc_context
from matplotlib.axes import Axes
from numpy.typing import NDArray

from .sheet import Panels, Sheet
from .style import RATIO_HUES, RC

UNIT = 1e-15
"""GeV⁻¹ on the axis."""


@dataclass(frozen=True)
class Curve:
    """label : the lepton. q2 in GeV², rate and its standard deviation in GeV⁻¹, (points,) each."""

    label: str
    q2: NDArray[np.float64]
    rate: NDArray[np.float64]
    error: NDArray[np.float64]


def spectra(panels: Mapping[str, Sequence[Curve]]) -> Sheet:
    """A sheet with one panel a decay, named by the keys, its leptons in one colour each."""
    layout = Panels(count=len(panels), columns=3, width=3.2, height=2.4, left=0.75, foot=0.55, head=0.35)
    labels = list(dict.fromkeys(curve.label for curves in panels.values() for curve in curves))
    colours = dict(zip(labels, (RATIO_HUES[1], RATIO_HUES[0], *RATIO_HUES[2:]), strict=False))
    width, height = layout.sheet_size
    with rc_context(RC):
        sheet = Sheet(width, height, "Differential rates", "bands: one standard deviation of the form factors")
        for number, (title, curves) in enumerate(panels.items()):
            axes = sheet.axes(*layout.corner(number), layout.width, layout.height)
            _draw(axes, title, curves, colours)
            if number % layout.columns == 0:
                axes.set_ylabel("dΓ/dq² (10⁻¹⁵ GeV⁻¹)")
    return sheet


def _draw(axes: Axes, title: str, curves: Sequence[Curve], colours: Mapping[str, str]) -> None:
    for curve in curves:
        rate, error, colour = curve.rate / UNIT, curve.error / UNIT, colours[curve.label]
        axes.fill_between(curve.q2, rate - error, rate + error, color=colour, alpha=0.25, linewidth=0)
        axes.plot(curve.q2, rate, color=colour, linewidth=1.3, label=curve.label)
    axes.set_title(title)
    axes.set_xlim(0.0, max(float(curve.q2[-1]) for curve in curves))
    axes.set_ylim(bottom=0.0)
    axes.set_xlabel("q² (GeV²)")
    axes.legend(loc="upper right", borderaxespad=0.2, handlelength=1.4)
