"""The exact likelihood for finite templates: one factor for each component in each bin, profiled.

For counts n, contents m_j of the components and their effective counts a_j (R. Barlow, C. Beeston, Comput. Phys.
Commun. 77 (1993) 219, here with effective counts for weighted templates),

    -ln L = D(n; f) + Σ_j a_j D(β₀_j; β_j),    f = Σ_j β_j m_j,    D(n; μ) = μ - n + n ln(n/μ).

At the minimum over the factors β_j = β₀_j/(1 + s_j t) with s_j = m_j/a_j and t = 1 - n/f: one number a bin is left to
find, the root of

    n/(1 - t) = Σ_j β₀_j m_j/(1 + s_j t).

The right side falls and the left side rises between the poles, so the root is unique; without counts t = 1, or where f
reaches zero. By the envelope theorem and the implicit function theorem, with b_j = β₀_j/(1 + s_j t)² and
D = n/(1 - t)² + Σ_j s_j m_j b_j,

    d(-ln L)/dm_j = t β₀_j/(1 + s_j t),    d²(-ln L)/dm_j dm_k = b_j b_k/D - δ_jk t² b_j/a_j.

Where the plain sum of the contents is below the floor of the protection (interpolation.py), what the protection adds
counts as one more component with an exact template.
"""

from __future__ import annotations

import numpy as np
from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from .bin_statistics import ROUNDS_AT_MOST, deviance


@kernel
def balance(t: float, n: float, m: Floats, inverse: Floats, centre: Floats, exact: float) -> tuple[float, float]:
    """Left minus right side of the equation for t, and its slope. exact : contents with an exact template."""
    left = n / (1.0 - t) if n > 0.0 else 0.0
    total, slope = left - exact, left / (1.0 - t) if n > 0.0 else 0.0
    for j in range(m.shape[0]):
        s = m[j] * inverse[j]
        share = centre[j] * m[j] / (1.0 + s * t)
        total -= share
        slope += share * s / (1.0 + s * t)
    return total, slope


@kernel
def solve_bin(n: float, m: Floats, inverse: Floats, centre: Floats, exact: float) -> tuple[float, float]:
    """t and 1/D of a bin; 1/D is 0 where t does not move with the contents.

    m, inverse, centre : (components,) contents, 1/effective counts (0: an exact template), and β₀.
    """
    low, high = -np.inf, 1.0
    for j in range(m.shape[0]):
        s = m[j] * inverse[j]
        if s > 0.0:
            low = max(low, -1.0 / s)
        elif s < 0.0:
            high = min(high, -1.0 / s)
    if n == 0.0 and high >= 1.0:
        open_at_one = True
        for j in range(m.shape[0]):
            open_at_one = open_at_one and 1.0 + m[j] * inverse[j] > 0.0
        if open_at_one and balance(1.0, 0.0, m, inverse, centre, exact)[0] <= 0.0:
            return 1.0, 0.0
    at_zero, slope = balance(0.0, n, m, inverse, centre, exact)
    if at_zero > 0.0:
        high = 0.0
        if low == -np.inf:
            low = -1.0
            while balance(low, n, m, inverse, centre, exact)[0] > 0.0 and low > -1e30:
                low *= 4.0
    else:
        low = 0.0
    t = -at_zero / slope if slope > 0.0 else 0.5 * (low + high)
    for _ in range(ROUNDS_AT_MOST):
        if not low < t < high:
            t = 0.5 * (low + high)
        value, slope = balance(t, n, m, inverse, centre, exact)
        if value > 0.0:
            high = t
        else:
            low = t
        step = value / slope if slope > 0.0 else 0.0
        if abs(step) <= 1e-15 * (1.0 + abs(t)) or high - low <= 1e-15 * (1.0 + abs(t)):
            t = t - step if low <= t - step <= high else t
            break
        t -= step
    slope = balance(t, n, m, inverse, centre, exact)[1]
    return t, 1.0 / slope if slope > 0.0 else 0.0


@kernel
def exact_value(n: float, m: Floats, inverse: Floats, centre: Floats, exact: float, t: float) -> float:
    """-ln L of a bin from the saturated model, at the t of `solve_bin`."""
    total, value = exact, 0.0
    for j in range(m.shape[0]):
        beta = centre[j] / (1.0 + m[j] * inverse[j] * t)
        total += beta * m[j]
        if inverse[j] > 0.0:
            value += deviance(centre[j], beta) / inverse[j]
    own: float = deviance(n, n / (1.0 - t) if n > 0.0 else max(0.0, total))
    return value + own
