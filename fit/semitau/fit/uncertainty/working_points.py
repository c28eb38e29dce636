"""Expected errors of the ratios from bin contents alone, for thousands of selections and binnings of one model.

At the injected parameters a bin of expectation μ, with variance V of its finite templates, tells of the parameters the
information J Jᵀ/(μ + V), J = dμ/d(parameters); the auxiliary measurements add their inverse covariance. That is the
expected Hessian of the likelihood (likelihood.py), and of the expected set the exact one, so the errors are those that
a fit to it gives. J is linear in the templates: for a ratio or yield the contents that scale with it over its value,
for a nuisance half the difference of the sides, summed over components. Where nothing was generated nothing is said.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass

import numpy as np
from semitau.core.candidate_grid import EXPECTED, GENERATED, VARIANCE
from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from ..fitting.algebra import factorise, solve
from ..fitting.model import Model
from ..likelihood.layout import Indices

FIRST = 3
"""Columns of bin contents before the derivatives."""

SIDES = {"plus": 1, "minus": -1}


@dataclass(frozen=True, eq=False)
class Sensitivity:
    """What a model knows besides the bins.

    names : parameters that are not held, in the order of the derivatives. through (names, free) : derivatives of these
    in the fitted ones. known (free, free) : inverse covariance of the auxiliary measurements. ratios : names of those
    of interest; values : their injected values. template_statistics : whether V counts.
    """

    names: tuple[str, ...]
    through: Floats
    known: Floats
    ratios: tuple[str, ...]
    values: Floats
    template_statistics: bool

    @classmethod
    def of(cls, model: Model) -> Sensitivity:
        """That of a model at its injected values."""
        moving = [k for k, parameter in enumerate(model.parameters) if parameter.fixed is None]
        jacobian = model.jacobian(model.injected)
        through = jacobian[:, model.free]
        names = tuple(model.names[k] for k in moving)
        ratios = tuple(name for name in model.ratios if name in names and through[model.index(name)].any())
        return cls(
            names=names,
            through=through[moving],
            known=through.T @ model.precision(model.injected) @ through,
            ratios=ratios,
            values=np.array([model.injected[model.index(name)] for name in ratios]),
            template_statistics=model.template_statistics,
        )

    def without(self, name: str) -> Sensitivity:
        """The same with a parameter of its own known exactly."""
        k = self.names.index(name)
        left = np.flatnonzero(self.through[k] == 0.0)
        return Sensitivity(
            self.names, self.through[:, left], self.known[np.ix_(left, left)], self.ratios, self.values,
            self.template_statistics,
        )  # fmt: skip

    def information(self, contents: Floats) -> Floats:
        """(names, names) lower triangle of what bins tell. contents (bins, 3 + names) : as in core.candidate_grid."""
        out = np.zeros((len(self.names), len(self.names)))
        add_information(contents, self.template_statistics, out)
        return out

    def rows(self, information: Floats) -> Floats | None:
        """(ratios, names): covariance of each ratio with all parameters; None if the bins do not tell the parameters.

        information : (names, names), of which the lower triangle counts.
        """
        whole = information + np.tril(information, -1).T
        total = self.through.T @ whole @ self.through + self.known
        free: Indices = np.arange(total.shape[0])
        scale, lower = np.zeros(free.size), np.zeros(total.shape)
        if not factorise(total, free, 0.0, scale, lower):
            return None
        out = np.zeros((len(self.ratios), free.size))
        for row, name in zip(out, self.ratios, strict=True):
            solve(lower, scale, free, self.through[self.names.index(name)], row)
        return out @ self.through.T

    def covariance(self, information: Floats) -> Floats | None:
        """(ratios, ratios) covariance of the ratios; None if the bins do not tell them."""
        rows = self.rows(information)
        return None if rows is None else rows[:, [self.names.index(name) for name in self.ratios]]


def scale_columns(model: Model) -> Mapping[str, tuple[tuple[str, float], ...]]:
    """Component -> (parameter, factor): what its contents add to the derivatives in the scale parameters."""
    held = {parameter.name for parameter in model.parameters if parameter.fixed is not None}
    injected = {parameter.name: parameter.injected for parameter in model.parameters}
    return {
        component.name: tuple((name, 1.0 / injected[name]) for name in component.scales_with if name not in held)
        for component in model.templates.components
    }


def side_columns(model: Model, mirrored: Mapping[str, str]) -> Mapping[tuple[str, int], tuple[str, float]]:
    """Side of a nuisance -> (nuisance, factor): what the change of the contents adds to the derivative in it.

    mirrored : nuisance -> the side that is kept, "plus" or "minus", and the other its mirror image.
    """
    return dict(_sides(model, mirrored))


def _sides(model: Model, mirrored: Mapping[str, str]) -> Iterator[tuple[tuple[str, int], tuple[str, float]]]:
    for parameter in model.parameters:
        if parameter.kind != "nuisance" or parameter.fixed is not None:
            continue
        for side, sign in SIDES.items():
            kept = mirrored.get(parameter.name)
            if kept in (None, side):
                yield (parameter.name, sign), (parameter.name, sign * (0.5 if kept is None else 1.0))


@kernel
def add_information(contents: Floats, template_statistics: bool, out: Floats) -> None:
    """Add J Jᵀ/(μ + V) of every bin to the lower triangle of `out`."""
    size = out.shape[0]
    for b in range(contents.shape[0]):
        if contents[b, GENERATED] < 0.5:  # of what is exactly zero, differences of sums leave roundings
            continue
        variance = contents[b, EXPECTED] + (contents[b, VARIANCE] if template_statistics else 0.0)
        weight = 1.0 / variance
        for p in range(size):
            scaled = weight * contents[b, FIRST + p]
            for q in range(p + 1):
                out[p, q] += scaled * contents[b, FIRST + q]


@kernel
def add_cross_information(batches: Floats, whole: Floats, template_statistics: bool, out: Floats) -> None:
    """Add the information of every bin to the lower triangle of `out`, with J Jᵀ replaced by its mean over products of
    different batches: what fluctuations of the templates put into a square is not in it.

    batches (batches, bins, columns) : each scaled to stand for all events. whole (bins, columns) : their mean.
    """
    number = batches.shape[0]
    size = out.shape[0]
    for b in range(whole.shape[0]):
        if whole[b, GENERATED] < 0.5:
            continue
        variance = whole[b, EXPECTED] + (whole[b, VARIANCE] if template_statistics else 0.0)
        weight = 1.0 / (variance * (number - 1))
        for p in range(size):
            scaled = weight * number * whole[b, FIRST + p]
            for q in range(p + 1):
                out[p, q] += scaled * whole[b, FIRST + q]
            for k in range(number):
                own = weight / number * batches[k, b, FIRST + p]
                for q in range(p + 1):
                    out[p, q] -= own * batches[k, b, FIRST + q]
