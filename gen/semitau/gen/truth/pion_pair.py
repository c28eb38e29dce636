"""A pair of pions beside the D(*) of a D** or a continuum: isotropic in the rest frame of the pair."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draw

Floats = npt.NDArray[np.float64]


@kernel
def split_pair(x: Floats, first: float, second: float, stream: np.uint64, first_event: np.uint64) -> None:
    """The PION rows hold the pair, of mass LIGHT_MASS: put its pions of masses first, second there and into PION2."""
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        mass = x[row.LIGHT_MASS + i]
        energy = 0.5 * (mass + (first - second) * (first + second) / mass)
        size = np.sqrt(max(energy * energy - first * first, 0.0))
        nz = 2.0 * uniform(key, draw.PION_PAIR_COS) - 1.0
        sine, cosine = sincos_turns(uniform(key, draw.PION_PAIR_AZIMUTH))
        across = size * np.sqrt((1.0 - nz) * (1.0 + nz))
        px, py, pz = across * cosine, across * sine, size * nz
        vx, vy, vz, whole = x[row.PION_PX + i], x[row.PION_PY + i], x[row.PION_PZ + i], x[row.PION_E + i]
        along = vx * px + vy * py + vz * pz
        push = (along / (whole + mass) + energy) / mass
        ax, ay, az, ae = px + push * vx, py + push * vy, pz + push * vz, (whole * energy + along) / mass
        x[row.PION_PX + i], x[row.PION_PY + i], x[row.PION_PZ + i], x[row.PION_E + i] = ax, ay, az, ae
        x[row.PION2_PX + i], x[row.PION2_PY + i] = vx - ax, vy - ay
        x[row.PION2_PZ + i], x[row.PION2_E + i] = vz - az, whole - ae
