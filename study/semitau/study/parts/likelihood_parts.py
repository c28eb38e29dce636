"""Likelihood curves and regions of the fit package as tables, documents and pictures."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from numpy.typing import NDArray
from rich.table import Table
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.result import FitResult
from semitau.fit.uncertainty.curves import Profile, Region

from ..numbers import GAP, digits_for, signed, with_error
from ..pictures.likelihood import Curve, Plane, likelihood
from ..pictures.sheet import Sheet
from ..terminal.summary import plain_table


def curve_table(model: Model, best: FitResult, curves: Sequence[Profile]) -> Table:
    """Each ratio with its symmetric error and its likelihood interval."""
    table = plain_table("", "fitted", "− side", "+ side", "made with")
    for curve in curves:
        parameter, error = model.parameters[model.index(curve.parameter)], best.error(curve.parameter)
        places = digits_for(error)
        table.add_row(
            parameter.label,
            with_error(curve.value, error),
            f"−{GAP}{curve.value - curve.low:.{places + 1}f}" if np.isfinite(curve.low) else "not reached",
            f"+{GAP}{curve.high - curve.value:.{places + 1}f}" if np.isfinite(curve.high) else "not reached",
            signed(parameter.injected, places),
        )
    return table


def curve_document(curve: Profile) -> dict[str, object]:
    """A curve as plain numbers; null where a conditional fit failed or an end was not reached."""
    return {
        "parameter": curve.parameter,
        "value": curve.value,
        "low": _number(curve.low),
        "high": _number(curve.high),
        "low_two": _number(curve.low_two),
        "high_two": _number(curve.high_two),
        "points": curve.points.tolist(),
        "heights": _numbers(curve.heights),
        "failures": curve.failures,
    }


def region_document(region: Region) -> dict[str, object]:
    """A region as plain numbers: heights[i][j] belongs to first[i], second[j]."""
    return {
        "parameters": list(region.parameters),
        "values": list(region.values),
        "first": region.first.tolist(),
        "second": region.second.tolist(),
        "heights": [_numbers(row) for row in region.heights],
        "levels": dict(region.levels),
        "failures": region.failures,
    }


def drawn_curves(model: Model, curves: Sequence[Profile], region: Region | None, hidden: bool = False) -> Sheet:
    """The picture of them all. hidden : the ratios are not the true ones."""
    labels = {parameter.name: parameter.label for parameter in model.parameters}
    injected = {parameter.name: parameter.injected for parameter in model.parameters}
    plane = None
    if region is not None:
        first, second = region.parameters
        plane = Plane(
            labels=(labels[first], labels[second]),
            first=region.first,
            second=region.second,
            heights=region.heights,
            best=region.values,
            injected=None if hidden else (injected[first], injected[second]),
            levels=region.levels,
        )
    return likelihood(
        [
            Curve(
                label=labels[curve.parameter],
                points=curve.points,
                heights=curve.heights,
                # An end that is not reached lies outside the picture.
                low=curve.low if np.isfinite(curve.low) else float(curve.points[0]),
                high=curve.high if np.isfinite(curve.high) else float(curve.points[-1]),
            )
            for curve in curves
        ],
        plane,
        hidden,
    )


def _number(value: float) -> float | None:
    return value if np.isfinite(value) else None


def _numbers(values: NDArray[np.float64]) -> list[float | None]:
    return [_number(value) for value in values.tolist()]
