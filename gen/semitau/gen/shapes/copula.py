"""Correlated uniforms by a Gaussian copula (Sklar 1959; Nelsen, An Introduction to Copulas, ch. 2).

Correlated normal numbers are turned into uniforms one by one, so each observable keeps its own law. The correlation of
the normals is what the study file gives; the rank correlation of the observables is 6/π asin(ρ/2).
"""

from __future__ import annotations

import math

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import normal_pair
from semitau.core.streams import event_key, uniform

Floats = npt.NDArray[np.float64]

_ONE = np.uint64(1)
_LANES = 256

# The normal distribution function, tabulated with its derivative; cubic Hermite pieces are good to 2e-11 everywhere.
_REACH, _STEPS = 9.0, 128.0  # steps for each unit
_NODES = np.arange(-_REACH, _REACH + 1.5 / _STEPS, 1.0 / _STEPS)
_VALUES = np.array([0.5 * math.erfc(-z / math.sqrt(2.0)) for z in _NODES])
_SLOPES = np.exp(-0.5 * _NODES**2) / (math.sqrt(2.0 * math.pi) * _STEPS)


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


@inlined
def normal_distribution(z: float) -> float:
    """Chance that a standard normal number is below z; absolute error below 2e-11, 0 and 1 beyond ±9."""
    position = (min(max(z, -_REACH), _REACH) + _REACH) * _STEPS
    k = np.int64(position)
    t = position - k
    low, high = _VALUES[k], _VALUES[k + 1]
    bend = high - low
    left, right = _SLOPES[k] - bend, bend - _SLOPES[k + 1]
    return low + t * (bend + (1.0 - t) * (left * (1.0 - t) + right * t))  # type: ignore[no-any-return]


@kernel
def _fill(stream: np.uint64, first_event: np.uint64, draws: npt.NDArray[np.uint64], root: Floats, out: Floats) -> None:
    count, n = out.shape
    normals = np.empty((count, _LANES))
    total = np.empty(_LANES)
    for start in range(0, n, _LANES):
        lanes = min(_LANES, n - start)
        for j in range(count):
            first, second = draws[j], draws[j] + _ONE
            for i in range(_LANES):
                key = event_key(stream, first_event + np.uint64(start + i))
                normals[j, i], _ = normal_pair(uniform(key, first), uniform(key, second))
            total[:] = 0.0
            for m in range(j + 1):
                for i in range(_LANES):
                    total[i] += root[j, m] * normals[m, i]
            for i in range(lanes):
                out[j, start + i] = normal_distribution(total[i])
