"""Model problems whose templates are themselves random: many bins, few generated events. Contents are invented."""

from __future__ import annotations

import numpy as np
from semitau.core.templates import Component, ScaleParameter, Template, TemplateSet

from . import problems


def poor(
    rng: np.random.Generator | None,
    *,
    bins: int = 400,
    events: float = 1e5,
    generated: tuple[float, float] = (1e5, 1e5),
    split: float = 0.1,
) -> TemplateSet:
    """Two components 1 ± split cos(2πx) of equal size, each from a Poisson number of weighted generated events a bin.

    rng : None for the true templates, with the variances that the generated ones have on average.
    """
    x = (np.arange(bins) + 0.5) / bins
    templates = {}
    for name, sign, number in (("a", 1.0, generated[0]), ("b", -1.0, generated[1])):
        shape = 1.0 + sign * split * np.cos(2 * np.pi * x)
        weight = 0.5 * events / number
        filled = 0.5 * events / weight * shape / shape.sum()
        if rng is not None:
            filled = rng.poisson(filled).astype(float)
        templates["wide", name] = Template(weight * filled, weight**2 * filled)
    return TemplateSet(
        categories=(problems.axes("wide", bins),),
        components=(Component("a", "a", "signal", ("R_D",)), Component("b", "b", "background", ("yield_b",))),
        parameters=(ScaleParameter("R_D", "R(D)", "ratio", 0.3), ScaleParameter("yield_b", "b", "yield", 1.0)),
        nuisances=(),
        templates=templates,
    )
