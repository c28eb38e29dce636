"""True decays of double charm, 256 at a time, as four-momenta in the B rest frame.

Nothing is rejected and nothing is weighted. In B -> D* D_s* the helicity is drawn first and both polar angles from it,
which is exact for the density integrated over the angle chi between the decay planes; chi then comes from the full
density with all interferences, as in `drawing.py`. The amplitude is sum_lambda e^{i lambda chi} J_lambda d_lambda(D*)
d_lambda(D_s*) for two pions; the two helicities of a photon add up to (1 - that of a pion) / 2 on either side.

The meson that gives the lepton has no spin, so its decay is isotropic in its rest frame. The tau of D_s -> tau nu has
helicity +1/2 there (for a tau-), whatever its mass, since the neutrino has one helicity only.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from . import double_charm_draws as draw
from .alias import draw_position
from .boost import boosted, direction, turned_to
from .cosines import even_cosine
from .double_charm_table import INTERVALS, TO_HADRON, TO_MUON, DoubleCharmTable
from .momenta import rotation, two_body_momentum
from .tau_decay import TAU_MASS, emission

Floats = npt.NDArray[np.float64]

# What the steps hand on, of the event before its final rotation: system along +z, D(*) along -z.
_SYSTEM_MASS, _SYSTEM_MOMENTUM = row.SCRATCH_0, row.SCRATCH_1
_COS_BESIDE, _BESIDE_MASS = row.SCRATCH_2, row.SCRATCH_3
_MESON_PX, _MESON_PY, _MESON_PZ, _MESON_E = row.SCRATCH_4, row.SCRATCH_5, row.SCRATCH_6, row.SCRATCH_7


@kernel
def draw_double_charm(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Fill the truth rows of a block with 256 decays of one chain, B at rest.

    Rows as in `drawing.draw_decays`, with COS_THETA and chi those of the lepton that is seen in the rest frame of
    everything but the D(*), besides the rows of double charm. The rows of D** and of a tau's spin are zero.
    Draws 256 to 294 are used.
    """
    _draw_system(x, table, stream, first_event)
    if table.soft_mass > 0.0 or table.soft_photon > 0.0:
        _vector_decay(x, table)
    else:
        _ground_alone(x, table)
    _second_meson(x, table, stream, first_event)
    if table.source == TO_HADRON:
        _semileptonic(x, table, stream, first_event)
    elif table.source == TO_MUON:
        _to_muon(x, table, stream, first_event)
    else:
        _to_tau(x, table, stream, first_event)
    _lepton_angles(x, table)
    _turn_all(x, table, stream, first_event)


@inlined
def _put(x: Floats, first: int, i: int, px: float, py: float, pz: float, e: float) -> None:
    x[first + i], x[first + LANES + i] = px, py
    x[first + 2 * LANES + i], x[first + 3 * LANES + i] = pz, e


@kernel
def _clear(x: Floats, first: int) -> None:
    for i in range(LANES):
        _put(x, first, i, 0.0, 0.0, 0.0, 0.0)


