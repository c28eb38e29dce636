"""What a fit returns: values, errors, correlations, goodness of fit, and why to believe it or not."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import TYPE_CHECKING

import numpy as np
from scipy.stats import chi2
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats

from .algebra import SINGULAR
from .ending import Ending, reasons

if TYPE_CHECKING:
    from ..likelihood.layout import Indices
    from .data import Data
    from .model import Model

SHOWN = 0.05
"""Part of the largest coefficient below which a parameter is left out when a flat direction is named."""


@dataclass(frozen=True)
class Goodness:
    """Likelihood-ratio statistic against the saturated model (Baker and Cousins, NIM 221 (1984) 437).

    statistic : 2 ln(L_saturated / L_fit), constraints and template-statistics terms included.
    degrees_of_freedom : bins that expect something, minus free parameters without constraint; a constrained parameter
        brings one measurement and takes one, and so does the factor of each bin.
    p_value : chance of a larger χ² with these degrees of freedom, None if there are none. The statistic follows χ² when
        most bins expect more than a few events; with fewer, use the toys' share of larger statistics.
    """

    statistic: float
    degrees_of_freedom: int
    p_value: float | None


@dataclass(frozen=True)
class Certificate:
    """Why the minimum is one.

    distance : estimated distance to the minimum in -ln L, g H⁻¹ g/2; NaN if the Hessian is singular.
    gradient_norm : length of the gradient in units of the errors, √(2 distance).
    eigenvalues : of the exact Hessian scaled to unit diagonal, increasing; all positive at a minimum.
    steps, evaluations : Newton steps, and evaluations of the likelihood with derivatives.
    flat_directions : combinations of parameters along which the likelihood does not change, name -> coefficient.
    at_bounds : parameters that -ln L presses against a bound; their errors are those of the curvature there, and an
        interval of theirs wants the likelihood curve or toys.
    protected_bins : bins whose expectation is held above zero by the protection of interpolation.py; normally 0.
    """

    distance: float
    gradient_norm: float
    eigenvalues: tuple[float, ...]
    steps: int
    evaluations: int
    flat_directions: tuple[Mapping[str, float], ...]
    protected_bins: int
    at_bounds: tuple[str, ...] = ()


@dataclass(frozen=True, eq=False)
class FitResult:
    """The fitted parameters.

    names : all parameters, in the order of the model; `ratios` names those of interest.
    values, errors : (parameters,) float64; errors are one standard deviation from the Hessian, 0 for fixed parameters
        and NaN where there is none. Ratios are the ratios themselves, yields relative to the expectation, nuisances in
        standard deviations.
    covariance : (parameters, parameters), inverse of the exact Hessian of -ln L; zero for fixed parameters.
    valid, reasons : whether to use it, and if not why not and what to do.
    minus_log_likelihood : -ln L at the minimum, counted from the saturated model.
    """

    names: tuple[str, ...]
    ratios: tuple[str, ...]
    values: Floats
    errors: Floats
    covariance: Floats
    valid: bool
    reasons: tuple[Problem, ...]
    minus_log_likelihood: float
    goodness: Goodness
    certificate: Certificate

    def value(self, name: str) -> float:
        return float(self.values[self._index(name)])

    def error(self, name: str) -> float:
        return float(self.errors[self._index(name)])

    def correlation(self, first: str, second: str) -> float:
        return float(self.correlations[self._index(first), self._index(second)])

    @property
    def correlations(self) -> Floats:
        """(parameters, parameters) correlation coefficients; 0 with a fixed parameter, and 1 on the diagonal."""
        scale = np.where(self.errors > 0, self.errors, 1.0)
        matrix: Floats = self.covariance / np.outer(scale, scale)
        np.fill_diagonal(matrix, 1.0)
        return matrix

    def _index(self, name: str) -> int:
        if name not in self.names:
            raise InputError(Problem("there is no such parameter", got=repr(name), wanted=", ".join(self.names)))
        return self.names.index(name)


def assemble(model: Model, data: Data, free: Indices, x: Floats, ending: Ending, hessian: Floats) -> FitResult:
    """The result of a minimisation that ended at x with the exact Hessian `hessian` (parameters, parameters)."""
    eigenvalues, flat = _spectrum(model, hessian, free)
    size = len(model.names)
    covariance, errors = np.zeros((size, size)), np.zeros(size)
    known, following = model.layout.arrays.constraints, model.layout.arrays.functions.parameter
    positive = bool(eigenvalues.size) and bool(eigenvalues[0] > SINGULAR)
    if positive:
        covariance[np.ix_(free, free)] = _inverse(hessian[np.ix_(free, free)])
        through = model.jacobian(x)
        covariance = through @ covariance @ through.T if following.size else covariance
        errors = np.sqrt(np.diag(covariance))
    else:
        covariance[np.ix_(free, free)] = np.nan
        errors[free] = errors[following] = np.nan
    distance = ending.distance if positive else float("nan")
    certificate = Certificate(
        distance=distance,
        gradient_norm=float(np.sqrt(2.0 * distance)),
        eigenvalues=tuple(eigenvalues.tolist()),
        steps=ending.steps,
        evaluations=ending.evaluations,
        flat_directions=flat,
        protected_bins=model.protected_bins(x),
        at_bounds=tuple(model.names[i] for i in free if x[i] in (known.lower[i], known.upper[i])),
    )
    why = reasons(ending, flat)
    for array in (x, errors, covariance):
        array.flags.writeable = False
    return FitResult(
        names=model.names,
        ratios=model.ratios,
        values=x,
        errors=errors,
        covariance=covariance,
        valid=not why,
        reasons=why,
        minus_log_likelihood=ending.value,
        goodness=_goodness(model, free, ending.value),
        certificate=certificate,
    )


def _goodness(model: Model, free: Indices, value: float) -> Goodness:
    bins = int((model.layout.bin_lane >= 0).sum())
    unconstrained = sum(model.parameters[i].constraint is None for i in free)
    # A constrained parameter that is held keeps its measurement and takes nothing.
    held = sum(p.constraint is not None for i, p in enumerate(model.parameters) if i not in set(free.tolist()))
    degrees = bins - unconstrained + held
    statistic = 2.0 * value
    p_value = float(chi2.sf(statistic, degrees)) if degrees > 0 else None
    return Goodness(statistic, degrees, p_value)


def _inverse(matrix: Floats) -> Floats:
    """Inverse of a positive definite matrix, scaled to unit diagonal on the way and exactly symmetric."""
    scale = 1.0 / np.sqrt(np.diag(matrix))
    inverse = np.linalg.inv(matrix * np.outer(scale, scale)) * np.outer(scale, scale)
    return 0.5 * (inverse + inverse.T)


def _spectrum(model: Model, hessian: Floats, free: Indices) -> tuple[Floats, tuple[Mapping[str, float], ...]]:
    matrix = hessian[np.ix_(free, free)]
    if not np.isfinite(matrix).all():
        return np.zeros(0), ()
    diagonal = np.diag(matrix)
    scale = np.where(diagonal > 0, 1.0 / np.sqrt(np.where(diagonal > 0, diagonal, 1.0)), 1.0)
    eigenvalues, vectors = np.linalg.eigh(matrix * np.outer(scale, scale))
    flat = []
    for vector in vectors.T[np.abs(eigenvalues) <= SINGULAR]:
        direction = vector * scale
        direction /= direction[np.argmax(np.abs(direction))]
        named = {model.names[free[i]]: float(c) for i, c in enumerate(direction) if abs(c) > SHOWN}
        flat.append(MappingProxyType(named))
    return eigenvalues, tuple(flat)
