"""True decays, 256 at a time: B -> charm lepton nu with every spin correlation, as four-momenta in the B rest frame.

Nothing is rejected and nothing is weighted. The joint density is drawn as a chain of exact conditionals:

- mass of a broad charm state, and of a pair of pions: `charm_masses.py`.
- q²: alias table (`alias.py`).
- cos(theta), and cos(theta_V): the even part is a mixture of sin² and cos² terms (`cosines.py`). An odd part comes
  from choosing the sign with the odds of the density at c and -c.
- chi: the density is a trigonometric polynomial up to 2 chi. Its values at four angles a quarter turn apart have a sum
  that does not depend on the base angle, so a uniform base angle and a choice among the four are exact.
- cos(theta_V) and chi of a spin-2 meson together: `tensor_angles.py`.
- tau daughter: energy from an alias table, direction isotropic, then reversed with the odds of the density at n and -n;
  the density is linear in n.P, so this is exact.
- the whole event is turned by a uniformly distributed rotation, since the B has no spin.

Loops over lanes hold arithmetic only and vectorise; table look-ups have a loop of their own.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import sincos_turns
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draw
from .alias import draw_position, draw_position_in
from .channel_table import BROAD_INTERVALS, Q2_INTERVALS, VECTOR, VISIBLE_INTERVALS, ChannelTable
from .charm_masses import draw_masses
from .charm_spin import ONE_UNIT, CharmSpin
from .cosines import even_cosine
from .hadronic_tau import draw_hadrons
from .momenta import fill_momenta, rotation
from .spin_algebra import both_waves, helicity_states, lepton_terms, spin_density, square
from .tau_decay import emission
from .tensor_angles import tensor_direction

Floats = npt.NDArray[np.float64]

_FIRST_AMPLITUDE = row.SCRATCH_6


@kernel
def draw_decays(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Fill the truth rows of a block with 256 decays of one chain, B at rest.

    x : block, see `block.py`; the scratch rows are overwritten. table : from `channel_table`.
    stream : from `core.streams.stream_key`; first_event : uint64 number of the first event.
    Events depend on (stream, event number) and the table only. Draws 0 to 46 of `draw_numbers.py` are used.
    """
    light_mass = table.soft_mass if table.chain == VECTOR else table.pion_mass
    draw_masses(x, table.masses, table.charm_mass, light_mass, stream, first_event)
    _draw_intervals(x, stream, first_event)
    _look_up(x, table.intervals, table.q2_table, table.visible_table, table.amplitudes)
    real, one_unit = table.amplitudes.shape[1] == 4, table.spin.wave == ONE_UNIT
    _fill_q2(x, table)
    if real and one_unit:
        _draw_angles(x, table, stream, first_event)
    elif real:
        _draw_tensor_angles(x, table, stream, first_event)
    elif one_unit:
        _draw_angles_complex(x, table, stream, first_event)
    else:
        _draw_tensor_angles_complex(x, table, stream, first_event)
    if table.has_tau:
        if real:
            _polarise(x, table)
        else:
            _polarise_complex(x, table)
        if table.hadrons.pions > 0:
            draw_hadrons(x, table.hadrons, stream, first_event)
        else:
            _draw_visible(x, table, stream, first_event)
    fill_momenta(x, table, stream, first_event)


@kernel
def _draw_intervals(x: Floats, stream: np.uint64, first_event: np.uint64) -> None:
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        x[row.SCRATCH_0 + i] = uniform(key, draw.Q2_INTERVAL)
        x[row.SCRATCH_1 + i] = uniform(key, draw.Q2_INSIDE)
        x[row.SCRATCH_2 + i] = uniform(key, draw.Q2_SIDE)
        x[row.SCRATCH_3 + i] = uniform(key, draw.VISIBLE_INTERVAL)
        x[row.SCRATCH_4 + i] = uniform(key, draw.VISIBLE_INSIDE)
        x[row.SCRATCH_5 + i] = uniform(key, draw.VISIBLE_SIDE)


@kernel
def _look_up(x: Floats, intervals: int, q2_table: Floats, visible_table: Floats, amplitudes: Floats) -> None:
    """row.NODE, row.VISIBLE_E (as a position in its table) and the amplitudes: gathers, so scalar code."""
    columns = amplitudes.shape[1]
    for i in range(LANES):
        x[row.VISIBLE_E + i] = draw_position(
            visible_table, x[row.SCRATCH_3 + i], x[row.SCRATCH_4 + i], x[row.SCRATCH_5 + i]
        )
        point = int(x[row.MASS_POINT + i])
        x[row.NODE + i] = point * (intervals + 2) + draw_position_in(
            q2_table, point * intervals, intervals, x[row.SCRATCH_0 + i], x[row.SCRATCH_1 + i], x[row.SCRATCH_2 + i]
        )
    if columns == 4:
        for i in range(LANES):
            k = int(x[row.NODE + i])
            f = x[row.NODE + i] - k
            for column in range(4):
                low = amplitudes[k, column]
                x[_FIRST_AMPLITUDE + column * LANES + i] = low + f * (amplitudes[k + 1, column] - low)
    else:
        for i in range(LANES):
            k = int(x[row.NODE + i])
            f = x[row.NODE + i] - k
            for column in range(16):
                low = amplitudes[k, column]
                x[_FIRST_AMPLITUDE + column * LANES + i] = low + f * (amplitudes[k + 1, column] - low)


