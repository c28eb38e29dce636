"""The average of measurements: best linear unbiased estimate, or the likelihood with asymmetric errors."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from scipy import optimize, stats
from semitau.core.errors import Problem, RunError

from .input_vector import Floats, Inputs, inputs
from .measurements import Measurement

Form = Literal["linear", "likelihood"]


@dataclass(frozen=True)
class Average:
    """An average of ratios.

    values, up, down : (ratios,), errors as positive numbers; equal sides for the linear form.
    covariance, statistical, systematic : (ratios, ratios); the first is the sum of the others. For the likelihood form
        they are those of a linear average with the widths that the averaged values see, stretched such that the
        symmetric errors are the mean of `up` and `down`.
    weights : (ratios, inputs); each row adds up to 1 over the inputs of its own ratio and to 0 over the others. One
        may be negative where a correlation is strong.
    pulls : (inputs,) residual over its own error, sqrt(C_ii - V_ii); NaN where an input alone makes the average.
    chi2, degrees_of_freedom, p_value : of all inputs with the average; p_value None without freedom.
    """

    inputs: Inputs
    form: Form
    values: Floats
    up: Floats
    down: Floats
    covariance: Floats
    statistical: Floats
    systematic: Floats
    weights: Floats
    pulls: Floats
    chi2: float
    degrees_of_freedom: int
    p_value: float | None

    @property
    def ratios(self) -> tuple[str, ...]:
        """The averaged ratios, in the order of all arrays."""
        return self.inputs.ratios

    @property
    def errors(self) -> Floats:
        """(ratios,) symmetric errors."""
        return np.asarray(np.sqrt(np.diag(self.covariance)))

    @property
    def correlation(self) -> Floats:
        """(ratios, ratios)."""
        return np.asarray(self.covariance / np.outer(self.errors, self.errors))

    def value(self, ratio: str) -> float:
        """Averaged value of a ratio."""
        return float(self.values[self.ratios.index(ratio)])

    def error(self, ratio: str) -> float:
        """Symmetric error of a ratio."""
        return float(self.errors[self.ratios.index(ratio)])

    def source_errors(self, source: str) -> Floats:
        """(ratios,) what a common source contributes to the systematic errors."""
        part = self.weights @ self.inputs.source_covariance(source) @ self.weights.T
        return np.asarray(np.sqrt(np.maximum(np.diag(part), 0.0)))

    def joined_by(self, measurement: Measurement, at: Mapping[str, float]) -> Average:
        """The average with one more measurement, in the same form.

        measurement : its errors, correlations and sources. at : ratio -> the value that it is taken to find.
        """
        more = (*self.inputs.measurements, measurement.moved_to(at))
        return average(more, self.inputs.common, self.form)


def average(
    measurements: Sequence[Measurement], common: Mapping[str, float] | None = None, form: Form = "linear"
) -> Average:
    """Average of all measurements at once, with every correlation.

    common : source -> its correlation between different measurements, see `input_vector.inputs`.
    form : "linear": the best linear unbiased estimate with symmetrised errors (A. C. Aitken, Proc. Roy. Soc. Edinburgh
        55 (1935) 42; for correlated measurements of several quantities A. Valassi, NIM A 500 (2003) 391).
        "likelihood": minimum of a chi^2 whose errors depend on the true value (`input_vector.Inputs.widths`), errors
        where it has grown by one with the other ratio fitted again.

    Raises
    ------
    InputError : a measurement that cannot be averaged; correlations that cannot be (the pair is named).
    RunError : the likelihood has no minimum or does not rise by one.
    """
    given = inputs(measurements, common)
    start = _linear(given, given.covariances())
    return start if form == "linear" else _likelihood(given, start)


def chi2_at(given: Inputs, values: Floats) -> float:
    """Chi^2 of the inputs for true values (ratios,), with the widths that these values see."""
    shifts = given.design @ values - given.values
    return float(shifts @ np.linalg.solve(given.covariances(shifts).sum(axis=0), shifts))


def _linear(given: Inputs, covariances: Floats) -> Average:
    design, total = given.design, covariances.sum(axis=0)
    solved = np.linalg.solve(total, design)
    covariance = np.linalg.inv(design.T @ solved)
    covariance = 0.5 * (covariance + covariance.T)
    weights = covariance @ solved.T
    values = weights @ given.values
    residuals = given.values - design @ values
    chi2 = float(residuals @ np.linalg.solve(total, residuals))
    freedom = len(given.values) - len(values)
    errors = np.sqrt(np.diag(covariance))
    statistical, systematic = weights @ covariances @ weights.T
    return Average(
        given, "linear", values, errors, errors, covariance, statistical, systematic, weights,
        _pulls(residuals, total, design @ covariance @ design.T), chi2, freedom, _p_value(chi2, freedom),
    )  # fmt: skip


def _pulls(residuals: Floats, total: Floats, explained: Floats) -> Floats:
    whole, left = np.diag(total), np.diag(total - explained)
    some = left > 1e-9 * whole
    return np.where(some, residuals / np.sqrt(np.where(some, left, 1.0)), np.nan)


def _p_value(chi2: float, freedom: int) -> float | None:
    return float(stats.chi2.sf(chi2, freedom)) if freedom > 0 else None


def _likelihood(given: Inputs, start: Average) -> Average:
    scale = start.errors

    def height(point: Floats) -> float:
        return chi2_at(given, start.values + scale * point)

    best, lowest = lowest_point(height, np.zeros(len(scale)))
    up, down = (
        np.array([_crossing(height, best, lowest, k, side) for k in range(len(scale))]) * scale for side in (1.0, -1.0)
    )
    values = start.values + scale * best
    shifts = given.design @ values - given.values
    covariances = given.covariances(shifts)
    here = _linear(given, covariances)
    # Correlations and kinds from the widths at the best point, the size from the curve itself.
    stretch = 0.5 * (up + down) / here.errors
    stretch = np.outer(stretch, stretch)
    return replace(
        here, form="likelihood", values=values, up=up, down=down, chi2=lowest,
        covariance=here.covariance * stretch,
        statistical=here.statistical * stretch,
        systematic=here.systematic * stretch,
        pulls=_pulls(-shifts, covariances.sum(axis=0), given.design @ here.covariance @ given.design.T),
        p_value=_p_value(lowest, here.degrees_of_freedom),
    )  # fmt: skip


def lowest_point(
    height: Callable[[Floats], float], start: Floats, *, close: float = 1e-8, flat: float = 1e-12
) -> tuple[Floats, float]:
    """Where `height` is lowest near `start`, and how low; coordinates are in units of an error.

    close, flat : precision of the place and of the height. Without derivatives, which jump where an asymmetric error
    stops narrowing.
    """
    if not len(start):
        return start, height(start)
    corners = np.vstack([start, start + 0.5 * np.eye(len(start))])
    how = {"xatol": close, "fatol": flat, "maxiter": 2000, "initial_simplex": corners}
    found = optimize.minimize(height, start, method="Nelder-Mead", options=how)
    if not found.success:
        remedy = "Check the asymmetric errors, or average with the linear form."
        raise RunError(Problem("the average did not converge", got=str(found.message), remedy=remedy))
    return np.asarray(found.x), float(found.fun)


def _crossing(height: Callable[[Floats], float], best: Floats, lowest: float, k: int, side: float) -> float:
    """How far ratio k moves until the chi^2, with the others fitted again, has grown by one."""
    others = np.arange(len(best)) != k

    def excess(distance: float) -> float:
        point = best.copy()
        point[k] += side * distance

        def rest(free: Floats) -> float:
            point[others] = free
            return height(point)

        return lowest_point(rest, best[others])[1] - lowest - 1.0

    far = 1.0
    while excess(far) < 0.0:
        far *= 1.5
        if far > 50.0:
            remedy = "Check the asymmetric errors, or average with the linear form."
            raise RunError(Problem("the chi^2 of the average does not rise by one", remedy=remedy))
    return float(optimize.brentq(excess, 0.0, far, xtol=1e-7))
