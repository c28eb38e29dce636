"""Errors that cover when the templates are statistically poor.

Noise of the templates makes components that look alike look different: the fit takes the noise for information, its
errors come out too small and its values too near to what the templates were made with or to zero. One factor per bin
does not see this, for it moves all components of a bin together, and even one factor per bin and component leaves
errors that are too small when many bins with little information each add up (arXiv:2401.10542).

This is regression on variables with errors, and corrected scores are its remedy (W. A. Fuller, Measurement Error
Models, Wiley 1987; T. Nakamura, Biometrika 77 (1990) 127; both from memory). Let every component k have in every bin a
factor 1 + η with the relative variance v_k = variance/nominal² of its template, c_k its expectation, ∂c_k its
derivatives in the parameters, μ = Σ c_k, v the fit's relative variance of the bin, a = μv and W = 1/(μ + μ²v) the
weight of the bin. To second order in the noise (of templates and counts; expanded here, checked by simulation)

    expected score      b = Σ_bins u,    u = W Σ_k v_k c_k ∂c_k - κ ∂μ        (zero for exact templates)
                        κ = v + a [v (1 - a) + s]/(1 + a)²,    s = Σ_k v_k² c_k³/(vμ³) - 2v
    false information   B = Σ_bins (W Σ_k v_k ∂c_k ∂c_kᵀ - κ/μ ∂μ ∂μᵀ)
    variance of score   M = H + Σ_bins u uᵀ

with H the Hessian of the fit. The terms in κ are what the factor per bin does; s is the covariance of a template's
error with its estimated variance, which grows with its content. The corrected estimate x solves H (x - x̂) = b(x), its
covariance is (H - B)⁻¹ M (H - B)⁻¹ there. With exact templates this is the fit itself with its inverse Hessian.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.templates import Floats

from ..fitting.model import Model
from ..fitting.result import FitResult
from ..likelihood.layout import Indices

STEP = 1e-4
"""Of the numerical derivative, in errors of the parameter: expectations are smooth, and nearly linear."""

ROUNDS, SETTLED = 20, 1e-4
"""Rounds of the iteration at most, and the largest step, in errors, at which it is done; two or three are usual."""

LEAST = 0.1
"""Smallest part of the information along any direction that must not be noise: below, the expansion means nothing."""


@dataclass(frozen=True, eq=False)
class Corrected:
    """Values and errors of a fit with the templates' own noise taken out of the information.

    names, values, errors, covariance : as in FitResult. shift : (parameters,) values minus those of the fit.
    noise : largest part of the information along any direction that is noise of the templates; 0 for exact ones.
    """

    names: tuple[str, ...]
    values: Floats
    errors: Floats
    covariance: Floats
    shift: Floats
    noise: float

    def value(self, name: str) -> float:
        return float(self.values[self._index(name)])

    def error(self, name: str) -> float:
        return float(self.errors[self._index(name)])

    def _index(self, name: str) -> int:
        if name not in self.names:
            raise InputError(Problem("there is no such parameter", got=repr(name), wanted=", ".join(self.names)))
        return self.names.index(name)


def correct_for_templates(model: Model, result: FitResult) -> Corrected:
    """Corrected values and errors of a fit with one template-statistics factor per bin.

    Raises InputError for a model that takes its templates as exact; RunError for a fit that is not valid, and when more
    than nine tenths of the information along some direction is noise: no analysis of these templates can help.
    """
    if not model.template_statistics:
        raise InputError(
            Problem("templates that are taken as exact need no correction", "model", remedy="Count their statistics.")
        )
    if model.likelihood != "light":
        raise InputError(
            Problem("only fits with one factor per bin can be corrected", "likelihood", model.likelihood, "light")
        )
    if not result.valid:
        raise RunError(*result.reasons)
    free = np.array([i for i in model.free if result.errors[i] > 0], dtype=np.int64)
    hessian = np.linalg.inv(_square(result.covariance, free))
    hessian = 0.5 * (hessian + hessian.T)
    moved, x = np.zeros(free.size), result.values.copy()
    for _ in range(ROUNDS):
        noise = _Noise(model, result, free, x)
        sharp = hessian - noise.information
        step = np.linalg.solve(sharp, noise.score - hessian @ moved)
        moved += step
        x[free] = result.values[free] + moved
        if np.all(np.abs(step) < SETTLED * result.errors[free]) or not np.isfinite(moved).all():
            break
    scale = 1.0 / np.sqrt(np.diag(hessian))
    # Part of the information along each direction that is not noise: eigenvalues relative to those of the Hessian.
    root = np.linalg.cholesky(hessian * np.outer(scale, scale))
    whitened = np.linalg.solve(root, np.linalg.solve(root, sharp * np.outer(scale, scale)).T)
    parts, vectors = np.linalg.eigh(0.5 * (whitened + whitened.T))
    if parts[0] < LEAST:
        direction = np.linalg.solve(root.T, vectors[:, 0]) * scale
        direction /= direction[np.argmax(np.abs(direction))]
        named = {model.names[free[i]]: c for i, c in enumerate(direction.tolist()) if abs(c) > 0.05}
        raise RunError(
            Problem(
                "the templates are too poor to tell these parameters apart",
                where=", ".join(named),
                got=f"{1 - max(0.0, parts[0]):.0%} noise along " + " ".join(f"{c:+.2g} {n}" for n, c in named.items()),
                wanted=f"up to {1 - LEAST:.0%}",
                remedy="Generate more events, merge bins, or fix or constrain one of them.",
            )
        )
    inverse = np.linalg.inv(sharp)
    spread = inverse @ (hessian + noise.spread) @ inverse
    size = len(model.names)
    covariance, errors, shift = np.zeros((size, size)), np.zeros(size), np.zeros(size)
    covariance[np.ix_(free, free)] = 0.5 * (spread + spread.T)
    errors[free] = np.sqrt(np.diag(spread))
    shift[free] = moved
    return Corrected(
        result.names, model.values(result.values + shift), errors, covariance, shift, float(1.0 - parts[0])
    )


class _Noise:
    """Expected score, false information and extra variance of the score, for the free parameters."""

    def __init__(self, model: Model, result: FitResult, free: Indices, x: Floats) -> None:
        size = free.size
        self.score, self.information, self.spread = np.zeros(size), np.zeros((size, size)), np.zeros((size, size))
        here, fitted = model.contributions(x), model.template_errors()
        slopes = [_slope(model, x, int(index), STEP * float(result.errors[index])) for index in free]
        for category in model.templates.categories:
            there = [key for key in here if key[0] == category.name]
            if not there:
                continue
            contents = np.array([here[key].ravel() for key in there])
            jacobian = np.array([[slope[key].ravel() for slope in slopes] for key in there])
            relative = np.array([_relative_variance(model, key) for key in there])
            mu = contents.sum(axis=0)
            active = mu > 0
            safe = np.where(active, mu, 1.0)
            v = fitted[category.name].ravel() ** 2
            weight = np.where(active, 1.0 / (safe + safe**2 * v), 0.0)
            whole = jacobian.sum(axis=0)
            a = safe * v
            third = (relative**2 * contents**3).sum(axis=0) / np.where(v > 0, v * safe**3, 1.0)
            drag = np.where(active, v + a * (v * (1.0 - a) + third - 2.0 * v) / (1.0 + a) ** 2, 0.0)
            lever = weight * np.einsum("kb,kb,kpb->pb", relative, contents, jacobian) - drag * whole
            self.score += lever.sum(axis=1)
            self.information += np.einsum("b,kb,kpb,kqb->pq", weight, relative, jacobian, jacobian, optimize=True)
            self.information -= (whole * (drag / safe)) @ whole.T
            self.spread += lever @ lever.T


def _slope(model: Model, x: Floats, index: int, step: float) -> dict[tuple[str, str], Floats]:
    up, down = x.copy(), x.copy()
    up[index] += step
    down[index] -= step
    above, below = model.contributions(up), model.contributions(down)
    return {key: (above[key] - below[key]) / (2.0 * step) for key in above}


def _relative_variance(model: Model, key: tuple[str, str]) -> Floats:
    template = model.templates.templates[key]
    nominal, variance = template.nominal.ravel(), template.variance.ravel()
    filled = nominal != 0
    relative: Floats = np.where(filled, variance / np.where(filled, nominal, 1.0) ** 2, 0.0)
    return relative


def _square(matrix: Floats, free: Indices) -> Floats:
    part: Floats = matrix[np.ix_(free, free)]
    return part