@inlined
def _real_amplitudes(x: Floats, i: int) -> tuple[float, ...]:
    """J_+, J_-, J_0, J_t, S, T_+, T_-, T_0 of lane i."""
    a = _FIRST_AMPLITUDE + i
    return x[a], x[a + LANES], x[a + 2 * LANES], x[a + 3 * LANES], 0.0, 0.0, 0.0, 0.0


@inlined
def _complex_amplitudes(x: Floats, i: int) -> tuple[complex, ...]:
    a = _FIRST_AMPLITUDE + i
    return (
        x[a] + 1j * x[a + LANES],
        x[a + 2 * LANES] + 1j * x[a + 3 * LANES],
        x[a + 4 * LANES] + 1j * x[a + 5 * LANES],
        x[a + 6 * LANES] + 1j * x[a + 7 * LANES],
        x[a + 8 * LANES] + 1j * x[a + 9 * LANES],
        x[a + 10 * LANES] + 1j * x[a + 11 * LANES],
        x[a + 12 * LANES] + 1j * x[a + 13 * LANES],
        x[a + 14 * LANES] + 1j * x[a + 15 * LANES],
    )


@inlined
def _lane_theta(x: Floats, i: int, key: np.uint64, table: ChannelTable, J: Any) -> tuple[Any, ...]:
    """Draws cos(theta) of lane i from its eight amplitudes J; gives its `helicity_states`."""
    ap, am, a0, bp, bm, b0, t = lepton_terms(table.lepton_mass / np.sqrt(x[row.Q2 + i]), *J)
    straight = square(ap) + square(am)
    sin2 = 0.5 * straight + square(a0) + 0.5 * (square(bp) + square(bm)) + square(t)
    cos2 = straight + square(b0) + square(t)
    c = even_cosine(
        uniform(key, draw.THETA_1),
        uniform(key, draw.THETA_2),
        uniform(key, draw.THETA_3),
        uniform(key, draw.THETA_TERM),
        sin2,
        cos2,
    )
    even = sin2 * (1.0 - c * c) + cos2 * c * c
    odd = c * (square(am) - square(ap) + 2.0 * (t * np.conj(b0)).real)
    c = c if uniform(key, draw.THETA_SIGN) * (2.0 * even) < even + odd else -c
    x[row.COS_THETA + i] = c
    return helicity_states(c, ap, am, a0, bp, bm, b0, t)  # type: ignore[no-any-return]


@inlined
def _lane_angles(x: Floats, i: int, key: np.uint64, spin: CharmSpin, states: Any) -> None:
    """cos(theta_V) and chi of lane i."""
    kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus = states
    incoherent, coherent = spin.incoherent, spin.coherent
    transverse = square(kp_minus) + square(km_minus) + square(kp_plus) + square(km_plus)
    longitudinal = square(k0_minus) + square(k0_plus)
    flat = incoherent * (transverse + longitudinal)
    v = even_cosine(
        uniform(key, draw.V_1),
        uniform(key, draw.V_2),
        uniform(key, draw.V_3),
        uniform(key, draw.V_TERM),
        flat + coherent * 0.5 * transverse,
        flat + coherent * longitudinal,
    )
    sin2_v = (1.0 - v) * (1.0 + v)
    zero_one = (
        kp_minus * np.conj(k0_minus)
        - k0_minus * np.conj(km_minus)
        + kp_plus * np.conj(k0_plus)
        - k0_plus * np.conj(km_plus)
    )
    plus_minus = kp_minus * np.conj(km_minus) + kp_plus * np.conj(km_plus)
    once = coherent * v * np.sqrt(2.0 * sin2_v)
    twice = coherent * -sin2_v
    constant = flat + coherent * (0.5 * sin2_v * transverse + v * v * longitudinal)
    sin_chi, cos_chi = sincos_turns(uniform(key, draw.CHI_BASE))
    first = once * (zero_one.real * cos_chi - zero_one.imag * sin_chi)
    quarter = -once * (zero_one.real * sin_chi + zero_one.imag * cos_chi)
    second = twice * (
        plus_minus.real * (cos_chi * cos_chi - sin_chi * sin_chi) - 2.0 * plus_minus.imag * cos_chi * sin_chi
    )
    # densities at chi, chi + 90, 180, 270 degrees: constant + first + second, constant + quarter - second, ...
    u = 4.0 * constant * uniform(key, draw.CHI_QUARTER)
    edge_1 = constant + first + second
    edge_2 = edge_1 + constant + quarter - second
    edge_3 = edge_2 + constant - first + second
    turned_cos = cos_chi if u < edge_1 else (-sin_chi if u < edge_2 else (-cos_chi if u < edge_3 else sin_chi))
    turned_sin = sin_chi if u < edge_1 else (cos_chi if u < edge_2 else (-sin_chi if u < edge_3 else -cos_chi))
    x[row.COS_V + i] = v
    x[row.COS_CHI + i] = turned_cos
    x[row.SIN_CHI + i] = turned_sin


