"""Four-momenta of a drawn decay: boosts from the rest frames to the B rest frame, then one rotation of the event.

Before the rotation: W* along +z, lepton in the xz plane (phi = 0), so the charm plane lies at azimuth -chi.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draw
from .channel_table import GROUND, ORBITAL_VECTOR, VECTOR, ChannelTable
from .cosines import even_cosine
from .pion_pair import split_pair
from .tau_decay import TAU_MASS

Floats = npt.NDArray[np.float64]

_W_MOMENTUM = row.SCRATCH_9  # |p| of the W* and of the charm hadron in the B frame


@kernel
def fill_momenta(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Fill the momentum rows of a block whose angles are drawn; the scratch rows are overwritten."""
    _draw_rotation(x, stream, first_event)
    _fill_w_momentum(x, table.parent_mass)
    if table.chain == GROUND:
        _charm_is_d(x, table)
    elif table.chain == ORBITAL_VECTOR:
        _cascade(x, table, stream, first_event)
    else:
        _two_body(x, table)
    if table.masses.pair == 1:
        split_pair(x, table.masses.first_pion, table.masses.second_pion, stream, first_event)
    else:
        _clear_second_pion(x)
    if table.has_tau and table.hadrons.pions > 0:
        _tau_and_pions(x, table)
        return
    _clear_rows(x, row.PARTNER1_PX, 8)
    if table.has_tau:
        _tau_and_daughter(x, table)
    else:
        _lepton(x, table)


@inlined
def rotation(u_cos: float, u_azimuth: float, u_spin: float) -> tuple[float, ...]:
    """Row-major 3x3 matrix, uniform over all rotations: about z, then tilt about y, then about z."""
    c = 2.0 * u_cos - 1.0
    s = np.sqrt((1.0 - c) * (1.0 + c))
    sa, ca = sincos_turns(u_azimuth)
    sg, cg = sincos_turns(u_spin)
    return (
        ca * c * cg - sa * sg, -ca * c * sg - sa * cg, ca * s,
        sa * c * cg + ca * sg, -sa * c * sg + ca * cg, sa * s,
        -s * cg, s * sg, c,
    )  # fmt: skip


@kernel
def _draw_rotation(x: Floats, stream: np.uint64, first_event: np.uint64) -> None:
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        r = rotation(
            uniform(key, draw.ROTATION_COS), uniform(key, draw.ROTATION_AZIMUTH), uniform(key, draw.ROTATION_SPIN)
        )
        x[row.SCRATCH_0 + i], x[row.SCRATCH_1 + i], x[row.SCRATCH_2 + i] = r[0], r[1], r[2]
        x[row.SCRATCH_3 + i], x[row.SCRATCH_4 + i], x[row.SCRATCH_5 + i] = r[3], r[4], r[5]
        x[row.SCRATCH_6 + i], x[row.SCRATCH_7 + i], x[row.SCRATCH_8 + i] = r[6], r[7], r[8]


@inlined
def _turn(x: Floats, i: int, px: float, py: float, pz: float) -> tuple[float, float, float]:
    """Apply the rotation of lane i."""
    return (
        x[row.SCRATCH_0 + i] * px + x[row.SCRATCH_1 + i] * py + x[row.SCRATCH_2 + i] * pz,
        x[row.SCRATCH_3 + i] * px + x[row.SCRATCH_4 + i] * py + x[row.SCRATCH_5 + i] * pz,
        x[row.SCRATCH_6 + i] * px + x[row.SCRATCH_7 + i] * py + x[row.SCRATCH_8 + i] * pz,
    )


@inlined
def two_body_momentum(mass: float, one: float, other: float) -> float:
    """|p| of the products in the rest frame of a particle of `mass` (GeV)."""
    product = (mass - one - other) * (mass + one + other) * (mass - one + other) * (mass + one - other)
    return np.sqrt(max(product, 0.0)) / (2.0 * mass)  # type: ignore[no-any-return]


@kernel
def _fill_w_momentum(x: Floats, parent: float) -> None:
    for i in range(LANES):
        charm = x[row.CHARM_MASS + i]
        end, other_end = (parent - charm) ** 2, (parent + charm) ** 2
        product = (end - x[row.Q2 + i]) * (other_end - x[row.Q2 + i])
        x[_W_MOMENTUM + i] = np.sqrt(max(product, 0.0)) / (2.0 * parent)


