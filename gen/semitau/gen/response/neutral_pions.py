"""What a neutral pion that nobody reconstructs leaves in the calorimeter: the energies of its two photons."""

from __future__ import annotations

import numpy as np
from semitau.core.compiled import inlined
from semitau.core.streams import uniform

from ..truth.boost import direction
from .detector import Photons, Residual
from .draw_numbers import ONE, THREE, TWO
from .tracks import in_photon_acceptance

_TINY = 1e-12


@inlined
def energy_left(
    px: float, py: float, pz: float, e: float, key: np.uint64, draw: np.uint64, photons: Photons, residual: Residual
) -> float:
    """GeV that a neutral pion of this laboratory momentum leaves; four draws from `draw` on.

    The photons are isotropic in the pion's rest frame; each leaves its energy, if it is within the acceptance, with
    the chance of a lost neutral particle.
    """
    mass = np.sqrt(max(e * e - px * px - py * py - pz * pz, 0.0)) + _TINY
    nx, ny, nz = direction(uniform(key, draw), uniform(key, draw + ONE))
    gamma, ux, uy, uz = e / mass, px / mass, py / mass, pz / mass
    along = nx * ux + ny * uy + nz * uz
    push = along / (gamma + 1.0) + 1.0
    half = 0.5 * mass
    qx, qy, qz, energy = (
        half * (nx + push * ux),
        half * (ny + push * uy),
        half * (nz + push * uz),
        half * (gamma + along),
    )
    first = energy if uniform(key, draw + TWO) < residual.lost_neutral else 0.0
    second = e - energy if uniform(key, draw + THREE) < residual.lost_neutral else 0.0
    first *= in_photon_acceptance(qx, qy, qz, photons)
    second *= in_photon_acceptance(px - qx, py - qy, pz - qz, photons)
    return first + second  # type: ignore[no-any-return]
