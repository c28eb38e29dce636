"""What is known of parameters before the fit: auxiliary measurements, alone or together, and ranges.

| given | adds to -ln L |
| --- | --- |
| Gaussian(σ) | (x - x₀)²/2σ² |
| LogNormal(σ) | (ln(x/x₀))²/2σ², so x stays positive; σ is the relative error for small ones |
| Uniform(low, high) | nothing; x stays inside |
| Correlated(names, covariance) | (x - x₀)ᵀ C⁻¹ (x - x₀)/2 |

x₀ is the auxiliary measurement: the injected value in data, fluctuating in toys.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import isfinite
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from semitau.core.compiled import kernel
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats

Wholes = NDArray[np.int64]

NO_LAW, GAUSSIAN, LOG_NORMAL, BLOCK = 0, 1, 2, 3


@dataclass(frozen=True)
class Gaussian:
    """sigma : standard deviation of the auxiliary measurement, in the parameter's unit."""

    sigma: float


@dataclass(frozen=True)
class LogNormal:
    """sigma : standard deviation of the logarithm of the auxiliary measurement. For ratios and yields."""

    sigma: float


@dataclass(frozen=True)
class Uniform:
    """The parameter lies between low and high, and that is all that is known."""

    low: float
    high: float


Constraint = Gaussian | LogNormal | Uniform


@dataclass(frozen=True, eq=False)
class Correlated:
    """Parameters measured together. covariance : (names, names), symmetric and positive definite."""

    names: tuple[str, ...]
    covariance: Floats

    def __init__(self, names: Sequence[str], covariance: ArrayLike) -> None:
        matrix = np.array(covariance, dtype=np.float64)
        matrix.flags.writeable = False
        object.__setattr__(self, "names", tuple(names))
        object.__setattr__(self, "covariance", matrix)
        problems = tuple(self._problems())
        if problems:
            raise InputError(*problems)

    @property
    def where(self) -> str:
        return "correlated constraint of " + ", ".join(self.names)

    def _problems(self) -> Iterator[Problem]:
        size, matrix = len(self.names), self.covariance
        if size < 2 or len(set(self.names)) != size:
            yield Problem("two or more different parameters are needed", self.where)
        elif matrix.shape != (size, size):
            yield Problem("the covariance has the wrong shape", self.where, str(matrix.shape), str((size, size)))
        elif not np.isfinite(matrix).all():
            yield Problem("the covariance is not finite", self.where)
        elif not np.allclose(matrix, matrix.T, rtol=1e-9, atol=0.0):
            yield Problem("the covariance is not symmetric", self.where)
        elif not (np.diag(matrix) > 0).all() or np.linalg.eigvalsh(_to_correlation(matrix))[0] <= 1e-10:
            yield Problem(
                "the covariance is not positive definite",
                self.where,
                remedy="Check signs and correlations; tie parameters that are fully correlated by a function instead.",
            )


class Constraints(NamedTuple):
    """What the compiled functions read."""

    law: Wholes  # (parameters,)
    inverse_variance: Floats  # (parameters,): 1/σ², of the logarithm for log-normal ones; 0 without
    precision: Floats  # (parameters, parameters): C⁻¹ of the blocks, 0 elsewhere
    factor: Floats  # (parameters, parameters): Cholesky factor of the blocks' covariance, 0 elsewhere
    lower: Floats  # (parameters,)
    upper: Floats


def arrays_of(
    indices: Mapping[str, int],
    single: Mapping[str, Constraint],
    blocks: Sequence[Correlated],
    bounds: Mapping[str, tuple[float, float]],
) -> Constraints:
    """Everything known of the parameters, checked before (see Model), as arrays."""
    size = len(indices)
    out = Constraints(
        np.zeros(size, np.int64), np.zeros(size), np.zeros((size, size)), np.zeros((size, size)),
        np.full(size, -np.inf), np.full(size, np.inf),
    )  # fmt: skip
    for name, constraint in single.items():
        k = indices[name]
        if isinstance(constraint, Uniform):
            out.lower[k], out.upper[k] = constraint.low, constraint.high
        else:
            out.law[k] = GAUSSIAN if isinstance(constraint, Gaussian) else LOG_NORMAL
            out.inverse_variance[k] = constraint.sigma**-2
    for name, (low, high) in bounds.items():
        k = indices[name]
        out.lower[k], out.upper[k] = max(out.lower[k], low), min(out.upper[k], high)
    for block in blocks:
        order = sorted(range(len(block.names)), key=lambda i: indices[block.names[i]])
        place = np.array([indices[block.names[i]] for i in order])
        covariance = block.covariance[np.ix_(order, order)]
        out.law[place] = BLOCK
        out.precision[np.ix_(place, place)] = np.linalg.inv(covariance)
        out.inverse_variance[place] = np.diag(out.precision)[place]
        out.factor[np.ix_(place, place)] = np.linalg.cholesky(covariance)
    return out


def problems_of(name: str, kind: str, constraint: object) -> Iterator[Problem]:
    """What is wrong with one parameter's constraint."""
    where = f"constraint of {name}"
    if isinstance(constraint, Gaussian | LogNormal):
        if not (isfinite(constraint.sigma) and constraint.sigma > 0):
            yield Problem("a standard deviation must be positive and finite", where, got=repr(constraint.sigma))
        if isinstance(constraint, LogNormal) and kind == "nuisance":
            yield Problem(
                "a nuisance is centred at zero, where a log-normal law has nothing to scale",
                where,
                remedy="Use a log-normal constraint for yields and ratios.",
            )
    elif isinstance(constraint, Uniform):
        yield from range_problems(where, constraint.low, constraint.high)
    else:
        yield Problem("not a constraint", where, got=repr(constraint), wanted="Gaussian, LogNormal or Uniform")


def range_problems(where: str, low: float, high: float) -> Iterator[Problem]:
    if not low < high:
        yield Problem("the lower end must be below the upper one", where, got=f"{low:g} to {high:g}")


@kernel
def add_constraints(
    c: Constraints, x: Floats, centres: Floats, with_derivatives: bool, exact: bool, gradient: Floats, hessian: Floats
) -> float:
    """The constraints' part of -ln L (infinite outside their domain); sets gradient and Hessian to theirs."""
    value = 0.0
    size = x.shape[0]
    for p in range(size):
        if with_derivatives:
            gradient[p] = 0.0
            hessian[p, :] = 0.0
        weight = c.inverse_variance[p]
        if c.law[p] == GAUSSIAN:
            pull = x[p] - centres[p]
            value += 0.5 * pull * pull * weight
            if with_derivatives:
                gradient[p] = pull * weight
                hessian[p, p] = weight
        elif c.law[p] == LOG_NORMAL:
            if not x[p] > 0.0:
                return np.inf
            pull = np.log(x[p] / centres[p])
            value += 0.5 * pull * pull * weight
            if with_derivatives:
                gradient[p] = pull * weight / x[p]
                hessian[p, p] = ((1.0 - pull) if exact else 1.0) * weight / (x[p] * x[p])
        elif c.law[p] == BLOCK:
            total = 0.0
            for q in range(size):
                total += c.precision[p, q] * (x[q] - centres[q])
                if with_derivatives:
                    hessian[p, q] = c.precision[p, q]
            value += 0.5 * (x[p] - centres[p]) * total
            if with_derivatives:
                gradient[p] = total
    return value


def _to_correlation(matrix: Floats) -> Floats:
    scale = 1.0 / np.sqrt(np.diag(matrix))
    out: Floats = matrix * np.outer(scale, scale)
    return out
