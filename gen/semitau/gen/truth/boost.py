"""Boosts and directions for compiled loops, one lane at a time."""

from __future__ import annotations

import numpy as np
from semitau.core.compiled import inlined
from semitau.core.elementary import sincos_turns


@inlined
def boosted(
    px: float, py: float, pz: float, e: float, gamma: float, ux: float, uy: float, uz: float
) -> tuple[float, float, float, float]:
    """The four-momentum seen from a frame in which its own frame moves with gamma and u = gamma*beta."""
    along = ux * px + uy * py + uz * pz
    k = e + along / (1.0 + gamma)
    return px + k * ux, py + k * uy, pz + k * uz, gamma * e + along


@inlined
def direction(u_cosine: float, u_azimuth: float) -> tuple[float, float, float]:
    """An isotropic unit vector from two uniforms."""
    cosine = 2.0 * u_cosine - 1.0
    s, c = sincos_turns(u_azimuth)
    across = np.sqrt((1.0 - cosine) * (1.0 + cosine))
    return across * c, across * s, cosine


@inlined
def turned_to(nx: float, ny: float, nz: float, side: float, up: float, along: float) -> tuple[float, float, float]:
    """A vector given by its parts along n, along theta-hat and along phi-hat of the direction n."""
    across = np.sqrt(nx * nx + ny * ny)
    cos_phi = nx / across if across > 0.0 else 1.0
    sin_phi = ny / across if across > 0.0 else 0.0
    return (
        along * nx + side * nz * cos_phi - up * sin_phi,
        along * ny + side * nz * sin_phi + up * cos_phi,
        along * nz - side * across,
    )
