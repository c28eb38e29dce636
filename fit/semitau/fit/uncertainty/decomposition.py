"""The uncertainty of a ratio, taken apart by source so that the parts add up in quadrature.

A fitted value is a function of everything measured: the counts, the auxiliary measurements of the nuisances and yields,
and those of the template-statistics factors. Each fluctuates on its own, so to first order the variance is a sum over
these sources, each with the square of what the fit makes of its fluctuation (method as in EPJC 84 (2024) 593). With the
expected information I = Σ_s I_s, every source's part of the covariance is I⁻¹ I_s I⁻¹, with, for a bin of expectation μ
and relative template variance v, derivative row J = dμ/d(parameters):

    counts     J Jᵀ / (μ (1 + μv)²)
    templates  J Jᵀ v / (1 + μv)²          together J Jᵀ/(μ + μ²v)
    constraint of parameter k              1/σ_k² at (k, k)

Unlike differences of squared errors with parameters held, these parts depend on no order and have no cross terms. They
are taken at the fitted parameters; all are scaled by one number so that they add up to the error of the fit, whose
Hessian is that of the data at hand (the number is 1 for the expected set).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from semitau.core.compiled import kernel
from semitau.core.errors import Problem, RunError
from semitau.core.templates import Floats

from ..fitting.model import Model
from ..fitting.result import FitResult
from ..likelihood.expectation import FISHER, Workspace, set_point, sum_pieces, workspace
from ..likelihood.interpolation import positive
from ..likelihood.layout import Arrays
from ..likelihood.likelihood import add_outer_products

STATISTICAL = "statistical"
TEMPLATES = "template statistics"


@dataclass(frozen=True)
class Budget:
    """Sources of the uncertainty of one parameter.

    value, total : fitted value and its error.
    rows : source -> error, in the parameter's unit: "statistical", "template statistics", then each group of nuisances
        and, where yields or ratios are constrained, "yields" and "ratios"; their squares add up to total².
    systematic : quadratic sum of all rows but the first two.
    sources : constrained parameter -> its part of the error; those of a group add up to its row in quadrature.
    """

    parameter: str
    value: float
    total: float
    rows: Mapping[str, float]
    systematic: float
    sources: Mapping[str, float]


def budget(model: Model, result: FitResult) -> dict[str, Budget]:
    """Take the errors of a fit apart: parameter of interest (each ratio that is not fixed) -> Budget.

    Raises RunError when the fit is not valid.
    """
    return {name: budget_of(model, result, name) for name in model.ratios if result.error(name) != 0.0}


def budget_of(model: Model, result: FitResult, name: str) -> Budget:
    """The budget of any one fitted parameter. Raises RunError when the fit is not valid or the parameter was held."""
    index = model.index(name)
    if not result.valid or not result.errors[index] > 0:
        raise RunError(
            Problem(
                "there is no error to take apart",
                where=f"budget of {name}",
                remedy="; ".join(reason.what for reason in result.reasons) or "The parameter was held fixed.",
            )
        )
    free = np.array([k for k in model.free if result.errors[k] > 0])
    place = np.ix_(free, free)
    # Parameters that are functions of others are taken back to those.
    through = model.jacobian(result.values)
    counts, templates = ((through.T @ part @ through)[place] for part in information(model, result.values))
    known = model.precision(result.values)
    total = counts + templates + (through.T @ known @ through)[place]
    # Row of the inverse information: what a unit of information about each parameter does to this one.
    scale = 1.0 / np.sqrt(np.diag(total))
    row = scale * np.linalg.solve(total * np.outer(scale, scale), scale * through[index, free])
    variances = {STATISTICAL: float(row @ counts @ row), TEMPLATES: float(row @ templates @ row)}
    reach = through[:, free] @ row  # the same for every parameter, through functions too
    sources: dict[str, float] = {}
    for members in _sources(model, reach):
        source = " & ".join(model.names[k] for k in members)
        sources[source] = float(reach[members] @ known[np.ix_(members, members)] @ reach[members])
        group = model.parameters[members[0]].group
        group += " (nuisances)" * (group in (STATISTICAL, TEMPLATES))
        variances[group] = variances.get(group, 0.0) + sources[source]
    error = result.error(name)
    to_fit = error**2 / sum(variances.values())
    rows = {source: float(np.sqrt(variance * to_fit)) for source, variance in variances.items()}
    systematic = sum(part**2 for source, part in rows.items() if source not in (STATISTICAL, TEMPLATES))
    return Budget(
        parameter=name,
        value=result.value(name),
        total=error,
        rows=MappingProxyType(rows),
        systematic=float(np.sqrt(systematic)),
        sources=MappingProxyType({source: float(np.sqrt(part * to_fit)) for source, part in sources.items()}),
    )


def _sources(model: Model, reach: Floats) -> list[list[int]]:
    """Parameters whose auxiliary measurement acts, those that were measured together in one list."""
    precision = model.layout.arrays.constraints.precision
    found: list[list[int]] = []
    for k, parameter in enumerate(model.parameters):
        if parameter.constraint is None or reach[k] == 0.0:
            continue
        home = next((members for members in found if precision[k, members[0]] != 0.0), None)
        if home is None:
            found.append([k])
        else:
            home.append(k)
    return found


def information(model: Model, values: Floats) -> tuple[Floats, Floats]:
    """Expected information of the counts and of the templates' finite statistics, each (parameters, parameters)."""
    arrays = model.layout.arrays
    size = values.size
    parts = np.zeros((size, size)), np.zeros((size, size))
    work, gradient = workspace(arrays), np.zeros(size)
    for part, of_templates in zip(parts, (False, True), strict=True):
        _information(arrays, np.array(values), of_templates, work, gradient, part)
        part += np.tril(part, -1).T
    return parts


@kernel
def _information(arrays: Arrays, x: Floats, of_templates: bool, work: Workspace, gradient: Floats, out: Floats) -> None:
    set_point(arrays, x, work)
    for tile in range(arrays.tile_filled.shape[0]):
        sum_pieces(arrays, tile, x, FISHER, work)
        first = arrays.tile_first[tile]
        work.lanes[1:3, :] = 0.0
        for i in range(arrays.tile_filled[tile]):
            variance = arrays.template_variance[first + i]
            mu, slope, _ = positive(work.lanes[0, i], arrays.floor[first + i])
            shared = slope * slope / (1.0 + mu * variance) ** 2
            work.lanes[2, i] = shared * variance if of_templates else shared / mu
        add_outer_products(arrays, tile, gradient, out, work)
