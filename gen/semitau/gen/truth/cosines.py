"""Cosines from densities that are even quadratics, without rejection."""

from __future__ import annotations

from semitau.core.compiled import inlined


@inlined
def even_cosine(u1: float, u2: float, u3: float, u_term: float, sin2: float, cos2: float) -> float:
    """From the density sin2 * (1 - c²) + cos2 * c².

    The median of three uniforms on [-1, 1] is distributed as 1 - c², the one of largest modulus as c².
    """
    a, b, c = 2.0 * u1 - 1.0, 2.0 * u2 - 1.0, 2.0 * u3 - 1.0
    median = max(min(a, b), min(max(a, b), c))
    largest = a if abs(a) > abs(b) else b
    largest = c if abs(c) > abs(largest) else largest
    return median if u_term * (2.0 * sin2 + cos2) < 2.0 * sin2 else largest
