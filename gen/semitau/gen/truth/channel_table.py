"""What the truth kernel needs of one decay chain: numbers and tables, ready for compiled loops.

q² runs over a position t in [0, 1], q² = q²_min + (q²_max - q²_min) t² (3 - 2t), which tames both end points.
Amplitudes are tabulated at nodes in t, Q2_INTERVALS + 1 of them, times sqrt(q²) (then none of them diverges at small
q²), and read with linear interpolation. A common factor drops out of every angular density. A broad state has tables of
BROAD_INTERVALS at each mass point, one behind the other.
"""

from __future__ import annotations

from functools import lru_cache, partial
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.errors import InputError, Problem

from ..decays.amplitudes import HelicityAmplitudes, helicity_amplitudes
from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.line_shapes import has_line_shape, mass_density
from .alias import interval_table, interval_tables
from .charm_masses import MassTable, mass_table, point_masses
from .charm_spin import ISOTROPIC, TWO_UNITS_TO_VECTOR, CharmSpin, spin_of_orbital, spin_of_vector, with_photon
from .hadronic_currents import HadronTable, hadron_table
from .tau_decay import energy_density, energy_range

Floats = npt.NDArray[np.float64]

Q2_INTERVALS = 512
BROAD_INTERVALS = 128
VISIBLE_INTERVALS = 256

_ABOVE_THRESHOLD = 1e-6
"""GeV: where the line shape at the first mass point is taken, which is zero there."""

# Values of ChannelTable.chain.
GROUND = 0  # the charm hadron of the B decay is the D that is seen
VECTOR = 1  # D* -> D soft
ORBITAL_GROUND = 2  # D** -> D pion
ORBITAL_VECTOR = 3  # D** -> D* pion, D* -> D soft


class ChannelTable(NamedTuple):
    """Constants and tables of one fully specified decay chain. Masses in GeV, q² in GeV².

    spin : how the charm helicities add.
    has_tau : 1 if the lepton of the B decay is a tau that decays, else 0.
    one_neutrino : 1 for a tau that gives pions, else 0. hadrons : for one that gives several.
    visible_mass, visible_span : lowest energy and range of the tau's daughter.
    vector_mass, d_mass, soft_mass, pion_mass : of the D*, D, soft particle of the D*, pion of the D**; 0 if absent.
    intervals : of q² at each mass point. masses : of what has no fixed mass.
    q2_table (points * intervals, 3), visible_table (256, 3) : for `draw_position`.
    amplitudes (points * (intervals + 2), 4 or 16) : at the nodes and once more at the last; columns J_+, J_-, J_0, J_t
        if all is real and `spin` has one wave, else real and imaginary parts of J_+, J_-, J_0, J_t, S, T_+, T_-, T_0.
    """

    parent_mass: float
    charm_mass: float
    lepton_mass: float
    q2_min: float
    q2_span: float
    spin: CharmSpin
    chain: int
    vector_mass: float
    d_mass: float
    soft_mass: float
    pion_mass: float
    has_tau: int
    one_neutrino: float
    visible_mass: float
    visible_span: float
    intervals: int
    masses: MassTable
    q2_table: Floats
    amplitudes: Floats
    visible_table: Floats
    hadrons: HadronTable


def channel_table(channel: Channel) -> ChannelTable:
    """Table of a decay chain, about a millisecond to make. InputError if a particle is too light for its decay."""
    decay = channel.decay
    _check_thresholds(channel)
    spin = _charm_spin(channel)
    if channel.bachelor == "none":
        chain = VECTOR if channel.vector else GROUND
    else:
        chain = ORBITAL_VECTOR if channel.vector else ORBITAL_GROUND
    low, high = decay.q2_range
    visible_mass = channel.m_seen_lepton if channel.tau_to else 0.0
    energy_low, energy_high = energy_range(visible_mass)
    return ChannelTable(
        parent_mass=decay.m_parent,
        charm_mass=decay.m_charm,
        lepton_mass=decay.m_lepton,
        q2_min=low,
        q2_span=high - low,
        spin=spin,
        chain=chain,
        vector_mass=channel.m_vector,
        d_mass=channel.m_ground,
        soft_mass=channel.m_soft,
        pion_mass=channel.m_bachelor,
        has_tau=int(channel.tau_to is not None),
        one_neutrino=float(channel.tau_to not in (None, "e", "mu")),
        visible_mass=visible_mass,
        visible_span=energy_high - energy_low,
        intervals=q2_intervals(decay),
        masses=mass_table(channel),
        q2_table=q2_table(decay),
        amplitudes=amplitude_columns((decay,), spin)[0],
        visible_table=visible_table(visible_mass),
        hadrons=hadron_table(channel.tau_to),
    )


def _charm_spin(channel: Channel) -> CharmSpin:
    state = channel.decay.orbital
    if state is not None:
        spin = spin_of_orbital(state, bool(channel.vector), channel.second != "none")
        return with_photon(spin) if channel.soft == "photon" else spin
    return spin_of_vector(channel.soft == "photon") if channel.vector else ISOTROPIC