@kernel
def _draw_system(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Mass of the system, what the partner gives, and the angles of both vector mesons."""
    three = table.kaon_mass > 0.0
    low = table.partner_mass + table.kaon_mass
    span = table.parent_mass - table.charm_mass - low if three else 0.0
    polarised = not three
    whole = table.plus**2 + table.minus**2
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        t = 0.0
        if three:
            position = draw_position(
                table.system_table,
                uniform(key, draw.SYSTEM_INTERVAL),
                uniform(key, draw.SYSTEM_INSIDE),
                uniform(key, draw.SYSTEM_SIDE),
            )
            t = position * (1.0 / INTERVALS)
        mass = low + span * (t * t * (3.0 - 2.0 * t))
        x[_SYSTEM_MASS + i] = mass
        x[_SYSTEM_MOMENTUM + i] = two_body_momentum(table.parent_mass, table.charm_mass, mass)
        x[row.Q2 + i] = mass * mass
        photon = 1.0 if uniform(key, draw.BESIDE_KIND) < table.photon_share else 0.0
        x[_BESIDE_MASS + i] = (1.0 - photon) * table.beside_mass

        # Density of a vector meson's decay: even + spin d², with d² = c² for helicity 0 and (1 - c²)/2 otherwise.
        transverse = 1.0 if uniform(key, draw.HELICITY) < whole else 0.0
        even_v, spin_v = 0.5 * table.soft_photon, 1.0 - 1.5 * table.soft_photon
        even_b, spin_b = 0.5 * photon, 1.0 - 1.5 * photon
        v = even_cosine(
            uniform(key, draw.V_1), uniform(key, draw.V_2), uniform(key, draw.V_3), uniform(key, draw.V_TERM),
            even_v + 0.5 * spin_v * transverse, even_v + spin_v * (1.0 - transverse),
        )  # fmt: skip
        b = even_cosine(
            uniform(key, draw.BESIDE_1), uniform(key, draw.BESIDE_2), uniform(key, draw.BESIDE_3),
            uniform(key, draw.BESIDE_TERM),
            even_b + 0.5 * spin_b * transverse, even_b + spin_b * (1.0 - transverse),
        )  # fmt: skip
        v = v if polarised else 2.0 * uniform(key, draw.V_1) - 1.0
        x[row.COS_V + i] = v
        x[_COS_BESIDE + i] = b

        sin2_v, sin2_b = (1.0 - v) * (1.0 + v), (1.0 - b) * (1.0 + b)
        constant = (
            table.zero**2 * (even_v + spin_v * v * v) * (even_b + spin_b * b * b)
            + whole * (even_v + 0.5 * spin_v * sin2_v) * (even_b + 0.5 * spin_b * sin2_b)
        )  # fmt: skip
        spins = spin_v * spin_b
        once = -spins * table.zero * (table.plus + table.minus) * np.sqrt(sin2_v * sin2_b) * v * b
        twice = 0.5 * spins * table.plus * table.minus * sin2_v * sin2_b
        s, c = sincos_turns(uniform(key, draw.CHI_BASE))
        second = twice * (c * c - s * s)
        u = 4.0 * constant * uniform(key, draw.CHI_QUARTER)
        edge_1 = constant + once * c + second
        edge_2 = edge_1 + constant - once * s - second
        edge_3 = edge_2 + constant - once * c + second
        x[row.COS_CHI + i] = c if u < edge_1 else (-s if u < edge_2 else (-c if u < edge_3 else s))
        x[row.SIN_CHI + i] = s if u < edge_1 else (c if u < edge_2 else (-s if u < edge_3 else -c))


@kernel
def _ground_alone(x: Floats, table: DoubleCharmTable) -> None:
    for i in range(LANES):
        p = x[_SYSTEM_MOMENTUM + i]
        _put(x, row.D_PX, i, 0.0, 0.0, -p, np.sqrt(p * p + table.d_mass**2))
    _clear(x, row.SOFT_PX)


@kernel
def _vector_decay(x: Floats, table: DoubleCharmTable) -> None:
    momentum = two_body_momentum(table.charm_mass, table.d_mass, table.soft_mass)
    d_energy, soft_energy = np.sqrt(momentum**2 + table.d_mass**2), np.sqrt(momentum**2 + table.soft_mass**2)
    for i in range(LANES):
        v = x[row.COS_V + i]
        across = momentum * np.sqrt((1.0 - v) * (1.0 + v))
        px, py, pz = across * x[row.COS_CHI + i], -across * x[row.SIN_CHI + i], -momentum * v
        push = x[_SYSTEM_MOMENTUM + i] / table.charm_mass
        gamma = np.sqrt(1.0 + push * push)
        _put(x, row.D_PX, i, px, py, gamma * pz - push * d_energy, gamma * d_energy - push * pz)
        _put(x, row.SOFT_PX, i, -px, -py, -gamma * pz - push * soft_energy, gamma * soft_energy + push * pz)


@kernel
def _second_meson(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    """KAON, BESIDE_SOFT, and the meson that gives the lepton."""
    if table.kaon_mass == 0.0:
        for i in range(LANES):
            _put(x, row.KAON_PX, i, 0.0, 0.0, 0.0, 0.0)
            p = x[_SYSTEM_MOMENTUM + i]
            _put(x, _MESON_PX, i, 0.0, 0.0, p, np.sqrt(p * p + table.partner_mass**2))
    else:
        for i in range(LANES):
            key = event_key(stream, first_event + np.uint64(i))
            mass, push = x[_SYSTEM_MASS + i], x[_SYSTEM_MOMENTUM + i] / x[_SYSTEM_MASS + i]
            gamma = np.sqrt(1.0 + push * push)
            p = two_body_momentum(mass, table.partner_mass, table.kaon_mass)
            nx, ny, nz = direction(uniform(key, draw.PARTNER_COS), uniform(key, draw.PARTNER_AZIMUTH))
            e, kaon = np.sqrt(p * p + table.partner_mass**2), np.sqrt(p * p + table.kaon_mass**2)
            _put(x, _MESON_PX, i, p * nx, p * ny, gamma * p * nz + push * e, gamma * e + push * p * nz)
            _put(x, row.KAON_PX, i, -p * nx, -p * ny, -gamma * p * nz + push * kaon, gamma * kaon - push * p * nz)
    if table.beside_mass == 0.0:
        _clear(x, row.BESIDE_SOFT_PX)
        return
    strange = table.kaon_mass == 0.0
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        # A D_s* has its decay plane at azimuth 0; a D* that came with a kaon decays isotropically.
        nx, ny, nz = direction(uniform(key, draw.MESON_COS), uniform(key, draw.MESON_AZIMUTH))
        b = x[_COS_BESIDE + i]
        nx, ny, nz = (np.sqrt((1.0 - b) * (1.0 + b)), 0.0, b) if strange else (nx, ny, nz)
        soft_mass = x[_BESIDE_MASS + i]
        p = two_body_momentum(table.partner_mass, table.meson_mass, soft_mass)
        scale = 1.0 / table.partner_mass
        ux, uy, uz = x[_MESON_PX + i] * scale, x[_MESON_PY + i] * scale, x[_MESON_PZ + i] * scale
        gamma = x[_MESON_E + i] * scale
        qx, qy, qz, e = boosted(p * nx, p * ny, p * nz, np.sqrt(p * p + table.meson_mass**2), gamma, ux, uy, uz)
        _put(x, _MESON_PX, i, qx, qy, qz, e)
        qx, qy, qz, e = boosted(-p * nx, -p * ny, -p * nz, np.sqrt(p * p + soft_mass**2), gamma, ux, uy, uz)
        _put(x, row.BESIDE_SOFT_PX, i, qx, qy, qz, e)


@inlined
def _from_meson(
    x: Floats, i: int, mass: float, px: float, py: float, pz: float, e: float
) -> tuple[float, float, float, float]:
    """From the rest frame of the meson that gives the lepton to that of the B."""
    scale = 1.0 / mass
    return boosted(  # type: ignore[no-any-return]
        px,
        py,
        pz,
        e,
        x[_MESON_E + i] * scale,
        x[_MESON_PX + i] * scale,
        x[_MESON_PY + i] * scale,
        x[_MESON_PZ + i] * scale,
    )


@kernel
def _semileptonic(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    mass, hadron, lepton2 = table.meson_mass, table.hadron_mass, table.lepton_mass**2
    span = (mass - hadron) ** 2 - lepton2
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        position = draw_position(
            table.q2_table, uniform(key, draw.Q2_INTERVAL), uniform(key, draw.Q2_INSIDE), uniform(key, draw.Q2_SIDE)
        )
        k = int(position)
        f = position - k
        sine2 = table.angle_table[k, 0] + f * (table.angle_table[k + 1, 0] - table.angle_table[k, 0])
        cosine2 = table.angle_table[k, 1] + f * (table.angle_table[k + 1, 1] - table.angle_table[k, 1])
        odd = table.angle_table[k, 2] + f * (table.angle_table[k + 1, 2] - table.angle_table[k, 2])
        t = position * (1.0 / INTERVALS)
        q2 = lepton2 + span * (t * t * (3.0 - 2.0 * t))
        c = even_cosine(
            uniform(key, draw.THETA_1), uniform(key, draw.THETA_2), uniform(key, draw.THETA_3),
            uniform(key, draw.THETA_TERM), sine2, cosine2,
        )  # fmt: skip
        even = sine2 * (1.0 - c * c) + cosine2 * c * c
        c = c if uniform(key, draw.THETA_SIGN) * (2.0 * even) < even + odd * c else -c

        root = np.sqrt(q2)
        p = two_body_momentum(mass, hadron, root)
        nx, ny, nz = direction(uniform(key, draw.W_COS), uniform(key, draw.W_AZIMUTH))
        own, e = 0.5 * (q2 - lepton2) / root, 0.5 * (q2 + lepton2) / root
        s, cosine = sincos_turns(uniform(key, draw.LEPTON_AZIMUTH))
        across = own * np.sqrt((1.0 - c) * (1.0 + c))
        push = p / root
        gamma = np.sqrt(1.0 + push * push)
        qx, qy, qz = turned_to(nx, ny, nz, across * cosine, across * s, gamma * own * c + push * e)
        px, py, pz, energy = _from_meson(x, i, mass, qx, qy, qz, gamma * e + push * own * c)
        _put(x, row.LEPTON_PX, i, px, py, pz, energy)
        px, py, pz, energy = _from_meson(x, i, mass, -p * nx, -p * ny, -p * nz, np.sqrt(p * p + hadron * hadron))
        _put(x, row.HADRON_PX, i, px, py, pz, energy)
    _clear(x, row.TAU_PX)


@kernel
def _to_muon(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    e = 0.5 * (table.meson_mass**2 + table.lepton_mass**2) / table.meson_mass
    p = 0.5 * (table.meson_mass**2 - table.lepton_mass**2) / table.meson_mass
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        nx, ny, nz = direction(uniform(key, draw.W_COS), uniform(key, draw.W_AZIMUTH))
        px, py, pz, energy = _from_meson(x, i, table.meson_mass, p * nx, p * ny, p * nz, e)
        _put(x, row.LEPTON_PX, i, px, py, pz, energy)
    _clear(x, row.TAU_PX)
    _clear(x, row.HADRON_PX)


@kernel
def _to_tau(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    e = 0.5 * (table.meson_mass**2 + TAU_MASS**2) / table.meson_mass
    p = 0.5 * (table.meson_mass**2 - TAU_MASS**2) / table.meson_mass
    gamma, push = e / TAU_MASS, p / TAU_MASS
    mass = table.visible_mass
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        nx, ny, nz = direction(uniform(key, draw.W_COS), uniform(key, draw.W_AZIMUTH))
        px, py, pz, energy = _from_meson(x, i, table.meson_mass, p * nx, p * ny, p * nz, e)
        _put(x, row.TAU_PX, i, px, py, pz, energy)
        position = draw_position(
            table.visible_table,
            uniform(key, draw.VISIBLE_INTERVAL),
            uniform(key, draw.VISIBLE_INSIDE),
            uniform(key, draw.VISIBLE_SIDE),
        )
        t = position * (1.0 / table.visible_table.shape[0])
        own = mass + table.visible_span * t * t
        momentum, even, odd = emission(own, mass)
        c = 2.0 * uniform(key, draw.VISIBLE_COS) - 1.0
        # polarisation 1 along the flight of the tau
        c = c if 2.0 * uniform(key, draw.VISIBLE_FLIP) < 1.0 - odd / even * c else -c
        s, cosine = sincos_turns(uniform(key, draw.VISIBLE_AZIMUTH))
        across, along = momentum * np.sqrt((1.0 - c) * (1.0 + c)), momentum * c
        qx, qy, qz = turned_to(nx, ny, nz, across * cosine, across * s, gamma * along + push * own)
        px, py, pz, energy = _from_meson(x, i, table.meson_mass, qx, qy, qz, gamma * own + push * along)
        _put(x, row.LEPTON_PX, i, px, py, pz, energy)
    _clear(x, row.HADRON_PX)


@kernel
def _lepton_angles(x: Floats, table: DoubleCharmTable) -> None:
    """COS_THETA, and chi from the azimuths of lepton and D; the angle drawn before was against the D_s*'s plane."""
    for i in range(LANES):
        push = x[_SYSTEM_MOMENTUM + i] / x[_SYSTEM_MASS + i]
        gamma = np.sqrt(1.0 + push * push)
        px, py = x[row.LEPTON_PX + i], x[row.LEPTON_PY + i]
        pz = gamma * x[row.LEPTON_PZ + i] - push * x[row.LEPTON_E + i]
        square = px * px + py * py
        x[row.COS_THETA + i] = pz / np.sqrt(square + pz * pz)
        across = np.sqrt(square)
        c, s = px / across, py / across
        # phi of the D is minus the drawn angle
        cd, sd = x[row.COS_CHI + i], -x[row.SIN_CHI + i]
        x[row.COS_CHI + i] = c * cd + s * sd
        x[row.SIN_CHI + i] = s * cd - c * sd


@kernel
def _turn_all(x: Floats, table: DoubleCharmTable, stream: np.uint64, first_event: np.uint64) -> None:
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        r = rotation(
            uniform(key, draw.ROTATION_COS), uniform(key, draw.ROTATION_AZIMUTH), uniform(key, draw.ROTATION_SPIN)
        )
        for first in (
            row.D_PX, row.SOFT_PX, row.TAU_PX, row.LEPTON_PX, row.BESIDE_SOFT_PX, row.KAON_PX, row.HADRON_PX
        ):  # fmt: skip
            px, py, pz = x[first + i], x[first + LANES + i], x[first + 2 * LANES + i]
            x[first + i] = r[0] * px + r[1] * py + r[2] * pz
            x[first + LANES + i] = r[3] * px + r[4] * py + r[5] * pz
            x[first + 2 * LANES + i] = r[6] * px + r[7] * py + r[8] * pz
    for first in (
        row.NODE, row.VISIBLE_E, row.VISIBLE_X, row.VISIBLE_Y, row.VISIBLE_Z,
        row.POLARISATION_X, row.POLARISATION_Y, row.POLARISATION_Z, row.CHARM_MASS, row.MASS_POINT, row.LIGHT_MASS,
    ):  # fmt: skip
        for i in range(LANES):
            x[first + i] = 0.0
    for first in (row.PION_PX, row.PION2_PX, row.PARTNER1_PX, row.PARTNER2_PX):
        _clear(x, first)
