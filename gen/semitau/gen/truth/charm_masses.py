"""Masses that vary from event to event: of a broad charmed state, and of the pair of pions that it may give.

A broad state has tables of amplitudes at some masses, its mass points. An event draws its mass from the line shape
times the width at that mass, and takes the tables of one of the two neighbouring points, with odds linear in the
distance. So the density of everything else is interpolated linearly between the points while the mass itself is
continuous: exact up to second order in their distance.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.streams import event_key, uniform

from .. import block as row
from ..block import LANES
from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.line_shapes import has_line_shape, mass_at, mass_density, mass_slope, pair_phase_space
from ..decays.rates import widths_at
from . import draw_numbers as draw
from .alias import draw_position, interval_table

Floats = npt.NDArray[np.float64]

MASS_POINTS = 24
MASS_INTERVALS = 256
PAIR_INTERVALS = 256


class MassTable(NamedTuple):
    """Masses of one decay chain, GeV.

    points : tables of amplitudes; 1 if the mass is fixed. positions (256, 3) : for `draw_position` of the mass.
    masses (258,) : at these positions, the last one twice.
    pair : 1 if two pions go with the D or D*, of first_pion and second_pion; `daughter` is the D or D*.
    shares (points, 258) : quantiles of the pair mass, as a share of its range; the last one twice.
    """

    points: int
    positions: Floats
    masses: Floats
    pair: int
    daughter: float
    first_pion: float
    second_pion: float
    shares: Floats


def mass_table(channel: Channel) -> MassTable:
    """Table of a decay chain."""
    decay, pair = channel.decay, channel.second != "none"
    broad = has_line_shape(decay)
    daughter = channel.m_vector or channel.m_ground
    return MassTable(
        points=MASS_POINTS if broad else 1,
        positions=_positions(decay) if broad else np.zeros((1, 3)),
        masses=_doubled(mass_at(decay, np.linspace(0.0, 1.0, MASS_INTERVALS + 1))) if broad else np.zeros(2),
        pair=int(pair),
        daughter=daughter,
        first_pion=channel.m_bachelor,
        second_pion=channel.m_second,
        shares=_pair_shares(tuple(point_masses(decay).tolist()), daughter, channel.m_bachelor, channel.m_second)
        if pair
        else np.zeros((1, 2)),
    )


def point_masses(decay: Decay) -> Floats:
    """(points,) GeV: the masses at which amplitudes are tabulated."""
    if not has_line_shape(decay):
        return np.array([decay.m_charm])
    return mass_at(decay, np.linspace(0.0, 1.0, MASS_POINTS))


@lru_cache(maxsize=64)
def _positions(decay: Decay) -> Floats:
    def density(y: Floats) -> Floats:
        m = mass_at(decay, y)
        return np.asarray(mass_density(decay, m) * widths_at(decay, m) * mass_slope(decay, y))

    return interval_table(density, MASS_INTERVALS)


@lru_cache(maxsize=64)
def _pair_shares(masses: tuple[float, ...], daughter: float, first: float, second: float) -> Floats:
    """(points, 258): quantiles evenly spaced in probability."""
    t = np.linspace(0.0, 1.0, 2001)
    x = t * t * (3.0 - 2.0 * t)
    even = np.linspace(0.0, 1.0, PAIR_INTERVALS + 1)
    m = np.array(masses)[:, None]
    span = np.maximum(m - daughter - first - second, 1e-9)
    density = pair_phase_space(first + second + daughter + span, daughter, first, second, x)
    inside = np.cumsum(0.5 * (density[:, 1:] + density[:, :-1]) * np.diff(x), axis=-1)
    cumulative = np.concatenate([np.zeros((len(m), 1)), inside], axis=-1)
    return np.array([_doubled(np.interp(even, row / row[-1], x)) for row in cumulative])


def _doubled(values: Floats) -> Floats:
    """With the last one once more, for interpolation."""
    return np.append(values, values[-1])


@kernel
def draw_masses(
    x: Floats, table: MassTable, charm_mass: float, light_mass: float, stream: np.uint64, first_event: np.uint64
) -> None:
    """Fill CHARM_MASS, MASS_POINT and LIGHT_MASS. charm_mass, light_mass : where they are fixed."""
    if table.points == 1:
        for i in range(LANES):
            x[row.CHARM_MASS + i] = charm_mass
            x[row.MASS_POINT + i] = 0.0
    else:
        steps = (table.points - 1) / MASS_INTERVALS
        for i in range(LANES):
            key = event_key(stream, first_event + np.uint64(i))
            position = draw_position(
                table.positions,
                uniform(key, draw.CHARM_MASS_INTERVAL),
                uniform(key, draw.CHARM_MASS_INSIDE),
                uniform(key, draw.CHARM_MASS_SIDE),
            )
            k = int(position)
            x[row.CHARM_MASS + i] = table.masses[k] + (position - k) * (table.masses[k + 1] - table.masses[k])
            point = int(position * steps)
            upper = uniform(key, draw.CHARM_MASS_POINT) < position * steps - point
            x[row.MASS_POINT + i] = point + 1.0 if upper else float(point)
    if table.pair == 0:
        for i in range(LANES):
            x[row.LIGHT_MASS + i] = light_mass
        return
    lowest = table.first_pion + table.second_pion
    for i in range(LANES):
        key = event_key(stream, first_event + np.uint64(i))
        position = uniform(key, draw.PION_PAIR_MASS) * PAIR_INTERVALS
        k, point = int(position), int(x[row.MASS_POINT + i])
        low = table.shares[point, k]
        share = low + (position - k) * (table.shares[point, k + 1] - low)
        x[row.LIGHT_MASS + i] = lowest + share * max(x[row.CHARM_MASS + i] - table.daughter - lowest, 0.0)
