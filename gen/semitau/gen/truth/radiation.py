"""Photons from a charged lepton: soft and collinear, exponentiated, with four-momentum conserved exactly.

The lepton comes from a system at rest (the W*, or a tau), where it has the velocity v and the kinetic energy T. Photons
are independent (Poisson), each taking the share x of the kinetic energy that is left to the lepton:

    dN = (alpha / 2 pi) v² (1 - c²) / (1 - v c)² dc [1 + (1 - x)²] / 2 dx/x,   c the cosine to the lepton.

That is the classical spectrum of a charge set in motion against a resting one (Jackson, Classical Electrodynamics, ch.
15), with the splitting function of a fermion (Altarelli and Parisi, Nucl. Phys. B 126 (1977) 298) for hard photons; the
product of (1 - x) solves the evolution equation in the leading logarithm. Drawn as a Poisson process under a bound that
can be integrated, and thinned. The rate does not change: virtual photons cancel the real ones.

Recoil: lepton and photons together get a mass; their common momentum keeps the direction of the lepton, and the rest of
the system the mass it had. So q² and all angles of the decay stay what they were, for the lepton with its photons.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.constants import FINE_STRUCTURE
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES, MOST_PHOTONS
from ..decays.chains import Channel
from . import draw_numbers as draw
from .polarimeter import PARTNERS

Floats = npt.NDArray[np.float64]


class Radiation(NamedTuple):
    """What radiates. on : 0 or 1. parent_mass : of the B, GeV. from_tau : 1 if the lepton comes from a tau.

    mass : of what radiates, GeV. least : photons below this energy (GeV, rest frame of W* or tau) are not made.
    """

    on: int
    parent_mass: float
    from_tau: int
    mass: float
    least: float


SILENT = Radiation(0, 0.0, 0, 0.0, 1.0)


LEAST_PHOTON, MOST_PHOTON = 1e-5, 1.0
"""GeV: limits of `least`. Below, more than MOST_PHOTONS would come in one event of 10⁵."""


def radiation_of(chain: Channel, least: float | None) -> Radiation:
    """How the lepton of a chain radiates, or the pion of tau -> pi nu; SILENT for several pions and for least None."""
    if least is None or chain.seen_lepton in PARTNERS:
        return SILENT
    from_tau = int(chain.tau_to is not None)
    return Radiation(1, chain.decay.m_parent, from_tau, chain.m_seen_lepton, float(least))


@inlined
def _bound(v: float) -> float:
    """Largest (1 - c²) / (1 - v c)."""
    return 2.0 / (1.0 + np.sqrt(1.0 - v * v))  # type: ignore[no-any-return]


@kernel
def radiate(x: Floats, radiation: Radiation, stream: np.uint64, first_event: np.uint64) -> None:
    """Let the lepton of each lane radiate: change its row, fill the PHOTON rows. Right after the decays are drawn.

    PHOTON rows beyond PHOTONS of a lane are left as they are.
    """
    mass, least = radiation.mass, radiation.least
    energies, cosines = np.empty(MOST_PHOTONS), np.empty(MOST_PHOTONS)
    k = np.empty((MOST_PHOTONS + 1, 4))
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        x[row.PHOTONS + i] = 0.0
        if radiation.from_tau == 1:
            fx, fy, fz, fe = x[row.TAU_PX + i], x[row.TAU_PY + i], x[row.TAU_PZ + i], x[row.TAU_E + i]
        else:
            fx = -(x[row.D_PX + i] + x[row.SOFT_PX + i] + x[row.PION_PX + i] + x[row.PION2_PX + i])
            fy = -(x[row.D_PY + i] + x[row.SOFT_PY + i] + x[row.PION_PY + i] + x[row.PION2_PY + i])
            fz = -(x[row.D_PZ + i] + x[row.SOFT_PZ + i] + x[row.PION_PZ + i] + x[row.PION2_PZ + i])
            fe = radiation.parent_mass - x[row.D_E + i] - x[row.SOFT_E + i] - x[row.PION_E + i] - x[row.PION2_E + i]
        system = np.sqrt(max(fe * fe - fx * fx - fy * fy - fz * fz, 1e-12))
        lx, ly, lz, le = x[row.LEPTON_PX + i], x[row.LEPTON_PY + i], x[row.LEPTON_PZ + i], x[row.LEPTON_E + i]
        energy = (fe * le - fx * lx - fy * ly - fz * lz) / system
        kinetic = energy - mass
        if kinetic <= least:
            continue
        momentum = np.sqrt(kinetic * (energy + mass))
        v = momentum / energy
        slow, fast = mass * mass / (energy * (energy + momentum)), (energy + momentum) / energy  # 1 - v, 1 + v
        span, decades = np.log(fast / slow), np.log(kinetic / least)
        bound = _bound(v)
        # number of proposals, by inversion
        rate = 0.5 * FINE_STRUCTURE / np.pi * v * bound * span * decades
        u, term, proposals = uniform(key, draw.PHOTON_NUMBER), np.exp(-rate), 0
        while u >= term and proposals < MOST_PHOTONS:
            u -= term
            proposals += 1
            term *= rate / proposals
        number, left = 0, kinetic
        for j in range(proposals):
            first = draw.PHOTON_FIRST + np.uint64(4 * j)
            share = np.exp(-decades * uniform(key, first))
            one_minus_vc = fast * np.exp(-span * uniform(key, first + draw.ONE))
            one_minus_c = min(max((one_minus_vc - slow) / v, 0.0), 2.0)
            kept = 0.5 * (1.0 + (1.0 - share) ** 2) * one_minus_c * (2.0 - one_minus_c) / (one_minus_vc * bound)
            if uniform(key, first + draw.TWO) < kept:
                energies[number], cosines[number] = share * left, 1.0 - one_minus_c
                k[number, 0] = uniform(key, first + draw.THREE)
                left -= energies[number]
                number += 1
        if number == 0:
            continue
        # in the rest frame of the system: n along the lepton, two directions across
        push = (le + energy) / (fe + system)
        nx, ny, nz = (lx - push * fx) / momentum, (ly - push * fy) / momentum, (lz - push * fz) / momentum
        size = np.sqrt(nx * nx + ny * ny + nz * nz)
        nx, ny, nz = nx / size, ny / size, nz / size
        sign = 1.0 if nz >= 0.0 else -1.0
        a = -1.0 / (sign + nz)
        b = nx * ny * a
        own = np.sqrt(max(left * (left + 2.0 * mass), 0.0))
        sx, sy, sz = own * nx, own * ny, own * nz
        k[number] = np.array([sx, sy, sz, left + mass])
        for j in range(number):
            c, w = cosines[j], energies[j]
            s = np.sqrt(max((1.0 - c) * (1.0 + c), 0.0))
            sine, cosine = sincos_turns(k[j, 0])
            k[j, 0] = w * (c * nx + s * (cosine * (1.0 + sign * nx * nx * a) + sine * b))
            k[j, 1] = w * (c * ny + s * (cosine * sign * b + sine * (sign + ny * ny * a)))
            k[j, 2] = w * (c * nz + s * (-cosine * sign * nx - sine * ny))
            k[j, 3] = w
            sx, sy, sz = sx + k[j, 0], sy + k[j, 1], sz + k[j, 2]
        size = max(np.sqrt(sx * sx + sy * sy + sz * sz), 1e-300)
        dx, dy, dz = sx / size, sy / size, sz / size
        # lepton and photons share the decay of the system with what recoils, whose mass stays
        rest2 = system * system + mass * mass - 2.0 * system * energy
        dressed2 = max((energy - size) * (energy + size), mass * mass)
        together = 0.5 * (system * system + dressed2 - rest2) / system
        forward = np.sqrt(max(together * together - dressed2, 0.0))
        stretch = (together + forward) / (energy + size)
        gamma, gamma_beta = 0.5 * (stretch + 1.0 / stretch), 0.5 * (stretch - 1.0 / stretch)
        middle_x, middle_y, middle_z = dx + nx, dy + ny, dz + nz
        scale = 1.0 / max(1.0 + dx * nx + dy * ny + dz * nz, 1e-12)
        for j in range(number + 1):
            px, py, pz, e = k[j, 0], k[j, 1], k[j, 2], k[j, 3]
            along = px * dx + py * dy + pz * dz
            gain = (gamma - 1.0) * along + gamma_beta * e
            px, py, pz = px + gain * dx, py + gain * dy, pz + gain * dz
            along += gain
            back = scale * (px * middle_x + py * middle_y + pz * middle_z)
            px, py, pz = px - back * middle_x, py - back * middle_y, pz - back * middle_z
            px, py, pz = px + 2.0 * along * nx, py + 2.0 * along * ny, pz + 2.0 * along * nz
            own2 = mass * mass if j == number else 0.0
            e = np.sqrt(px * px + py * py + pz * pz + own2)
            # back to the frame of the B
            gain = ((px * fx + py * fy + pz * fz) / (fe + system) + e) / system
            px, py, pz = px + gain * fx, py + gain * fy, pz + gain * fz
            e = np.sqrt(px * px + py * py + pz * pz + own2)
            place = row.LEPTON_PX if j == number else row.PHOTON_PX + 4 * LANES * j
            x[place + i], x[place + LANES + i] = px, py
            x[place + 2 * LANES + i], x[place + 3 * LANES + i] = pz, e
        x[row.PHOTONS + i] = number
