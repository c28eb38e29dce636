"""Elementary functions against mpmath at 40 digits, and that loops over them became SIMD code."""

from __future__ import annotations

import os
import platform

import mpmath
import numpy as np
import pytest
from numba import njit
from scipy import stats
from semitau.core import elementary
from semitau.core.streams import stream_key, uniforms

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
mpmath.mp.dps = 40


def random(draw: int, n: int = 3000) -> np.ndarray:
    return uniforms(stream_key(SEED, "elementary"), 0, n, draw)


def test_sine_and_cosine() -> None:
    edges = [0.0, 0.125, 0.25, 0.375, 0.5, 0.625, 0.75, 0.875, np.nextafter(1.0, 0.0), 1.0, 1e-300]
    for u in [*edges, *random(0)]:
        sine, cosine = elementary.sincos_turns(u)
        angle = 2 * mpmath.pi * mpmath.mpf(float(u))
        assert abs(sine - mpmath.sin(angle)) < 2.3e-16
        assert abs(cosine - mpmath.cos(angle)) < 2.3e-16


def test_logarithm() -> None:
    values = [1.0, np.nextafter(1.0, 0.0), np.nextafter(1.0, 2.0), 2.0, 0.5, 2.0**-53, 1e-300, 1e300, np.sqrt(2.0)]
    for x in [*values, *random(1), *np.exp(600 * random(2) - 300), *(1 + 0.1 * (random(3) - 0.5))]:
        exact = mpmath.log(mpmath.mpf(float(x)))
        assert abs(elementary.log(x) - exact) <= 2.3e-16 * abs(exact)


def test_exponential() -> None:
    for x in [0.0, 1e-20, -1e-20, 1.0, -1.0, 700.0, -700.0, *(1400 * random(4) - 700), *(random(5) - 0.5)]:
        exact = mpmath.exp(mpmath.mpf(float(x)))
        assert abs(elementary.exp(x) - exact) <= 4.5e-16 * exact
    assert elementary.exp(1e9) == elementary.exp(700.0)
    assert elementary.exp(-1e9) == elementary.exp(-700.0)


def test_normal_pair() -> None:
    """Kolmogorov-Smirnov against the normal law, and no correlation; chance of failing below 1e-4."""
    u, v = random(6, 200_000), random(7, 200_000)
    pairs = np.array([elementary.normal_pair(a, b) for a, b in zip(u[:50_000], v[:50_000], strict=True)])
    assert all(stats.kstest(column, "norm").pvalue > 1e-5 for column in pairs.T)
    assert stats.pearsonr(*pairs.T).pvalue > 1e-5
    assert stats.pearsonr(*(pairs.T**2)).pvalue > 1e-5
    assert all(np.isfinite(elementary.normal_pair(u, 0.3)).all() for u in (0.0, np.nextafter(1.0, 0.0)))


@pytest.mark.skipif(platform.machine() not in ("x86_64", "AMD64"), reason="looks for x86 instructions")
@pytest.mark.parametrize("name", ["sincos_turns", "log", "exp", "normal_pair"])
def test_vectorises(name: str) -> None:
    """Packed multiplications, and no scalar ones, in the loop: the reason why this file exists."""
    function = getattr(elementary, name)
    if name == "normal_pair":

        @njit(error_model="numpy")
        def loop(x: np.ndarray) -> None:
            for i in range(256):
                x[512 + i], x[768 + i] = function(x[i], x[256 + i])

    elif name == "sincos_turns":

        @njit(error_model="numpy")
        def loop(x: np.ndarray) -> None:
            for i in range(256):
                x[512 + i], x[768 + i] = function(x[i])

    else:

        @njit(error_model="numpy")
        def loop(x: np.ndarray) -> None:
            for i in range(256):
                x[512 + i] = function(x[i])

    x = np.full(1024, 0.3)
    loop(x)
    assembly = "".join(loop.inspect_asm().values())
    assert assembly.count("mulpd") + assembly.count("fmadd") > 0
    assert assembly.count("mulsd") == 0