@kernel
def _fill_q2(x: Floats, table: ChannelTable) -> None:
    if table.masses.points == 1:
        for i in range(LANES):
            t = x[row.NODE + i] * (1.0 / Q2_INTERVALS)
            x[row.Q2 + i] = table.q2_min + table.q2_span * (t * t * (3.0 - 2.0 * t))
        return
    stride = table.intervals + 2.0
    for i in range(LANES):
        t = (x[row.NODE + i] - stride * x[row.MASS_POINT + i]) * (1.0 / BROAD_INTERVALS)
        end = table.parent_mass - x[row.CHARM_MASS + i]
        x[row.Q2 + i] = table.q2_min + (end * end - table.q2_min) * (t * t * (3.0 - 2.0 * t))


@inlined
def _all_angles(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64, amplitudes: Any) -> None:
    """amplitudes : `_real_amplitudes` or `_complex_amplitudes`."""
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        _lane_angles(x, i, key, table.spin, _lane_theta(x, i, key, table, amplitudes(x, i)))


@inlined
def _all_tensor_angles(
    x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64, amplitudes: Any, density: Any
) -> None:
    """As `_all_angles`. density : `spin_density`, or `both_waves` with complex amplitudes."""
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        states = _lane_theta(x, i, key, table, amplitudes(x, i))
        turn = rotation(uniform(key, draw.V_1), uniform(key, draw.V_2), uniform(key, draw.V_3))
        v, cos_chi, sin_chi = tensor_direction(turn, uniform(key, draw.V_TERM), table.spin, density, states)
        x[row.COS_V + i] = v
        x[row.COS_CHI + i] = cos_chi
        x[row.SIN_CHI + i] = sin_chi


@kernel
def _draw_angles(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    _all_angles(x, table, stream, first_event, _real_amplitudes)


@kernel
def _draw_angles_complex(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    _all_angles(x, table, stream, first_event, _complex_amplitudes)


@kernel
def _draw_tensor_angles(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    _all_tensor_angles(x, table, stream, first_event, _real_amplitudes, spin_density)


@kernel
def _draw_tensor_angles_complex(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    _all_tensor_angles(x, table, stream, first_event, _complex_amplitudes, both_waves)


@inlined
def _lane_polarisation(x: Floats, i: int, table: ChannelTable, J: Any, density: Any) -> None:
    states = helicity_states(x[row.COS_THETA + i], *lepton_terms(table.lepton_mass / np.sqrt(x[row.Q2 + i]), *J))
    trace, px, py, pz = density(table.spin, x[row.COS_V + i], x[row.COS_CHI + i], x[row.SIN_CHI + i], *states)
    x[row.POLARISATION_X + i] = px / trace
    x[row.POLARISATION_Y + i] = py / trace
    x[row.POLARISATION_Z + i] = pz / trace


@kernel
def _polarise(x: Floats, table: ChannelTable) -> None:
    for i in range(LANES):
        _lane_polarisation(x, i, table, _real_amplitudes(x, i), spin_density)


@kernel
def _polarise_complex(x: Floats, table: ChannelTable) -> None:
    for i in range(LANES):
        _lane_polarisation(x, i, table, _complex_amplitudes(x, i), both_waves)


@kernel
def _draw_visible(x: Floats, table: ChannelTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Energy and direction of the tau's charged daughter in the tau rest frame."""
    mass, one_neutrino = table.visible_mass, table.one_neutrino > 0.0
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        position = x[row.VISIBLE_E + i] * (1.0 / VISIBLE_INTERVALS)
        position = 1.0 if one_neutrino else position
        energy = mass + table.visible_span * position * position
        _, even, odd = emission(energy, mass)
        analysing = -1.0 if one_neutrino else odd / even
        nz = 2.0 * uniform(key, draw.VISIBLE_COS) - 1.0
        sine, cosine = sincos_turns(uniform(key, draw.VISIBLE_AZIMUTH))
        across = np.sqrt((1.0 - nz) * (1.0 + nz))
        nx, ny = across * cosine, across * sine
        projection = nx * x[row.POLARISATION_X + i] + ny * x[row.POLARISATION_Y + i] + nz * x[row.POLARISATION_Z + i]
        sign = 1.0 if 2.0 * uniform(key, draw.VISIBLE_FLIP) < 1.0 - analysing * projection else -1.0
        x[row.VISIBLE_E + i] = energy
        x[row.VISIBLE_X + i] = sign * nx
        x[row.VISIBLE_Y + i] = sign * ny
        x[row.VISIBLE_Z + i] = sign * nz
