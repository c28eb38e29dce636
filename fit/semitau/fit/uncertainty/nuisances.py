"""What the fit says of each nuisance, and what each nuisance does to the ratios."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from semitau.core.errors import RunError
from semitau.core.templates import Floats

from ..fitting.data import Source
from ..fitting.model import Model
from ..fitting.result import FitResult
from .curves import Conditional
from .decomposition import STATISTICAL, TEMPLATES
from .fit_quality import relative_variances

STEP = 1e-4
"""Of the numerical derivative of the expectations, in errors of the parameter."""


@dataclass(frozen=True)
class NuisanceShift:
    """One constrained parameter.

    pull : fitted value minus its auxiliary measurement, in units of that measurement's error.
    constraint : error after the fit over that before; below 1 the data know more than the auxiliary measurement.
    shifts : ratio -> its change when the parameter is held one fitted error below and above its fitted value and all
        others are fitted again; NaN where that fit fails.
    """

    name: str
    label: str
    group: str
    pull: float
    constraint: float
    shifts: Mapping[str, tuple[float, float]]


def nuisance_shifts(model: Model, data: Source, result: FitResult) -> tuple[NuisanceShift, ...]:
    """Every constrained parameter that is fitted, those that move the ratios most (in their errors) first.

    Raises RunError when the fit is not valid.
    """
    if not result.valid:
        raise RunError(*result.reasons)
    observed = model.data(data)
    ratios = [name for name in model.ratios if result.error(name) > 0]
    found = []
    for index in model.free.tolist():
        parameter = model.parameters[index]
        if parameter.constraint is None or parameter.function is not None or parameter.name in ratios:
            continue
        ends = [_moved(model, observed, result, index, side) for side in (-1.0, 1.0)]
        places = [model.index(ratio) for ratio in ratios]
        found.append(
            NuisanceShift(
                name=parameter.name,
                label=parameter.label,
                group=parameter.group,
                pull=float(result.values[index] - observed.centres[index]) / parameter.constraint,
                constraint=float(result.errors[index]) / parameter.constraint,
                shifts=MappingProxyType(
                    {
                        ratio: (float(ends[0][place]), float(ends[1][place]))
                        for ratio, place in zip(ratios, places, strict=True)
                    }
                ),
            )
        )

    def size(shift: NuisanceShift) -> float:
        parts = [max(map(abs, ends)) / result.error(ratio) for ratio, ends in shift.shifts.items()]
        return max([part for part in parts if np.isfinite(part)], default=0.0)

    return tuple(sorted(found, key=size, reverse=True))


def held_in_turn(model: Model, result: FitResult, name: str) -> dict[str, float]:
    """By how much, in quadrature, the error of a parameter falls when one source is held: the rows of a budget.

    A group of nuisances is held at its fitted values; "template statistics" takes the templates as exact; "statistical"
    is the error with all of these held. Unlike the parts of `budget`, these do not add up to the total: what two
    sources share counts in neither. Errors are from the expected information, scaled to the error of the fit.

    Raises RunError when the fit is not valid.
    """
    if not result.valid:
        raise RunError(*result.reasons)
    free = np.array([index for index in model.free if result.errors[index] > 0])
    rows = np.array([_slope(model, result, int(index)) for index in free])
    mu = model.expected_counts(result.values)
    seen = mu > 0
    rows, mu, variance = rows[:, seen], mu[seen], relative_variances(model)[seen]
    exact = (rows / mu) @ rows.T
    whole = (rows / (mu + mu**2 * variance)) @ rows.T
    parameters = [model.parameters[index] for index in free]
    through = model.jacobian(result.values)[:, free]
    constraints = through.T @ model.precision(result.values) @ through
    towards = through[model.index(name)]  # of a parameter that is a function of others: its slopes
    everything = np.ones(free.size, dtype=bool)
    total = _variance(whole + constraints, everything, towards)
    groups: dict[str, np.ndarray] = {}
    constrained = np.array([p.constraint is not None and p.name != name for p in parameters])
    for group in dict.fromkeys(p.group for p, is_one in zip(parameters, constrained, strict=True) if is_one):
        groups[group] = constrained & np.array([p.group == group for p in parameters])
    to_fit = result.error(name) ** 2 / total
    rows_of = {
        STATISTICAL: _variance(exact, ~constrained, towards),
        TEMPLATES: total - _variance(exact + constraints, everything, towards),
    }
    for group, members in groups.items():
        rows_of[group] = total - _variance(whole + constraints, ~members, towards)
    return {source: float(np.sqrt(max(0.0, part) * to_fit)) for source, part in rows_of.items()}


def _variance(information: Floats, kept: np.ndarray, towards: Floats) -> float:
    """Of what moves by `towards` with the parameters, when all but the kept ones are held."""
    matrix = information[np.ix_(kept, kept)]
    scale = 1.0 / np.sqrt(np.diag(matrix))
    inverse = np.linalg.inv(matrix * np.outer(scale, scale)) * np.outer(scale, scale)
    return float(towards[kept] @ inverse @ towards[kept])


def _slope(model: Model, result: FitResult, index: int) -> Floats:
    up, down = result.values.copy(), result.values.copy()
    step = STEP * float(result.errors[index])
    up[index] += step
    down[index] -= step
    return (model.expected_counts(up) - model.expected_counts(down)) / (2.0 * step)


def _moved(model: Model, data: Source, result: FitResult, index: int, side: float) -> Floats:
    conditional = Conditional(model, data, [model.names[index]], result)
    height = conditional.height(float(result.values[index] + side * result.errors[index]))
    return conditional.x - result.values if np.isfinite(height) else np.full(result.values.size, np.nan)