def _check_thresholds(channel: Channel) -> None:
    """A mass point of a broad state may lie where it cannot decay."""
    below = channel.m_vector or channel.m_ground
    light = channel.m_bachelor + channel.m_second
    parts = light + below if channel.bachelor != "none" else channel.m_ground + channel.m_soft
    if not has_line_shape(channel.decay) and channel.decay.m_charm < parts:
        raise InputError(
            Problem(
                f"the {channel.decay.charm} is too light to decay",
                where=channel.name,
                got=f"{channel.decay.m_charm} GeV",
                wanted=f"at least {parts:.5f} GeV",
            )
        )


def q2_intervals(decay: Decay) -> int:
    """Intervals of q² in the tables of a decay, at each mass point."""
    return BROAD_INTERVALS if has_line_shape(decay) else Q2_INTERVALS


def q2_of_position(decay: Decay, t: Floats, masses: Floats) -> Floats:
    """q² in GeV² at positions t in [0, 1] of the tables; masses : of the charm hadron, GeV."""
    low, high = decay.m_lepton**2, (decay.m_parent - masses) ** 2
    q2: Floats = low + (high - low) * t * t * (3.0 - 2.0 * t)
    return q2


@lru_cache(maxsize=64)  # chains of one decay follow each other
def regular_amplitudes(decay: Decay) -> HelicityAmplitudes:
    """Amplitudes times sqrt(q²) at the nodes of each mass point, with a copy of the last node behind it; one axis.

    Those of a broad state are scaled by the root of its line shape, which a variation may change.
    """
    intervals, masses = q2_intervals(decay), point_masses(decay)[:, None]
    t = np.minimum(np.arange(intervals + 2) / intervals, 1.0)
    q2 = q2_of_position(decay, t, masses)
    values = helicity_amplitudes(decay, q2, masses)
    factor = np.sqrt(q2)
    if has_line_shape(decay):
        factor = factor * np.sqrt(mass_density(decay, np.maximum(masses, masses[0] + _ABOVE_THRESHOLD)))
    return HelicityAmplitudes(**{name: (value * factor).ravel() for name, value in vars(values).items()})


@lru_cache(maxsize=16)
def amplitude_columns(decays: tuple[Decay, ...], spin: CharmSpin) -> tuple[Floats, ...]:
    """Amplitudes of each decay as `ChannelTable.amplitudes` has them, all of one kind; shared by its chains.

    The kernels for complex amplitudes are those that know two waves of the charm decay.
    """
    values = [regular_amplitudes(decay) for decay in decays]
    two_waves = spin.wave == TWO_UNITS_TO_VECTOR
    columns_of = complex_columns if two_waves or any(map(needs_complex, values)) else real_columns
    return tuple(map(columns_of, values))


def needs_complex(amplitudes: HelicityAmplitudes) -> bool:
    """Whether there is more than a real vector and axial current, i.e. more than the standard model or real VL, VR."""
    values = vars(amplitudes).items()
    return any((np.iscomplexobj(v) and np.any(v.imag)) or (name[0] != "J" and np.any(v)) for name, v in values)


def real_columns(amplitudes: HelicityAmplitudes) -> Floats:
    """(nodes, 4): J_+, J_-, J_0, J_t."""
    a = amplitudes
    return np.ascontiguousarray(np.stack([a.J_plus, a.J_minus, a.J_zero, a.J_t], axis=-1).real)


def complex_columns(amplitudes: HelicityAmplitudes) -> Floats:
    """(nodes, 16): real and imaginary parts of J_+, J_-, J_0, J_t, S, T_+, T_-, T_0."""
    a = amplitudes
    values = [a.J_plus, a.J_minus, a.J_zero, a.J_t, a.S, a.T_plus, a.T_minus, a.T_zero]
    return np.ascontiguousarray(np.stack(values, axis=-1, dtype=np.complex128)).view(np.float64)


@lru_cache(maxsize=64)
def q2_table(decay: Decay) -> Floats:
    """(points * intervals, 3) tables for `draw_position` of d Gamma / dt, one for each mass point."""
    return interval_tables(partial(_rate_densities, decay, point_masses(decay)[:, None]), q2_intervals(decay))


def _rate_densities(decay: Decay, mass: Floats, t: Floats) -> Floats:
    """d Gamma / dt up to a factor, for these masses (n, 1) of the charm hadron in GeV at t (m,); (n, m)."""
    q2 = q2_of_position(decay, t, mass)
    x = decay.m_lepton / np.sqrt(q2)
    values = helicity_amplitudes(decay, q2, mass).with_lepton(x)
    a, b = (np.abs([getattr(values, f"{k}_{h}") for h in ("plus", "minus", "zero")]) ** 2 for k in "ab")
    total = (4.0 / 3.0) * a.sum(axis=0) + (2.0 / 3.0) * b.sum(axis=0) + 2.0 * np.abs(values.t) ** 2
    # |p| (1 - x²) N² dq²/dt; q²_max - q² without cancellation
    M = decay.m_parent
    span = (M - mass) ** 2 - decay.m_lepton**2
    to_end = span * (1.0 - t) ** 2 * (1.0 + 2.0 * t)
    momentum = np.sqrt(to_end * ((M + mass) ** 2 - q2))
    result: Floats = momentum * (1.0 - x * x) ** 2 * q2 * total * t * (1.0 - t)
    return result


@lru_cache(maxsize=8)
def visible_table(mass: float) -> Floats:
    """(256, 3) table for `draw_position` of the spectrum of a tau daughter of this mass."""
    return interval_table(lambda s: energy_density(mass, s), VISIBLE_INTERVALS)
