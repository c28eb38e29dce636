"""Toys of the likelihood ratio of one parameter: each is fitted with the parameter free and with it held at its truth.

The distribution of this ratio gives intervals that need no asymptotic formula (neyman.py) and the coverage of
those that do (covering.py).
"""

from __future__ import annotations

from collections.abc import Callable
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from semitau.core.compiled import kernel
from semitau.core.engine import Job, run
from semitau.core.streams import event_key
from semitau.core.templates import Floats

from ..fitting.algebra import inverse_diagonal
from ..fitting.ending import CONVERGED
from ..fitting.model import Model
from ..fitting.newton import Scratch, minimise, scratch
from ..likelihood.layout import EXACT_BY_COMPONENT, Arrays, Indices
from ..likelihood.likelihood import VALUE, evaluate
from .toys import BATCH, draw_toy, padded_means

Progress = Callable[[int, int], None]


class RatioToys(NamedTuple):
    """heights : (toys,) -2 ln L at the truth above the minimum, NaN where a fit failed.

    values, errors : (toys,) fitted value and error from the Hessian. conditional : (toys, parameters) the fits with the
    parameter held at its truth; no rows unless asked for.
    """

    heights: Floats
    values: Floats
    errors: Floats
    conditional: Floats


def ratio_toys(
    model: Model,
    index: int,
    truth: Floats,
    n: int,
    stream: np.uint64,
    workers: int | None = None,
    report: Progress | None = None,
    *,
    keep: bool = False,
    also: tuple[int, ...] = (),
) -> RatioToys:
    """Draw n toys at truth (parameters,); toy i depends on (stream, i) alone.

    index : of the parameter, which must be free. keep : also give the conditional fits.
    also : further parameters that are held at their truth, too.
    """
    means = padded_means(model, truth)
    start = truth.copy()
    held = np.array([i for i in model.free if i != index and i not in also], dtype=np.int64)
    place = int(np.flatnonzero(model.free == index)[0])
    common = _Toys(model.layout.arrays, model.free, held, place, stream, truth, start, means, keep)
    tasks = [Job(_batch, common, (first, min(BATCH, n - first))) for first in range(0, n, BATCH)]
    progress = None if report is None else lambda done, _: report(min(n, done * BATCH), n)
    return RatioToys(*(np.concatenate(part) for part in zip(*run(tasks, workers, progress), strict=True)))


class _Toys(NamedTuple):
    """What all batches have in common, without the model: workers elsewhere need no more."""

    arrays: Arrays
    free: Indices
    held: Indices
    place: int
    stream: np.uint64
    truth: Floats
    start: Floats
    means: Floats
    keep: bool


def _batch(common: _Toys, first: int, size: int) -> RatioToys:
    arrays, free, held, place, stream, truth, start, means, keep = common
    out = RatioToys(np.zeros(size), np.zeros(size), np.zeros(size), np.zeros((size if keep else 0, truth.size)))
    # The exact form of the likelihood has a factor for each component of a bin, the others have one for the bin.
    gammas = np.ones(arrays.nominal.size if arrays.form == EXACT_BY_COMPONENT else means.size)
    _fit_both(arrays, free, held, place, stream, np.uint64(first), truth, start, means, gammas, scratch(arrays), out)
    return out


@kernel
def _fit_both(
    arrays: Arrays,
    free: Indices,
    held: Indices,
    place: int,
    stream: np.uint64,
    first: np.uint64,
    truth: Floats,
    start: Floats,
    means: Floats,
    gammas: Floats,
    s: Scratch,
    out: RatioToys,
) -> None:
    counts, centres = np.zeros(means.shape[0]), np.zeros(truth.shape[0])
    x, variances = np.zeros(truth.shape[0]), np.zeros(free.shape[0])
    for i in range(out.heights.shape[0]):
        draw_toy(arrays, event_key(stream, first + np.uint64(i)), truth, means, counts, gammas, centres)
        x[:] = start
        best = minimise(arrays, free, counts, gammas, centres, x, s)
        out.heights[i] = np.nan
        out.values[i] = x[free[place]]
        out.errors[i] = np.nan
        if best.status == CONVERGED:
            inverse_diagonal(s.lower, s.scale, free.shape[0], s.step, variances)
            out.errors[i] = np.sqrt(variances[place])
        x[:] = start
        status, value = CONVERGED, 0.0
        if held.shape[0] > 0:
            conditional = minimise(arrays, held, counts, gammas, centres, x, s)
            status, value = conditional.status, conditional.value
        else:
            value = _value(arrays, x, counts, gammas, centres, s)
        if best.status == CONVERGED and status == CONVERGED:
            out.heights[i] = max(0.0, 2.0 * (value - best.value))
        if out.conditional.shape[0] > 0:
            out.conditional[i] = x


@kernel
def _value(arrays: Arrays, x: Floats, counts: Floats, gammas: Floats, centres: Floats, s: Scratch) -> float:
    return float(evaluate(arrays, x, counts, gammas, centres, VALUE, s.gradient, s.hessian, s.work))


def shares_above(toys: RatioToys, observed: float) -> tuple[float, int]:
    """Share of the valid toys whose height is at least `observed`, and the number of valid toys."""
    valid: NDArray[np.float64] = toys.heights[np.isfinite(toys.heights)]
    # Equal up to rounding counts as equal: with few events many toys have the very height of the data.
    return (float(np.mean(valid >= observed * (1.0 - 1e-9) - 1e-9)) if valid.size else float("nan")), int(valid.size)
