"""Densities of the laws of a study file, as logarithms, and where their tables need many intervals."""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np

from ..study_file.laws import (
    DoubleGaussian,
    EndPoint,
    Exponential,
    FormulaLaw,
    Gaussian,
    PhaseSpace,
    Polynomial,
    Power,
    Threshold,
    Uniform,
)
from .quantile_table import Floats, QuantileTable, from_density

_EVEN = np.linspace(0.0, 1.0, 2049)
_STEEP = np.linspace(0.0, 1.0, 1025) ** 4  # crowds at 0
_SIGMAS = np.linspace(-9.0, 9.0, 1441)
_LENGTHS = np.linspace(0.0, 40.0, 1601)  # e-folds

LogDensity = Callable[[Floats], Floats]


def table(law: FormulaLaw, factor: LogDensity | None = None, breaks: Sequence[float] = ()) -> QuantileTable:
    """Quantile table of a law given by a formula, times exp(factor) if there is one.

    breaks : places within the range where the factor has corners.
    ValueError if the law leaves nothing within its range.
    """
    low, high = law.range
    log_density, focus = _parts(law)
    nodes = np.unique(np.concatenate([low + (high - low) * _EVEN, focus, breaks, [low, high]]))
    nodes = nodes[(nodes >= low) & (nodes <= high)]
    contents = _exact_contents(law, nodes)
    if factor is None:
        return from_density(log_density, nodes, contents)
    if contents is not None:
        contents = contents * np.exp(factor(0.5 * (nodes[:-1] + nodes[1:])))
    return from_density(lambda x: log_density(x) + factor(x), nodes, contents)


def _exact_contents(law: FormulaLaw, nodes: Floats) -> Floats | None:
    """Interval contents of a power, whose singular origin no quadrature likes."""
    if not isinstance(law, Power):
        return None
    x = nodes - law.origin
    if law.exponent == -1.0:
        return np.diff(np.log(x))
    # relative to the largest, against overflow
    scale = x[-1] if law.exponent > -1.0 else x[0]
    power: Floats = (x / scale) ** (law.exponent + 1.0)
    return np.diff(power) / (law.exponent + 1.0)


def _quantiles(law: Power) -> Floats:
    """Nodes that crowd at the singular end, in terms of content."""
    low, high = law.range[0] - law.origin, law.range[1] - law.origin
    power = law.exponent + 1.0
    if abs(power) < 1e-3:
        return law.origin + (low * (high / low) ** _STEEP if low > 0 else high * _STEEP)
    scale = high if power > 0 else low
    first, last = (low / scale) ** power, (high / scale) ** power
    return np.asarray(law.origin + scale * (first + (last - first) * _STEEP) ** (1.0 / power))


def _parts(law: FormulaLaw) -> tuple[LogDensity, Floats]:
    """Logarithm of the density, and nodes where it changes fast."""
    low, high = law.range
    from_low, from_high = low + (high - low) * _STEEP, high - (high - low) * _STEEP
    match law:
        case Exponential():
            start, step = (low, law.scale) if law.scale > 0 else (high, law.scale)
            return lambda x: -x / law.scale, start + step * _LENGTHS
        case Gaussian():
            return lambda x: -0.5 * ((x - law.mean) / law.sigma) ** 2, _peak(law.mean, law.sigma, law.range)
        case DoubleGaussian():
            return _two_gaussians(law)
        case Power():
            return lambda x: law.exponent * np.log(x - law.origin), _quantiles(law)
        case Threshold():
            start = max(low, law.threshold)
            nodes = np.concatenate([start + (high - start) * _STEEP, start + law.scale * _LENGTHS])
            return lambda x: _log_power(x - law.threshold, law.power) - (x - law.threshold) / law.scale, nodes
        case EndPoint():
            return _end_point(law)
        case PhaseSpace():
            return (
                lambda x: _log_power(x - low, law.rise) + _log_power(high - x, law.fall),
                np.concatenate([from_low, from_high]),
            )
        case Uniform():
            return np.zeros_like, np.array([low, high])
        case Polynomial():
            falling = np.array(law.coefficients[::-1])
            return lambda x: _log(np.polyval(falling, x)), np.concatenate([from_low, from_high])


def _peak(mean: float, sigma: float, limits: tuple[float, float]) -> Floats:
    """Nodes about a peak, or about the edge of the range nearest to a peak that lies outside."""
    low, high = limits
    if low <= mean <= high:
        return mean + sigma * _SIGMAS
    edge = low if mean < low else high
    length = sigma**2 / abs(edge - mean)  # the tail falls by e within this length
    return edge + float(np.sign(edge - mean)) * min(length, sigma) * _LENGTHS


def _two_gaussians(law: DoubleGaussian) -> tuple[LogDensity, Floats]:
    wide_mean = law.mean if law.wide_mean is None else law.wide_mean

    def log_density(x: Floats) -> Floats:
        with np.errstate(divide="ignore"):
            core = np.log((1.0 - law.wide_fraction) / law.sigma) - 0.5 * ((x - law.mean) / law.sigma) ** 2
            wide = np.log(law.wide_fraction / law.wide_sigma) - 0.5 * ((x - wide_mean) / law.wide_sigma) ** 2
        both: Floats = np.logaddexp(core, wide)
        return both

    peaks = [_peak(law.mean, law.sigma, law.range), _peak(wide_mean, law.wide_sigma, law.range)]
    return log_density, np.concatenate(peaks)


def _end_point(law: EndPoint) -> tuple[LogDensity, Floats]:
    low, high = max(law.range[0], 0.0), min(law.range[1], law.end)

    def log_density(x: Floats) -> Floats:
        rest = 1.0 - (x / law.end) ** 2
        inside = (x > 0.0) & (rest > 0.0)
        value = _log(x) + _log_power(rest, law.power) - law.curvature * rest
        return np.where(inside, value, -np.inf)

    return log_density, np.concatenate([low + (high - low) * _STEEP, high - (high - low) * _STEEP])


def _log(x: Floats) -> Floats:
    """Logarithm; -inf for what is not positive."""
    return np.log(x, out=np.full_like(x, -np.inf), where=x > 0.0)


def _log_power(x: Floats, power: float) -> Floats:
    """Logarithm of x^power above 0, of 0 below: x^0 is a step."""
    return np.where(x > 0.0, power * _log(np.abs(x)) if power else 0.0, -np.inf)
