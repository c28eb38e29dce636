"""What a fit makes of a world that its model does not describe: the shift of each ratio, and how exactly it is known.

The expected set of one model is fitted with another. Data without fluctuations give the shift of the typical fit, and
2 ln(L_saturated/L) is then the growth of the goodness-of-fit statistic: that of data with fluctuations follows the
noncentral χ² with this noncentrality (A. Wald, Trans. Am. Math. Soc. 54 (1943) 426).

Templates of both models come from finite numbers of generated events, which move the shift. To first order a
fluctuation e of (what is expected - what the fit expects) moves it as the same e in the data would, so fits to data
with such fluctuations added tell the error. Events that both models share cancel in e.
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

import numpy as np
from scipy.stats import chi2, ncx2
from semitau.core.templates import Floats

from ..fitting.data import Data
from ..fitting.model import Model
from ..fitting.newton import maximise
from ..fitting.result import FitResult
from ..toys.toys import Expectation


@dataclass(frozen=True, eq=False)
class ForeignFit:
    """A model fitted to what another expects.

    shifts : ratio -> fitted minus true value; errors : ratio -> error of the fit. Empty if it is not valid.
    outside : expected events in bins where the model expects none; they are left out.
    p_value : chance that the right model is further from its data than this one in the median data set; one half for
        the right model, None without degrees of freedom.
    """

    result: FitResult
    shifts: Mapping[str, float]
    errors: Mapping[str, float]
    outside: float
    p_value: float | None


def foreign_fit(model: Model, expectation: Expectation) -> ForeignFit:
    """Fit a model to what another expects, its own auxiliary measurements at their injected values.

    A fit that finds no minimum does not raise; its result tells why. Raises InputError for other bins.
    """
    counts, outside = expectation.seen_by(model)
    result = maximise(model, _data(model, counts))
    free = [name for name in model.ratios if name in expectation.true and result.error(name) > 0]
    shifts = {name: result.value(name) - expectation.true[name] for name in free}
    errors = {name: result.error(name) for name in free}
    degrees, deviance = result.goodness.degrees_of_freedom, max(0.0, result.goodness.statistic)
    return ForeignFit(
        result=result,
        shifts=MappingProxyType(shifts if result.valid else {}),
        errors=MappingProxyType(errors if result.valid else {}),
        outside=outside,
        p_value=median_p_value(deviance, degrees) if degrees > 0 else None,
    )


def median_p_value(deviance: float, degrees: int) -> float:
    """Chance that χ² exceeds the median of the noncentral χ² with this noncentrality, both with `degrees`."""
    median = ncx2.median(degrees, deviance) if deviance > 0 else chi2.median(degrees)
    return float(chi2.sf(median, degrees))


def shift_errors(model: Model, expectation: Expectation, fit: ForeignFit, fluctuations: Floats) -> dict[str, float]:
    """Ratio -> error of its shift from finite generated events.

    fluctuations : (replicas, bins) independent draws, of mean 0 to within their own errors, of what finite events do to
        (what is expected - what the fit expects).

    Error of the error: 1/√(2 replicas), relative. A replica whose fit fails is left out; NaN if fewer than two remain.
    """
    counts, _ = expectation.seen_by(model)
    hollow = model.layout.bin_lane < 0
    found = []
    for fluctuation in fluctuations:
        if not np.any(fluctuation):
            found.append([fit.result.value(name) for name in fit.shifts])
            continue
        moved = np.where(hollow, 0.0, np.maximum(counts + fluctuation, 0.0))
        result = maximise(model, _data(model, moved))
        if result.valid:
            found.append([result.value(name) for name in fit.shifts])
    if len(found) < 2:
        return dict.fromkeys(fit.shifts, float("nan"))
    apart = np.array(found) - found[0]  # exactly 0 where nothing moves
    return dict(zip(fit.shifts, np.std(apart, axis=0, ddof=1).tolist(), strict=True))


def _data(model: Model, counts: Floats) -> Data:
    return Data(counts, model.injected, np.ones(model.bins))
