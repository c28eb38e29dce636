"""Ten model problems with the plain likelihood (reference.py) that every minimiser can take. Contents are invented."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from semitau.core.templates import Component, Nuisance, ScaleParameter, Template, TemplateSet

from . import problems


def peak(bins: int = 40, events: float = 2000.0) -> TemplateSet:
    """A narrow signal, a fifth of all, on a falling background; position of the peak and slope are nuisances."""
    x = (np.arange(bins) + 0.5) / bins

    def signal(shift: float) -> np.ndarray:
        shape = np.exp(-0.5 * ((x - 0.5 - shift) / 0.08) ** 2) + 1e-3
        return np.asarray(0.2 * events * shape / shape.sum())

    def rest(slope: float) -> np.ndarray:
        shape = np.exp(-slope * x)
        return np.asarray(0.8 * events * shape / shape.sum())

    templates = {
        ("all", "signal"): Template(signal(0), 0.2 * signal(0), {"place": signal(0.02)}, {"place": signal(-0.02)}),
        ("all", "rest"): Template(rest(1.5), 0.5 * rest(1.5), {"slope": rest(1.9)}, {"slope": rest(1.2)}),
    }
    return TemplateSet(
        (problems.axes("all", bins),),
        (
            Component("signal", "signal", "signal", ("R_D", "yield_rest")),
            Component("rest", "rest", "background", ("yield_rest",)),
        ),
        (ScaleParameter("R_D", "R(D)", "ratio", 0.3), ScaleParameter("yield_rest", "rest", "yield", 1.0)),
        (Nuisance("place", "place", "shape"), Nuisance("slope", "slope", "shape")),
        templates,
    )


def negative_weights() -> TemplateSet:
    """A correction with negative contents on top of three yields, as events with negative weights make it."""
    base = problems.linear(400.0)
    x = (np.arange(12) + 0.5) / 12
    correction = 40.0 * (x - 0.5)
    templates = dict(base.templates) | {("wide", "d"): Template(correction, np.full(12, 9.0))}
    return TemplateSet(
        base.categories,
        (*base.components, Component("d", "d", "background", ("yield_d",))),
        (*base.parameters, ScaleParameter("yield_d", "d", "yield", 1.0, 0.5)),
        (),
        templates,
    )


def strong_nuisances() -> TemplateSet:
    """`problems.small` with shifts four times as large: bins bend, some are held up by the protection."""
    base = problems.small()
    changed = {
        place: Template(
            t.nominal,
            t.variance,
            {name: t.nominal + 4 * (side - t.nominal) for name, side in t.plus.items()},
            {name: t.nominal + 4 * (side - t.nominal) for name, side in t.minus.items()},
        )
        for place, t in base.templates.items()
    }
    return replace(base, templates=changed)


PROBLEMS: dict[str, TemplateSet] = {
    "one bin": problems.one_bin(variance=30.0),
    "linear": problems.linear(100.0),
    "small": problems.small(),
    "exact templates": problems.small(variance=0.0),
    "sparse": problems.small(sparse=True),
    "peak": peak(),
    "negative weights": negative_weights(),
    "strong nuisances": strong_nuisances(),
    "poor templates": problems.small(variance=8.0),
    "many events": problems.small(factor=100.0),
}
