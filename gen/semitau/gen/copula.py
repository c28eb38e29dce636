"""Correlated uniforms by a Gaussian copula (Sklar 1959; Nelsen, An Introduction to Copulas, ch. 2).

Correlated normal numbers are turned into uniforms one by one, so each observable keeps its own law. The correlation of
the normals is what the study file gives; the rank correlation of the observables is 6/π asin(ρ/2).
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from numba import njit
from semitau.core.elementary import normal_pair
from semitau.core.streams import event_key, uniform

Floats = npt.NDArray[np.float64]

_ROOT_HALF = math.sqrt(0.5)
_ONE = np.uint64(1)


def correlated_uniforms(
    stream: int | np.uint64, first_event: int, n: int, draws: npt.ArrayLike, correlation: Floats
) -> Floats:
    """(k, n) uniforms of the events first_event ... first_event + n - 1.

    draws : k draw numbers; each number takes the one given and the next. correlation : (k, k), positive definite
    (numpy.linalg.LinAlgError otherwise), of the normal numbers behind the uniforms.
    """
    numbers = np.asarray(draws, dtype=np.uint64)
    out = np.empty((len(numbers), n))
    root = np.linalg.cholesky(np.asarray(correlation, dtype=np.float64))
    _fill(np.uint64(stream), np.uint64(first_event), numbers, np.ascontiguousarray(root), out)
    return out


@njit(cache=True, nogil=True, error_model="numpy")
def _fill(stream: np.uint64, first_event: np.uint64, draws: npt.NDArray[np.uint64], root: Floats, out: Floats) -> None:
    count = draws.shape[0]
    normals = np.empty(count)
    for i in range(out.shape[1]):
        key = event_key(stream, first_event + np.uint64(i))
        for j in range(count):
            normals[j], _ = normal_pair(uniform(key, draws[j]), uniform(key, draws[j] + _ONE))
            total = 0.0
            for m in range(j + 1):
                total += root[j, m] * normals[m]
            out[j, i] = 0.5 * math.erfc(-_ROOT_HALF * total)
