"""Single neutrinos of a drawn decay, for those who want every particle: templates need only what is seen.

tau -> l nu nu: |M|² ~ [(p - m s).k1] [l.k2], k1 the antineutrino of the l, k2 the neutrino of the tau (V - A). The
charged lepton is drawn already; k1 is isotropic in the rest frame of the pair and accepted with |M|² over its bound
there.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draw
from .channel_table import ChannelTable
from .momenta import from_tau_frame, from_w_frame
from .tau_decay import TAU_MASS

Floats = npt.NDArray[np.float64]

NU_PX, NU_PY, NU_PZ, NU_E = row.SCRATCH_10, row.SCRATCH_11, row.SCRATCH_12, row.SCRATCH_13
NU_TAU_PX, NU_TAU_PY, NU_TAU_PZ, NU_TAU_E = row.SCRATCH_14, row.SCRATCH_15, row.SCRATCH_16, row.SCRATCH_17
NU_LEPTON_PX, NU_LEPTON_PY, NU_LEPTON_PZ, NU_LEPTON_E = row.SCRATCH_18, row.SCRATCH_19, row.SCRATCH_20, row.SCRATCH_21

_FIRST_DRAW = np.uint64(draw.NEUTRINO_FIRST)
_ONE, _TWO, _THREE = np.uint64(1), np.uint64(2), np.uint64(3)


@kernel
def fill_neutrinos(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Fill the NU rows above, directly after `draw_decays` with the same arguments (it reads its scratch rows)."""
    mass2 = table.lepton_mass**2
    for i in range(LANES):
        energy, c = 0.5 * (x[row.Q2 + i] - mass2) / np.sqrt(x[row.Q2 + i]), x[row.COS_THETA + i]
        across = np.sqrt((1.0 - c) * (1.0 + c))
        px, py, pz, e = from_w_frame(x, i, table, -energy * across, 0.0, -energy * c, energy)
        x[NU_PX + i], x[NU_PY + i], x[NU_PZ + i], x[NU_E + i] = px, py, pz, e
    if table.has_tau and table.hadrons.pions > 0:
        _behind_pions(x)
    elif table.has_tau:
        _tau_neutrinos(x, table, stream, first_event)


@kernel
def _behind_pions(x: Floats) -> None:
    """The one neutrino of a tau that gives several pions is what they leave."""
    for i in range(LANES):
        x[NU_LEPTON_PX + i] = x[NU_LEPTON_PY + i] = x[NU_LEPTON_PZ + i] = x[NU_LEPTON_E + i] = 0.0
        x[NU_TAU_PX + i] = x[row.TAU_PX + i] - x[row.LEPTON_PX + i] - x[row.PARTNER1_PX + i] - x[row.PARTNER2_PX + i]
        x[NU_TAU_PY + i] = x[row.TAU_PY + i] - x[row.LEPTON_PY + i] - x[row.PARTNER1_PY + i] - x[row.PARTNER2_PY + i]
        x[NU_TAU_PZ + i] = x[row.TAU_PZ + i] - x[row.LEPTON_PZ + i] - x[row.PARTNER1_PZ + i] - x[row.PARTNER2_PZ + i]
        x[NU_TAU_E + i] = x[row.TAU_E + i] - x[row.LEPTON_E + i] - x[row.PARTNER1_E + i] - x[row.PARTNER2_E + i]


@kernel
def _tau_neutrinos(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    mass = table.visible_mass
    for i in range(LANES):
        energy = x[row.VISIBLE_E + i]
        momentum = np.sqrt((energy - mass) * (energy + mass))
        lx, ly, lz = momentum * x[row.VISIBLE_X + i], momentum * x[row.VISIBLE_Y + i], momentum * x[row.VISIBLE_Z + i]
        if table.one_neutrino > 0.0:
            first = (0.0, 0.0, 0.0, 0.0)
            second = (-lx, -ly, -lz, TAU_MASS - energy)
        else:
            key = event_key(stream, first_event + np.uint64(i))
            first, second = _pair(
                key, energy, lx, ly, lz, x[row.POLARISATION_X + i], x[row.POLARISATION_Y + i], x[row.POLARISATION_Z + i]
            )
        px, py, pz, e = from_tau_frame(x, i, table, first[0], first[1], first[2], first[3])
        x[NU_LEPTON_PX + i], x[NU_LEPTON_PY + i], x[NU_LEPTON_PZ + i], x[NU_LEPTON_E + i] = px, py, pz, e
        px, py, pz, e = from_tau_frame(x, i, table, second[0], second[1], second[2], second[3])
        x[NU_TAU_PX + i], x[NU_TAU_PY + i], x[NU_TAU_PZ + i], x[NU_TAU_E + i] = px, py, pz, e


@kernel
def _pair(
    key: np.uint64, energy: float, lx: float, ly: float, lz: float, sx: float, sy: float, sz: float
) -> tuple[tuple[float, float, float, float], tuple[float, float, float, float]]:
    """(px, py, pz, E) in the tau frame of the neutrinos of the l and of the tau; s: polarisation of the tau."""
    pair_energy = TAU_MASS - energy
    lepton2 = lx * lx + ly * ly + lz * lz
    pair_mass2 = pair_energy * pair_energy - lepton2
    pair_mass = np.sqrt(max(pair_mass2, 1e-30))
    half = 0.5 * pair_mass
    # v = p - m s, and l, seen from the rest frame of the pair Q = p - l: energies and momenta for the bound
    v_energy = TAU_MASS * (pair_energy - (sx * lx + sy * ly + sz * lz)) / pair_mass
    v_mass2 = TAU_MASS**2 * (1.0 - (sx * sx + sy * sy + sz * sz))
    l_energy = (energy * pair_energy + lepton2) / pair_mass
    l_mass2 = energy * energy - lepton2
    bound = half * (v_energy + np.sqrt(max(v_energy * v_energy - v_mass2, 0.0)))
    bound *= half * (l_energy + np.sqrt(max(l_energy * l_energy - l_mass2, 0.0)))
    try_draw = _FIRST_DRAW
    while True:
        cz = 2.0 * uniform(key, try_draw) - 1.0
        sine, cosine = sincos_turns(uniform(key, try_draw + _ONE))
        across = np.sqrt((1.0 - cz) * (1.0 + cz))
        kx, ky, kz = half * across * cosine, half * across * sine, half * cz
        # boost by the pair's momentum, which is -l
        along = -(kx * lx + ky * ly + kz * lz)
        push = along / (pair_mass * (pair_energy + pair_mass)) + half / pair_mass
        kx, ky, kz = kx - push * lx, ky - push * ly, kz - push * lz
        k_energy = (pair_energy * half + along) / pair_mass
        ox, oy, oz, o_energy = -lx - kx, -ly - ky, -lz - kz, pair_energy - k_energy
        value = TAU_MASS * (k_energy + sx * kx + sy * ky + sz * kz)
        value *= energy * o_energy - (lx * ox + ly * oy + lz * oz)
        if uniform(key, try_draw + _TWO) * bound <= value:
            return (kx, ky, kz, k_energy), (ox, oy, oz, o_energy)
        try_draw += _THREE
