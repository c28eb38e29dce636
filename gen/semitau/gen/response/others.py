"""What a B decay has beside charmed meson and lepton in double charm: does it make a track, what energy does it leave?

A charged particle that is seen vetoes the event, as the pion of a D** does; a photon within acceptance leaves its
energy with the chance of a lost neutral particle; a K_L leaves nothing. Light hadrons decay first, neutral pions to two
photons. Lanes that `find` has found are looked at one at a time, the others not at all.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.streams import uniform

from .. import block as row
from ..block import LANES
from ..truth.boost import boosted, direction
from ..truth.momenta import two_body_momentum
from .collider import boosted_along_z
from .detector import Beams, Chain, Detector
from .draw_numbers import ONE, TWO
from .efficiency import Efficiency
from .light_decays import CLUSTER, DAUGHTERS, DECAYS, FATES, FIRST_ROW, MASSES, NO_SPECIES, SHARES, TRACK
from .tracks import in_photon_acceptance, in_track_acceptance

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]
Keys = npt.NDArray[np.uint64]

FIRST_DRAW = np.uint64(320)
_MOST = 16
"""Particles that wait at one time: three companions, and at most two more for each decay on the way."""


@kernel
def has_others(chain: Chain) -> bool:
    """Whether a decay chain has such particles."""
    return chain.beside_soft >= 0 or chain.kaon >= 0 or chain.hadron >= 0


@kernel
def see_others(x: Floats, keys: Keys, found: int, chain: Chain, detector: Detector) -> None:
    """Fill OTHERS_SEEN and OTHERS_LEFT in the lanes whose row `found` (its first index) is 1."""
    kinds, momenta = np.empty(_MOST, dtype=np.int64), np.empty((_MOST, 4))
    for i in range(LANES):
        if x[found + i] == 1.0:
            n = _push(x, i, row.BESIDE_SOFT_PX, chain.beside_soft, detector.beams, kinds, momenta, 0)
            n = _push(x, i, row.KAON_PX, chain.kaon, detector.beams, kinds, momenta, n)
            n = _push(x, i, row.HADRON_PX, chain.hadron, detector.beams, kinds, momenta, n)
            seen, left = _follow(keys[i], kinds, momenta, n, detector)
            x[row.OTHERS_SEEN + i] = seen
            x[row.OTHERS_LEFT + i] = left


@kernel
def add_others(y: Floats) -> None:
    """Add them to EXTRA and LEFT_OVER."""
    for i in range(LANES):
        y[row.EXTRA + i] = max(y[row.EXTRA + i], y[row.OTHERS_SEEN + i])
        y[row.LEFT_OVER + i] += y[row.OTHERS_LEFT + i]


@inlined
def _push(x: Floats, i: int, first: int, kind: int, beams: Beams, kinds: Integers, momenta: Floats, n: int) -> int:
    """Put a companion with its laboratory momentum on the list, if there is one."""
    if kind == NO_SPECIES:
        return n
    px, py, pz, e = boosted(
        x[first + i], x[first + LANES + i], x[first + 2 * LANES + i], x[first + 3 * LANES + i],
        x[row.BOOST_GAMMA + i], x[row.BOOST_X + i], x[row.BOOST_Y + i], x[row.BOOST_Z + i],
    )  # fmt: skip
    pz, e = boosted_along_z(pz, e, beams.beta, beams.gamma)
    kinds[n] = kind
    momenta[n, 0], momenta[n, 1], momenta[n, 2], momenta[n, 3] = px, py, pz, e
    return n + 1


@kernel
def follow_one(
    key: np.uint64, kind: int, px: float, py: float, pz: float, e: float, detector: Detector
) -> tuple[float, float]:
    """As `_follow`, for one particle of this species and laboratory momentum: the eta of a continuum."""
    kinds, momenta = np.empty(_MOST, dtype=np.int64), np.empty((_MOST, 4))
    kinds[0] = kind
    momenta[0, 0], momenta[0, 1], momenta[0, 2], momenta[0, 3] = px, py, pz, e
    return _follow(key, kinds, momenta, 1, detector)  # type: ignore[no-any-return]


@kernel
def _follow(key: np.uint64, kinds: Integers, momenta: Floats, waiting: int, detector: Detector) -> tuple[float, float]:
    """(1.0 if a track was seen, energy left in GeV) for the particles on the list."""
    left = 0.0
    draw = FIRST_DRAW
    n = waiting
    while n > 0:
        n -= 1
        kind = kinds[n]
        px, py, pz, e = momenta[n, 0], momenta[n, 1], momenta[n, 2], momenta[n, 3]
        fate = FATES[kind]
        if fate == TRACK:
            chance = efficiency_at(detector.tracks.efficiency, np.sqrt(px * px + py * py + pz * pz))
            if uniform(key, draw) < in_track_acceptance(px, py, pz, detector.tracks) * chance:
                return 1.0, left
            draw += ONE
        elif fate == CLUSTER:
            if uniform(key, draw) < detector.residual.lost_neutral:
                left += in_photon_acceptance(px, py, pz, detector.photons) * e
            draw += ONE
        elif fate == DECAYS:
            decay = FIRST_ROW[kind]
            u = uniform(key, draw) - SHARES[decay]
            draw += ONE
            while u >= 0.0 and decay + 1 < SHARES.shape[0]:
                decay += 1
                u -= SHARES[decay]
            n, draw = _split(key, draw, kind, decay, px, py, pz, e, kinds, momenta, n)
    return 0.0, left


@kernel
def efficiency_at(efficiency: Efficiency, momentum: float) -> float:
    """As `efficiency.evaluate`, at one momentum."""
    value = efficiency.first
    for k in range(efficiency.knots.shape[0]):
        value += efficiency.bends[k] * max(momentum - efficiency.knots[k], 0.0)
    return value


@kernel
def _split(
    key: np.uint64, draw: np.uint64, kind: int, decay: int, px: float, py: float, pz: float, e: float,
    kinds: Integers, momenta: Floats, n: int,
) -> tuple[int, np.uint64]:  # fmt: skip
    """Replace a particle by its daughters; returns the length of the list and the next draw."""
    mass = MASSES[kind]
    one, two, three = DAUGHTERS[decay, 0], DAUGHTERS[decay, 1], DAUGHTERS[decay, 2]
    gamma, ux, uy, uz = e / mass, px / mass, py / mass, pz / mass
    if two == NO_SPECIES:
        kinds[n] = one
        momenta[n, 0], momenta[n, 1], momenta[n, 2], momenta[n, 3] = px, py, pz, e
        return n + 1, draw
    rest = MASSES[two]
    if three != NO_SPECIES:
        # Flat phase space: the mass of the last two has the density of both breakup momenta.
        low, high = rest + MASSES[three], mass - MASSES[one]
        bound = two_body_momentum(mass, MASSES[one], low) * two_body_momentum(high, rest, MASSES[three])
        pair = low
        accepted = False
        while not accepted:
            pair = low + (high - low) * uniform(key, draw)
            density = two_body_momentum(mass, MASSES[one], pair) * two_body_momentum(pair, rest, MASSES[three])
            accepted = uniform(key, draw + ONE) * bound < density
            draw += TWO
        rest = pair
    p = two_body_momentum(mass, MASSES[one], rest)
    nx, ny, nz = direction(uniform(key, draw), uniform(key, draw + ONE))
    draw += TWO
    qx, qy, qz, qe = boosted(p * nx, p * ny, p * nz, np.sqrt(p * p + MASSES[one] ** 2), gamma, ux, uy, uz)
    kinds[n] = one
    momenta[n, 0], momenta[n, 1], momenta[n, 2], momenta[n, 3] = qx, qy, qz, qe
    qx, qy, qz, qe = boosted(-p * nx, -p * ny, -p * nz, np.sqrt(p * p + rest * rest), gamma, ux, uy, uz)
    if three == NO_SPECIES:
        kinds[n + 1] = two
        momenta[n + 1, 0], momenta[n + 1, 1], momenta[n + 1, 2], momenta[n + 1, 3] = qx, qy, qz, qe
        return n + 2, draw
    gamma, ux, uy, uz = qe / rest, qx / rest, qy / rest, qz / rest
    p = two_body_momentum(rest, MASSES[two], MASSES[three])
    nx, ny, nz = direction(uniform(key, draw), uniform(key, draw + ONE))
    draw += TWO
    qx, qy, qz, qe = boosted(p * nx, p * ny, p * nz, np.sqrt(p * p + MASSES[two] ** 2), gamma, ux, uy, uz)
    kinds[n + 1] = two
    momenta[n + 1, 0], momenta[n + 1, 1], momenta[n + 1, 2], momenta[n + 1, 3] = qx, qy, qz, qe
    qx, qy, qz, qe = boosted(-p * nx, -p * ny, -p * nz, np.sqrt(p * p + MASSES[three] ** 2), gamma, ux, uy, uz)
    kinds[n + 2] = three
    momenta[n + 2, 0], momenta[n + 2, 1], momenta[n + 2, 2], momenta[n + 2, 3] = qx, qy, qz, qe
    return n + 3, draw
