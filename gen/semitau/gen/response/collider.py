"""Production at a lepton collider: Y(4S) -> B B-bar, and the way from the rest frame of a B to the laboratory.

The pair flies back to back in the centre-of-mass frame with sin² of the polar angle (spin 1 from transverse beams into
two spinless particles), each with half the collision energy; the laboratory moves along z.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import normal_pair, sincos_turns
from semitau.core.streams import uniform

from ..block import BOOST_GAMMA, BOOST_X, BOOST_Y, BOOST_Z, LANES
from ..truth.boost import boosted
from .detector import Beams
from .draw_numbers import ENERGY_AND_TAG_X, FLIGHT_AZIMUTH, FLIGHT_COS, ONE, TWO

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]


@kernel
def draw_pair(x: Floats, keys: Keys, beams: Beams, parent_mass: float) -> None:
    """Fill BOOST_*: gamma and gamma*beta of the signal B in the centre-of-mass frame, with the beam-energy spread."""
    for i in range(LANES):
        n, _ = normal_pair(uniform(keys[i], ENERGY_AND_TAG_X), uniform(keys[i], ENERGY_AND_TAG_X + ONE))
        gamma = 0.5 * (beams.energy + beams.spread * n) / parent_mass
        # Below threshold (many standard deviations away for a sensible machine) the pair is at rest.
        square = gamma * gamma - 1.0
        square = square if square > 0.0 else 0.0
        # The median of three uniform numbers on [-1, 1] has the density (3/4)(1 - c²).
        a = uniform(keys[i], FLIGHT_COS)
        b = uniform(keys[i], FLIGHT_COS + ONE)
        c = uniform(keys[i], FLIGHT_COS + TWO)
        low = a if a < b else b
        high = b if a < b else a
        rest = c if c > low else low
        cosine = 2.0 * (rest if rest < high else high) - 1.0
        s, c = sincos_turns(uniform(keys[i], FLIGHT_AZIMUTH))
        across = np.sqrt(square * (1.0 - cosine * cosine))
        x[BOOST_GAMMA + i] = np.sqrt(1.0 + square)
        x[BOOST_X + i] = across * c
        x[BOOST_Y + i] = across * s
        x[BOOST_Z + i] = np.sqrt(square) * cosine


@inlined
def boosted_along_z(pz: float, e: float, beta: float, gamma: float) -> tuple[float, float]:
    """(pz, e) seen from a frame in which its own frame moves along +z."""
    return gamma * (pz + beta * e), gamma * (e + beta * pz)


@kernel
def to_laboratory(x: Floats, source: int, target: int, beams: Beams) -> None:
    """Boost a four-momentum from the rest frame of the signal B through the centre-of-mass frame to the laboratory.

    source, target : first of the four rows px, py, pz, E to read and to write.
    """
    p = x[source : source + 4 * LANES]
    q = x[target : target + 4 * LANES]
    for i in range(LANES):
        gamma, ux, uy, uz = x[BOOST_GAMMA + i], x[BOOST_X + i], x[BOOST_Y + i], x[BOOST_Z + i]
        qx, qy, qz, e = boosted(p[i], p[LANES + i], p[2 * LANES + i], p[3 * LANES + i], gamma, ux, uy, uz)
        qz, e = boosted_along_z(qz, e, beams.beta, beams.gamma)
        q[i] = qx
        q[LANES + i] = qy
        q[2 * LANES + i] = qz
        q[3 * LANES + i] = e
