"""Drawing from any one-dimensional density through its inverse cumulative distribution, tabulated.

Each interval of the table keeps its exact content and its exact mean; inside, the density is a straight line. A guide
table (Chen and Asau, Journal of the ACM 21 (1974) 163) leads to the interval in a step or two, whatever their number.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel

Floats = npt.NDArray[np.float64]

_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(8)
_LAST = 1.0 - 2.0**-53


@dataclass(frozen=True, eq=False)
class QuantileTable:
    """Table of a distribution.

    nodes : (k + 1,) limits of the intervals, not falling. cumulative : (k + 1,) from 0 to 1.
    left : (k,) density at the left end over the sum of both ends, 0 to 1. guide : first interval for each step of u.
    """

    nodes: Floats
    cumulative: Floats
    left: Floats
    guide: npt.NDArray[np.int64]

    def __call__(self, u: Floats) -> Floats:
        """Quantiles at u in [0, 1], an array of any length."""
        out = np.empty(len(u))
        _fill(self.nodes, self.cumulative, self.left, self.guide, u, out)
        return out


@dataclass(frozen=True, eq=False)
class RowTable:
    """Chances of rows (entries of a tree): cumulative (rows + 1,) from 0 to 1, with its guide."""

    cumulative: Floats
    guide: npt.NDArray[np.int64]

    def __call__(self, u: Floats) -> npt.NDArray[np.int64]:
        """Row numbers at u in [0, 1]."""
        out = np.empty(len(u), dtype=np.int64)
        _find(self.cumulative, self.guide, u, out)
        return out


def from_density(
    log_density: Callable[[Floats], Floats], nodes: Floats, contents: Floats | None = None
) -> QuantileTable:
    """Table of exp(log_density) on intervals between sorted `nodes`.

    log_density : vectorised, any constant added; -inf is a zero; it is not asked at the nodes, but within intervals.
    contents : (k,) of the intervals, where they are known better than by an 8-point Gauss-Legendre rule.
    ValueError if nothing is left.
    """
    low, width = nodes[:-1, None], np.diff(nodes)[:, None]
    t = 0.5 * (_POINTS + 1.0)
    logs = log_density((low + width * t).ravel()).reshape(-1, len(t))
    # each interval relative to its own largest value, so that far tails neither vanish nor overflow here
    top = np.max(logs, axis=1, keepdims=True)
    top = np.where(np.isfinite(top), top, 0.0)
    values = np.exp(logs - top) * _WEIGHTS
    sums = values.sum(axis=1)
    mean = np.divide(values @ t, sums, out=np.full(len(sums), 0.5), where=sums > 0)
    if contents is None:
        highest = np.max(top[sums > 0], initial=-np.inf)
        contents = np.exp(top[:, 0] - highest) * sums * width[:, 0] if sums.any() else sums
    return _table(nodes, contents, np.clip(2.0 - 3.0 * mean, 0.0, 1.0))


def from_sorted(values: Floats, weights: Floats | None = None) -> QuantileTable:
    """Table that runs in straight lines through sorted values: between neighbours the density is even."""
    weights = np.ones(len(values)) if weights is None else weights
    if len(values) == 1:
        return _table(np.repeat(values, 2), np.ones(1), np.full(1, 0.5))
    return _table(values, 0.5 * (weights[:-1] + weights[1:]), np.full(len(values) - 1, 0.5))


def rows(weights: Floats) -> RowTable:
    """Table that draws row k in proportion to weights[k]. ValueError if all are zero."""
    cumulative = _cumulative(weights)
    return RowTable(cumulative, _guide(cumulative))


def _table(nodes: Floats, contents: Floats, left: Floats) -> QuantileTable:
    cumulative = _cumulative(contents)
    return QuantileTable(np.ascontiguousarray(nodes, np.float64), cumulative, left, _guide(cumulative))


def _cumulative(contents: Floats) -> Floats:
    total = contents.sum()
    if not (np.isfinite(total) and total > 0.0):
        raise ValueError("nothing to draw from")
    cumulative = np.concatenate([[0.0], np.cumsum(contents)])
    cumulative /= cumulative[-1]
    return cumulative


def _guide(cumulative: Floats) -> npt.NDArray[np.int64]:
    steps = len(cumulative) - 1
    first = np.searchsorted(cumulative, np.arange(steps) / steps, side="right") - 1
    return np.clip(first, 0, steps - 1).astype(np.int64)


@inlined
def _interval(cumulative: Floats, guide: npt.NDArray[np.int64], u: float) -> int:
    k = guide[np.int64(u * guide.shape[0])]
    while cumulative[k + 1] <= u:
        k += 1
    return k  # type: ignore[no-any-return]


@kernel
def _fill(
    nodes: Floats, cumulative: Floats, left: Floats, guide: npt.NDArray[np.int64], u: Floats, out: Floats
) -> None:
    for i in range(u.shape[0]):
        v = min(u[i], _LAST)
        k = _interval(cumulative, guide, v)
        # the guide may be one rounding off at a limit of intervals
        share = max((v - cumulative[k]) / (cumulative[k + 1] - cumulative[k]), 0.0)
        # position t in the interval: 2 a t + (1 - 2 a) t² = share, for the straight line from a to 1 - a
        a = left[k]
        root = a + np.sqrt(a * a + (1.0 - 2.0 * a) * share)
        t = share / root if root > 0.0 else 0.0
        out[i] = nodes[k] + (nodes[k + 1] - nodes[k]) * min(t, 1.0)


@kernel
def _find(cumulative: Floats, guide: npt.NDArray[np.int64], u: Floats, out: npt.NDArray[np.int64]) -> None:
    for i in range(u.shape[0]):
        out[i] = _interval(cumulative, guide, min(u[i], _LAST))
