"""The errors that a study expects, as a measurement that could be made with it."""

from __future__ import annotations

from pathlib import Path

from semitau.core.errors import InputError, Problem
from semitau.fit.averages.measurements import Measured, Measurement

from ..results import RatioResult, Results, read_results
from .tables import RATIOS


def planned_errors(path: Path) -> Measurement:
    """Errors and correlation of the ratios in results.json, with values of 0: no fitted value is looked at.

    The statistical error includes that of the finite templates. Where pseudo-data were fitted, whose error fluctuates,
    errors are scaled to the mean error of the toys. The correlation is one for both kinds of error, chosen such that
    the correlation of the total errors is that of the fit.

    Raises
    ------
    InputError : no results of a study, a fit that failed, no ratio that can be averaged.
    """
    results = read_results(path)
    ratios = {ratio.name: ratio for ratio in results.ratios if ratio.name in RATIOS}
    remedy = "Take the results of another study, or write the errors into the file."
    if not results.fit.valid:
        raise InputError(Problem("the fit of this study failed", str(path), remedy=remedy))
    if not ratios:
        raise InputError(Problem("no ratio of this study can be averaged", str(path), remedy=remedy))
    found = {name: _errors(ratio, _scale(results, ratio)) for name, ratio in ratios.items()}
    correlation = 0.0
    if len(found) == 2:
        (s1, y1), (s2, y2) = found.values()
        whole = ((s1**2 + y1**2) * (s2**2 + y2**2)) ** 0.5
        correlation = _correlation(results) * whole / (s1 * s2 + y1 * y2)
        correlation = max(-0.999, min(0.999, correlation))
    measured = {name: Measured(0.0, statistical, systematic) for name, (statistical, systematic) in found.items()}
    return Measurement(results.study.name, measured, correlation, correlation)


def _errors(ratio: RatioResult, scale: float) -> tuple[float, float]:
    """Statistical and systematic; all is statistical if the study did not split it."""
    if ratio.systematic is None:
        return scale * ratio.error, 0.0
    systematic = min(ratio.systematic, ratio.error)
    return scale * (ratio.error**2 - systematic**2) ** 0.5, scale * systematic


def _scale(results: Results, ratio: RatioResult) -> float:
    toys = results.toys
    if results.data.kind == "expected" or toys is None:
        return 1.0
    mean = next((found.mean_error for found in toys.ratios if found.ratio == ratio.name), ratio.error)
    return mean / ratio.error if mean > 0.0 else 1.0


def _correlation(results: Results) -> float:
    names = [parameter.name for parameter in results.fit.parameters]
    if not results.fit.correlation:
        return 0.0
    first, second = (names.index(ratio) for ratio in RATIOS)
    return results.fit.correlation[first][second]
