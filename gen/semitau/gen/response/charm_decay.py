"""D0 -> K pi and D+ -> K pi pi in flat phase space, which stand for all the channels that an analysis would use."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.constants import mass
from semitau.core.elementary import sincos_turns
from semitau.core.streams import uniform

from .. import block as row
from ..block import LANES
from ..truth.boost import boosted
from .draw_numbers import CHARM_AZIMUTH, CHARM_COS, PAIR_AZIMUTH, PAIR_COS, PAIR_MASS

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]

KAON = mass("K+")
PION = mass("pi+")
LAB_D = row.SCRATCH_0
"""First of the four rows (px, py, pz, E) that hold the D in the laboratory on the way in."""

_PAIR = row.SCRATCH_4
_QUANTILES = 1024


def _breakup(m: npt.ArrayLike, a: npt.ArrayLike, b: npt.ArrayLike) -> Floats:
    """Momentum of the daughters of masses a, b in the rest frame of m."""
    m, a, b = np.asarray(m), np.asarray(a), np.asarray(b)
    product = (m - a - b) * (m + a + b) * (m - a + b) * (m + a - b)
    return np.asarray(np.sqrt(np.maximum(product, 0.0)) / (2.0 * m))


def pair_mass_quantiles(parent: float) -> Floats:
    """Quantiles of m(pi pi) in a flat D -> K pi pi, evenly spaced in probability: (1025,) in GeV.

    Flat phase space has dN/dm(pi pi) proportional to the product of the two breakup momenta (particle data tables,
    review of kinematics).
    """
    low, high = 2.0 * PION, parent - KAON
    # Nodes crowd at both ends, where the density has the shape of a square root.
    t = np.linspace(0.0, 1.0, 20001)
    m = low + (high - low) * t * t * (3.0 - 2.0 * t)
    density = _breakup(parent, m, KAON) * _breakup(m, PION, PION)
    cumulative = np.concatenate([[0.0], np.cumsum(0.5 * (density[1:] + density[:-1]) * np.diff(m))])
    return np.interp(np.linspace(0.0, 1.0, _QUANTILES + 1), cumulative / cumulative[-1], m)


@kernel
def decay_to_two(x: Floats, keys: Keys, parent: float) -> None:
    """Fill TRACK1 (kaon) and TRACK2 (pion) in the laboratory from the D in the LAB_D rows."""
    p = np.sqrt((parent**2 - (KAON + PION) ** 2) * (parent**2 - (KAON - PION) ** 2)) / (2.0 * parent)
    kaon_e = np.sqrt(p * p + KAON * KAON)
    pion_e = np.sqrt(p * p + PION * PION)
    over = 1.0 / parent
    for i in range(LANES):
        cosine = 2.0 * uniform(keys[i], CHARM_COS) - 1.0
        s, c = sincos_turns(uniform(keys[i], CHARM_AZIMUTH))
        across = p * np.sqrt(1.0 - cosine * cosine)
        px, py, pz = across * c, across * s, p * cosine
        ux, uy, uz = over * x[row.SCRATCH_0 + i], over * x[row.SCRATCH_1 + i], over * x[row.SCRATCH_2 + i]
        gamma = over * x[row.SCRATCH_3 + i]
        qx, qy, qz, _ = boosted(px, py, pz, kaon_e, gamma, ux, uy, uz)
        x[row.TRACK1_PX + i] = qx
        x[row.TRACK1_PY + i] = qy
        x[row.TRACK1_PZ + i] = qz
        qx, qy, qz, _ = boosted(-px, -py, -pz, pion_e, gamma, ux, uy, uz)
        x[row.TRACK2_PX + i] = qx
        x[row.TRACK2_PY + i] = qy
        x[row.TRACK2_PZ + i] = qz
        x[row.TRACK3_PX + i] = 0.0
        x[row.TRACK3_PY + i] = 0.0
        x[row.TRACK3_PZ + i] = 0.0


@kernel
def decay_to_three(x: Floats, keys: Keys, parent: float, quantiles: Floats) -> None:
    """Fill TRACK1 (kaon), TRACK2 and TRACK3 (pions) in the laboratory from the D in the LAB_D rows.

    quantiles : from `pair_mass_quantiles(parent)`.
    """
    steps = quantiles.shape[0] - 1
    for i in range(LANES):
        u = uniform(keys[i], PAIR_MASS) * steps
        k = int(u)
        x[_PAIR + i] = quantiles[k] + (u - k) * (quantiles[k + 1] - quantiles[k])
    over = 1.0 / parent
    for i in range(LANES):
        m = x[_PAIR + i]
        kaon_e = 0.5 * over * (parent * parent + KAON * KAON - m * m)
        square = kaon_e * kaon_e - KAON * KAON
        p = np.sqrt(square if square > 0.0 else 0.0)
        cosine = 2.0 * uniform(keys[i], CHARM_COS) - 1.0
        s, c = sincos_turns(uniform(keys[i], CHARM_AZIMUTH))
        across = p * np.sqrt(1.0 - cosine * cosine)
        px, py, pz = across * c, across * s, p * cosine
        ux, uy, uz = over * x[row.SCRATCH_0 + i], over * x[row.SCRATCH_1 + i], over * x[row.SCRATCH_2 + i]
        gamma = over * x[row.SCRATCH_3 + i]
        qx, qy, qz, _ = boosted(px, py, pz, kaon_e, gamma, ux, uy, uz)
        x[row.TRACK1_PX + i] = qx
        x[row.TRACK1_PY + i] = qy
        x[row.TRACK1_PZ + i] = qz
        # The pions, isotropic in the frame of the pair, which flies against the kaon.
        square = 0.25 * m * m - PION * PION
        p = np.sqrt(square if square > 0.0 else 0.0)
        cosine = 2.0 * uniform(keys[i], PAIR_COS) - 1.0
        s, c = sincos_turns(uniform(keys[i], PAIR_AZIMUTH))
        across = p * np.sqrt(1.0 - cosine * cosine)
        kx, ky, kz = across * c, across * s, p * cosine
        pair_gamma = (parent - kaon_e) / m
        vx, vy, vz = -px / m, -py / m, -pz / m
        ax, ay, az, ae = boosted(kx, ky, kz, 0.5 * m, pair_gamma, vx, vy, vz)
        qx, qy, qz, _ = boosted(ax, ay, az, ae, gamma, ux, uy, uz)
        x[row.TRACK2_PX + i] = qx
        x[row.TRACK2_PY + i] = qy
        x[row.TRACK2_PZ + i] = qz
        ax, ay, az, ae = boosted(-kx, -ky, -kz, 0.5 * m, pair_gamma, vx, vy, vz)
        qx, qy, qz, _ = boosted(ax, ay, az, ae, gamma, ux, uy, uz)
        x[row.TRACK3_PX + i] = qx
        x[row.TRACK3_PY + i] = qy
        x[row.TRACK3_PZ + i] = qz
