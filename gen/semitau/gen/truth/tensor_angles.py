"""Direction of what a spin-2 meson decays to: exact, without rejection.

The density is an even polynomial of degree four on the sphere. The corners of an icosahedron, however it is turned, are
a spherical design of strength five: the sum of such a polynomial over them does not depend on the turn (Geom. Dedicata
6 (1977) 363, from memory). So an icosahedron turned at random, and one of its six axes chosen by the odds of the
density there, are exact.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from semitau.core.compiled import inlined

from .charm_spin import CharmSpin

_GOLDEN = (1.0 + np.sqrt(5.0)) / 2.0
_SHORT, _LONG = float(1.0 / np.hypot(1.0, _GOLDEN)), float(_GOLDEN / np.hypot(1.0, _GOLDEN))
_NEVER_ZERO = 1e-150

Direction = tuple[float, float, float]


@inlined
def tensor_direction(turn: tuple[float, ...], u: float, spin: CharmSpin, density: Any, states: Any) -> Direction:
    """cos(theta_V), cos(chi), sin(chi).

    turn : row-major rotation matrix. u : uniform. density, states : `spin_density` or `both_waves`, and the six
    amplitudes that it takes.
    """
    n1, n2, n3, n4, n5, n6 = axes(turn)
    d1 = _density_at(n1, spin, density, states)
    d2 = d1 + _density_at(n2, spin, density, states)
    d3 = d2 + _density_at(n3, spin, density, states)
    d4 = d3 + _density_at(n4, spin, density, states)
    d5 = d4 + _density_at(n5, spin, density, states)
    chosen = u * (d5 + _density_at(n6, spin, density, states))
    nx = _pick(chosen, d1, d2, d3, d4, d5, n1[0], n2[0], n3[0], n4[0], n5[0], n6[0])
    ny = _pick(chosen, d1, d2, d3, d4, d5, n1[1], n2[1], n3[1], n4[1], n5[1], n6[1])
    nz = _pick(chosen, d1, d2, d3, d4, d5, n1[2], n2[2], n3[2], n4[2], n5[2], n6[2])
    return _angles((nx, ny, nz))  # type: ignore[no-any-return]


@inlined
def axes(turn: tuple[float, ...]) -> tuple[Direction, ...]:
    """Six corners of the turned icosahedron, of which no two are opposite."""
    x, y, z = (turn[0], turn[3], turn[6]), (turn[1], turn[4], turn[7]), (turn[2], turn[5], turn[8])
    return (
        _corner(y, z, 1.0),
        _corner(y, z, -1.0),
        _corner(x, y, 1.0),
        _corner(x, y, -1.0),
        _corner(z, x, 1.0),
        _corner(z, x, -1.0),
    )


@inlined
def _corner(first: Direction, second: Direction, sign: float) -> Direction:
    return (
        sign * _SHORT * first[0] + _LONG * second[0],
        sign * _SHORT * first[1] + _LONG * second[1],
        sign * _SHORT * first[2] + _LONG * second[2],
    )


@inlined
def _angles(n: Direction) -> Direction:
    across = np.sqrt(n[0] * n[0] + n[1] * n[1]) + _NEVER_ZERO
    return min(max(n[2], -1.0), 1.0), n[0] / across, n[1] / across


@inlined
def _density_at(n: Direction, spin: CharmSpin, density: Any, states: Any) -> float:
    cos_v, cos_chi, sin_chi = _angles(n)
    return density(spin, cos_v, cos_chi, sin_chi, *states)[0]  # type: ignore[no-any-return]


@inlined
def _pick(
    u: float, d1: float, d2: float, d3: float, d4: float, d5: float,
    n1: float, n2: float, n3: float, n4: float, n5: float, n6: float,
) -> float:  # fmt: skip
    """Selections only, which vectorise."""
    first = n1 if u < d1 else (n2 if u < d2 else n3)
    second = n4 if u < d4 else (n5 if u < d5 else n6)
    return first if u < d3 else second