@inlined
def _charm_energy(x: Floats, i: int) -> float:
    p, m = x[_W_MOMENTUM + i], x[row.CHARM_MASS + i]
    return np.sqrt(p * p + m * m)  # type: ignore[no-any-return]


@kernel
def _charm_is_d(x: Floats, table: ChannelTable) -> None:
    for i in range(LANES):
        px, py, pz = _turn(x, i, 0.0, 0.0, -x[_W_MOMENTUM + i])
        x[row.D_PX + i], x[row.D_PY + i], x[row.D_PZ + i], x[row.D_E + i] = px, py, pz, _charm_energy(x, i)
    _clear_soft(x)
    _clear_pion(x)


@kernel
def _clear_soft(x: Floats) -> None:
    for i in range(LANES):
        x[row.SOFT_PX + i] = x[row.SOFT_PY + i] = x[row.SOFT_PZ + i] = x[row.SOFT_E + i] = 0.0


@kernel
def _clear_pion(x: Floats) -> None:
    for i in range(LANES):
        x[row.PION_PX + i] = x[row.PION_PY + i] = x[row.PION_PZ + i] = x[row.PION_E + i] = 0.0


@kernel
def _clear_rows(x: Floats, first: int, rows: int) -> None:
    """Rows of particles that a chain does not have are zero."""
    for i in range(rows * LANES):
        x[first + i] = 0.0


@kernel
def _clear_second_pion(x: Floats) -> None:
    for i in range(LANES):
        x[row.PION2_PX + i] = x[row.PION2_PY + i] = x[row.PION2_PZ + i] = x[row.PION2_E + i] = 0.0


@inlined
def _daughter_direction(x: Floats, i: int) -> tuple[float, float, float]:
    """Of the D (or D* of a D**) in the charm rest frame, axes of the unturned event."""
    v = x[row.COS_V + i]
    s = np.sqrt((1.0 - v) * (1.0 + v))
    return s * x[row.COS_CHI + i], -s * x[row.SIN_CHI + i], -v


@kernel
def _two_body(x: Floats, table: ChannelTable) -> None:
    """Charm -> D soft, or D** -> D pion (or pair of pions)."""
    if table.chain == VECTOR:
        _clear_pion(x)
    else:
        _clear_soft(x)
    for i in range(LANES):
        nx, ny, nz = _daughter_direction(x, i)
        mass, light = x[row.CHARM_MASS + i], x[row.LIGHT_MASS + i]
        momentum = two_body_momentum(mass, table.d_mass, light)
        d_energy, light_energy = np.sqrt(momentum**2 + table.d_mass**2), np.sqrt(momentum**2 + light**2)
        gamma_beta = x[_W_MOMENTUM + i] / mass
        gamma = _charm_energy(x, i) / mass
        px, py, along = momentum * nx, momentum * ny, momentum * nz
        d = _turn(x, i, px, py, gamma * along - gamma_beta * d_energy)
        x[row.D_PX + i], x[row.D_PY + i], x[row.D_PZ + i] = d[0], d[1], d[2]
        x[row.D_E + i] = gamma * d_energy - gamma_beta * along
        other = _turn(x, i, -px, -py, -gamma * along - gamma_beta * light_energy)
        x[row.SCRATCH_10 + i], x[row.SCRATCH_11 + i], x[row.SCRATCH_12 + i] = other[0], other[1], other[2]
        x[row.SCRATCH_13 + i] = gamma * light_energy + gamma_beta * along
    if table.chain == VECTOR:
        _copy_light_to_soft(x)
    else:
        _copy_light_to_pion(x)


@kernel
def _copy_light_to_soft(x: Floats) -> None:
    for i in range(LANES):
        x[row.SOFT_PX + i], x[row.SOFT_PY + i] = x[row.SCRATCH_10 + i], x[row.SCRATCH_11 + i]
        x[row.SOFT_PZ + i], x[row.SOFT_E + i] = x[row.SCRATCH_12 + i], x[row.SCRATCH_13 + i]


@kernel
def _copy_light_to_pion(x: Floats) -> None:
    for i in range(LANES):
        x[row.PION_PX + i], x[row.PION_PY + i] = x[row.SCRATCH_10 + i], x[row.SCRATCH_11 + i]
        x[row.PION_PZ + i], x[row.PION_E + i] = x[row.SCRATCH_12 + i], x[row.SCRATCH_13 + i]


