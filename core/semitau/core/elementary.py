"""Branch-free elementary functions for compiled loops over lanes.

The mathematical library's calls stop the compiler from vectorising a loop, and may round differently from machine to
machine; these are plain arithmetic, so a loop over 256 lanes becomes SIMD code and gives the same bits everywhere
(no fused or reordered arithmetic is asked for). Accuracy: a few units in the last place.

Polynomials are truncated Taylor series on reduced arguments, long enough that the remainder is below 1e-17.
"""

from __future__ import annotations

import math

import numpy as np

from .compiled import inlined

_HALF_PI = 0.5 * math.pi
_LN2_HIGH = float.fromhex("0x1.62e42fefa0000p-1")  # ln 2 cut to 37 bits: exact when multiplied by an exponent
_LN2_LOW = float.fromhex("0x1.cf79abc9e3b39p-40")  # ln 2 minus the above
_LOG2_E = 1.0 / math.log(2.0)
_SQRT_HALF_BITS = np.int64(0x3FE6A09E667F3BCD)
_MANTISSA_BITS = np.int64(52)
_ONE_BITS = np.int64(0x3FF0000000000000)

# Taylor coefficients, highest power first.
_SINE = tuple((-1.0) ** k / math.factorial(2 * k + 1) for k in range(7, 0, -1))  # of (sin a - a) / a³ in a²
_COSINE = tuple((-1.0) ** k / math.factorial(2 * k) for k in range(8, -1, -1))  # of cos a in a²
_ARTANH = tuple(1.0 / (2 * k + 1) for k in range(9, 0, -1))  # of (artanh s - s) / s³ in s²
_EXP = tuple(1.0 / math.factorial(k) for k in range(12, -1, -1))


@inlined
def _polynomial(coefficients: tuple[float, ...], z: float) -> float:
    """Horner's scheme; unrolled by the compiler, since the coefficients are constants."""
    value = 0.0
    for c in coefficients:
        value = value * z + c
    return value


@inlined
def sincos_turns(u: float) -> tuple[float, float]:
    """(sin 2πu, cos 2πu) for u in [0, 1]; absolute error below 3e-16."""
    quarter = np.floor(4.0 * u + 0.5)
    a = (4.0 * u - quarter) * _HALF_PI  # |a| <= π/4; the subtraction is exact
    z = a * a
    s = a + a * z * _polynomial(_SINE, z)
    c = _polynomial(_COSINE, z)
    odd = quarter == 1.0 or quarter == 3.0
    sine = c if odd else s
    cosine = s if odd else c
    sine = -sine if (quarter == 2.0 or quarter == 3.0) else sine
    cosine = -cosine if (quarter == 1.0 or quarter == 2.0) else cosine
    return sine, cosine


@inlined
def log(x: float) -> float:
    """Natural logarithm of a positive normal number; relative error below 3e-16."""
    bits = np.float64(x).view(np.int64)
    exponent = (bits - _SQRT_HALF_BITS) >> _MANTISSA_BITS
    m = np.int64(bits - (exponent << _MANTISSA_BITS)).view(np.float64)  # in [sqrt(1/2), sqrt(2))
    f = m - 1.0
    s = f / (2.0 + f)
    z = s * s
    # ln m = 2 artanh s, |s| <= 0.1716; 2s = f - s f makes the leading term exact
    tail = 2.0 * s * z * _polynomial(_ARTANH, z)
    e = np.float64(exponent)
    return e * _LN2_HIGH + (f + (e * _LN2_LOW + (tail - s * f)))  # type: ignore[no-any-return]


@inlined
def exp(x: float) -> float:
    """Exponential for -700 < x < 700 (clipped there); relative error below 5e-16."""
    x = -700.0 if x < -700.0 else x
    x = 700.0 if x > 700.0 else x
    k = np.floor(x * _LOG2_E + 0.5)
    r = (x - k * _LN2_HIGH) - k * _LN2_LOW  # |r| <= ln2/2
    scale = np.int64((np.int64(k) << _MANTISSA_BITS) + _ONE_BITS).view(np.float64)
    return _polynomial(_EXP, r) * scale  # type: ignore[no-any-return]


@inlined
def normal_pair(u1: float, u2: float) -> tuple[float, float]:
    """Two independent standard normal numbers from two uniforms in [0, 1) (Box and Muller, 1958)."""
    radius = np.sqrt(-2.0 * log(1.0 - u1))
    s, c = sincos_turns(u2)
    return radius * c, radius * s