@kernel
def _cascade(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    """D** -> D* pion (or pair of pions) along the drawn direction, D* -> D soft by the alignment of the D* alone.

    The spin of the D** is averaged over for the latter.
    """
    across2, along2 = 1.0, 1.0 + table.spin.alignment
    inner = two_body_momentum(table.vector_mass, table.d_mass, table.soft_mass)
    d_energy, soft_energy = np.sqrt(inner**2 + table.d_mass**2), np.sqrt(inner**2 + table.soft_mass**2)
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        nx, ny, nz = _daughter_direction(x, i)
        mass, light = x[row.CHARM_MASS + i], x[row.LIGHT_MASS + i]
        outer = two_body_momentum(mass, table.vector_mass, light)
        pion_energy = np.sqrt(outer**2 + light**2)
        vector_gamma = np.sqrt(outer**2 + table.vector_mass**2) / table.vector_mass
        vector_gamma_beta = outer / table.vector_mass
        gamma_beta = x[_W_MOMENTUM + i] / mass
        gamma = _charm_energy(x, i) / mass
        pion = _turn(x, i, -outer * nx, -outer * ny, -gamma * outer * nz - gamma_beta * pion_energy)
        x[row.PION_PX + i], x[row.PION_PY + i], x[row.PION_PZ + i] = pion[0], pion[1], pion[2]
        x[row.PION_E + i] = gamma * pion_energy + gamma_beta * outer * nz

        c = even_cosine(
            uniform(key, draw.SOFT_1),
            uniform(key, draw.SOFT_2),
            uniform(key, draw.SOFT_3),
            uniform(key, draw.SOFT_TERM),
            across2,
            along2,
        )
        sine, cosine = sincos_turns(uniform(key, draw.SOFT_AZIMUTH))
        v, cos_chi, sin_chi = x[row.COS_V + i], x[row.COS_CHI + i], x[row.SIN_CHI + i]
        across = np.sqrt((1.0 - c) * (1.0 + c))
        # on n, n' = (v cos chi, -v sin chi, s) and n x n'
        first, second = across * cosine, across * sine
        mx = c * nx + first * v * cos_chi + second * sin_chi
        my = c * ny - first * v * sin_chi + second * cos_chi
        mz = c * nz + first * np.sqrt((1.0 - v) * (1.0 + v))
        along = inner * c
        # boost along n: p + [(gamma - 1) p.n + gamma beta E] n
        push = (vector_gamma - 1.0) * along + vector_gamma_beta * d_energy
        px, py, pz = inner * mx + push * nx, inner * my + push * ny, inner * mz + push * nz
        energy = vector_gamma * d_energy + vector_gamma_beta * along
        d = _turn(x, i, px, py, gamma * pz - gamma_beta * energy)
        x[row.D_PX + i], x[row.D_PY + i], x[row.D_PZ + i] = d[0], d[1], d[2]
        x[row.D_E + i] = gamma * energy - gamma_beta * pz

        push = -(vector_gamma - 1.0) * along + vector_gamma_beta * soft_energy
        px, py, pz = -inner * mx + push * nx, -inner * my + push * ny, -inner * mz + push * nz
        energy = vector_gamma * soft_energy - vector_gamma_beta * along
        soft = _turn(x, i, px, py, gamma * pz - gamma_beta * energy)
        x[row.SOFT_PX + i], x[row.SOFT_PY + i], x[row.SOFT_PZ + i] = soft[0], soft[1], soft[2]
        x[row.SOFT_E + i] = gamma * energy - gamma_beta * pz


@inlined
def from_w_frame(
    x: Floats, i: int, table: ChannelTable, px: float, py: float, pz: float, energy: float
) -> tuple[float, float, float, float]:
    """(px, py, pz, E) in the turned B frame of a vector in the W* rest frame of lane i."""
    root = np.sqrt(x[row.Q2 + i])
    gamma, gamma_beta = (table.parent_mass - _charm_energy(x, i)) / root, x[_W_MOMENTUM + i] / root
    turned = _turn(x, i, px, py, gamma * pz + gamma_beta * energy)
    return turned[0], turned[1], turned[2], gamma * energy + gamma_beta * pz


@inlined
def from_tau_frame(
    x: Floats, i: int, table: ChannelTable, side: float, up: float, along: float, energy: float
) -> tuple[float, float, float, float]:
    """(px, py, pz, E) in the turned B frame of a vector on x', y', z' of the tau rest frame of lane i."""
    c = x[row.COS_THETA + i]
    s = np.sqrt((1.0 - c) * (1.0 + c))
    scale = 0.5 / (np.sqrt(x[row.Q2 + i]) * TAU_MASS)
    gamma, gamma_beta = (x[row.Q2 + i] + TAU_MASS**2) * scale, (x[row.Q2 + i] - TAU_MASS**2) * scale
    forward = gamma * along + gamma_beta * energy
    # theta-hat = (c, 0, -s), phi-hat = y, n = (s, 0, c)
    px, py, pz, boosted = from_w_frame(
        x, i, table, s * forward + c * side, up, c * forward - s * side, gamma * energy + gamma_beta * along
    )
    return px, py, pz, boosted


@kernel
def _lepton(x: Floats, table: ChannelTable) -> None:
    """The light lepton; the tau rows are cleared."""
    mass2 = table.lepton_mass**2
    for i in range(LANES):
        scale, c = 0.5 / np.sqrt(x[row.Q2 + i]), x[row.COS_THETA + i]
        own, momentum = (x[row.Q2 + i] + mass2) * scale, (x[row.Q2 + i] - mass2) * scale
        across = momentum * np.sqrt((1.0 - c) * (1.0 + c))
        px, py, pz, energy = from_w_frame(x, i, table, across, 0.0, momentum * c, own)
        x[row.LEPTON_PX + i], x[row.LEPTON_PY + i], x[row.LEPTON_PZ + i], x[row.LEPTON_E + i] = px, py, pz, energy
        x[row.TAU_PX + i] = x[row.TAU_PY + i] = x[row.TAU_PZ + i] = x[row.TAU_E + i] = 0.0


@kernel
def _tau_and_daughter(x: Floats, table: ChannelTable) -> None:
    mass = table.visible_mass
    for i in range(LANES):
        px, py, pz, energy = from_tau_frame(x, i, table, 0.0, 0.0, 0.0, TAU_MASS)
        x[row.TAU_PX + i], x[row.TAU_PY + i], x[row.TAU_PZ + i], x[row.TAU_E + i] = px, py, pz, energy
    for i in range(LANES):
        own = x[row.VISIBLE_E + i]
        momentum = np.sqrt((own - mass) * (own + mass))
        side, up, along = (
            momentum * x[row.VISIBLE_X + i],
            momentum * x[row.VISIBLE_Y + i],
            momentum * x[row.VISIBLE_Z + i],
        )
        px, py, pz, energy = from_tau_frame(x, i, table, side, up, along, own)
        x[row.LEPTON_PX + i], x[row.LEPTON_PY + i], x[row.LEPTON_PZ + i], x[row.LEPTON_E + i] = px, py, pz, energy


@kernel
def _tau_and_pions(x: Floats, table: ChannelTable) -> None:
    """The LEPTON and PARTNER rows come in the tau rest frame, on the axes x', y', z'."""
    for i in range(LANES):
        px, py, pz, energy = from_tau_frame(x, i, table, 0.0, 0.0, 0.0, TAU_MASS)
        x[row.TAU_PX + i], x[row.TAU_PY + i], x[row.TAU_PZ + i], x[row.TAU_E + i] = px, py, pz, energy
    for i in range(LANES):
        px, py, pz, energy = from_tau_frame(
            x, i, table, x[row.LEPTON_PX + i], x[row.LEPTON_PY + i], x[row.LEPTON_PZ + i], x[row.LEPTON_E + i]
        )
        x[row.LEPTON_PX + i], x[row.LEPTON_PY + i], x[row.LEPTON_PZ + i], x[row.LEPTON_E + i] = px, py, pz, energy
    for i in range(LANES):
        px, py, pz, energy = from_tau_frame(
            x, i, table, x[row.PARTNER1_PX + i], x[row.PARTNER1_PY + i], x[row.PARTNER1_PZ + i], x[row.PARTNER1_E + i]
        )
        x[row.PARTNER1_PX + i], x[row.PARTNER1_PY + i] = px, py
        x[row.PARTNER1_PZ + i], x[row.PARTNER1_E + i] = pz, energy
    if table.hadrons.pions == 3:
        for i in range(LANES):
            px, py, pz, energy = from_tau_frame(
                x,
                i,
                table,
                x[row.PARTNER2_PX + i],
                x[row.PARTNER2_PY + i],
                x[row.PARTNER2_PZ + i],
                x[row.PARTNER2_E + i],
            )
            x[row.PARTNER2_PX + i], x[row.PARTNER2_PY + i] = px, py
            x[row.PARTNER2_PZ + i], x[row.PARTNER2_E + i] = pz, energy
