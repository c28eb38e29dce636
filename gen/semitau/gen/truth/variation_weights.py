"""Weights of form-factor variations for blocks of events, from tabulated amplitudes.

A weight is |M|² of the varied decay over |M|² of the decay that the events were drawn from, at the same angles and
momenta, tau spin included. With `shape_only` it is divided by the ratio of the widths, so that its mean is 1: for
templates whose normalisation is a parameter of the fit.
"""

from __future__ import annotations

from collections.abc import Sequence
from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.errors import InputError, Problem

from .. import block as row
from ..block import LANES
from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.rates import width
from .channel_table import amplitude_columns, channel_table
from .charm_spin import CharmSpin
from .spin_algebra import both_waves, chain_density, spin_density
from .tau_decay import emission

Floats = npt.NDArray[np.float64]

WIDTH = 8
"""Variations handled at a time, one in each SIMD lane."""


class VariationTable(NamedTuple):
    """Amplitudes of the variations of one channel.

    columns : flat (nodes, groups, 4 if real else 16, WIDTH), columns as in `ChannelTable.amplitudes`, WIDTH decays to a
        group: the drawn one, then the variations, then the drawn one again to fill up.
    width : WIDTH again, since a loop over a constant 8 is unrolled before it can be vectorised.
    variations : how many were asked for.
    The others as in `ChannelTable`.
    """

    columns: Floats
    groups: int
    width: int
    real: int
    variations: int
    lepton_mass: float
    spin: CharmSpin
    has_tau: int
    one_neutrino: float
    visible_mass: float


def variation_table(channel: Channel, decays: Sequence[Decay], *, shape_only: bool) -> VariationTable:
    """Table for `variation_weights`.

    channel : the chain that events are drawn from. decays : the same decay with other form factors or couplings, one
    for each variation; at least one. shape_only : divide each weight by Γ(varied) / Γ(drawn). InputError if a decay
    is another one than the channel's.
    """
    wrong = [
        Problem("a variation must be of the same decay", got=f"{d.parent} -> {d.charm} {d.lepton}")
        for d in decays
        if (d.parent, d.charm, d.lepton, d.charm_mass)
        != (channel.parent, channel.decay.charm, channel.lepton, channel.decay.charm_mass)
    ]
    if wrong or not decays:
        raise InputError(*(wrong or [Problem("no variation is given", where=channel.name)]))
    table = channel_table(channel)
    columns, parts = _columns(channel.decay, tuple(decays), shape_only, table.spin)
    return VariationTable(
        columns=columns,
        groups=-(-(1 + len(decays)) // WIDTH),
        width=WIDTH,
        real=int(parts == 4),
        variations=len(decays),
        lepton_mass=table.lepton_mass,
        spin=table.spin,
        has_tau=table.has_tau,
        one_neutrino=table.one_neutrino,
        visible_mass=table.visible_mass,
    )


@lru_cache(maxsize=4)  # chains of one decay follow each other
def _columns(drawn: Decay, decays: tuple[Decay, ...], shape_only: bool, spin: CharmSpin) -> tuple[Floats, int]:
    """Columns of a `VariationTable`, and how many numbers a node has."""
    given = amplitude_columns((drawn, *decays), spin)
    rates = [width(decay) for decay in (drawn, *decays)] if shape_only else [1.0] * len(given)
    scaled = [column * np.sqrt(rates[0] / rate) for column, rate in zip(given, rates, strict=True)]
    groups = -(-len(scaled) // WIDTH)
    filled = scaled + [scaled[0]] * (groups * WIDTH - len(scaled))
    nodes, parts = scaled[0].shape
    return np.ascontiguousarray(np.reshape(filled, (groups, WIDTH, nodes, parts)).transpose(2, 0, 3, 1)).ravel(), parts


@kernel
def variation_weights(x: Floats, table: VariationTable, out: Floats, n: int) -> None:
    """Weights of the first n lanes of a block (n <= LANES).

    x : block whose rows Q2, NODE, COS_THETA, COS_V, COS_CHI, SIN_CHI and, in a channel with a tau, VISIBLE_E, _X, _Y,
    _Z are as `draw_decays` left them (events may have been dropped or moved between lanes). Polarisation and scratch
    rows are overwritten.
    out : (>= n, >= variations) float64, C order; out[i, v] is the weight of lane i for variation v.
    """
    analyse(x, table)
    if table.real:
        _weights_real(x, table, out, n)
    else:
        _weights_complex(x, table, out, n)


@kernel
def analyse(x: Floats, table: VariationTable) -> None:
    """Coefficients of the polarisation in the tau decay, relative to 1: into the polarisation rows."""
    if table.has_tau:
        for i in range(LANES):
            _, even, odd = emission(x[row.VISIBLE_E + i], table.visible_mass)
            power = 1.0 if table.one_neutrino > 0.0 else -odd / even
            x[row.POLARISATION_X + i] = power * x[row.VISIBLE_X + i]
            x[row.POLARISATION_Y + i] = power * x[row.VISIBLE_Y + i]
            x[row.POLARISATION_Z + i] = power * x[row.VISIBLE_Z + i]
    else:
        for i in range(LANES):
            x[row.POLARISATION_X + i] = x[row.POLARISATION_Y + i] = x[row.POLARISATION_Z + i] = 0.0


@inlined
def _between(columns: Floats, low: int, high: int, f: float) -> float:
    return columns[low] + f * (columns[high] - columns[low])  # type: ignore[no-any-return]


@inlined
def _real(columns: Floats, a: int, b: int, f: float) -> tuple[float, ...]:
    """The eight amplitudes of one variation between the nodes whose J_+ stand at a and b."""
    return (
        _between(columns, a, b, f),
        _between(columns, a + WIDTH, b + WIDTH, f),
        _between(columns, a + 2 * WIDTH, b + 2 * WIDTH, f),
        _between(columns, a + 3 * WIDTH, b + 3 * WIDTH, f),
        0.0,
        0.0,
        0.0,
        0.0,
    )


@inlined
def _pair(columns: Floats, a: int, b: int, f: float) -> complex:
    return _between(columns, a, b, f) + 1j * _between(columns, a + WIDTH, b + WIDTH, f)  # type: ignore[no-any-return]


@inlined
def _complex(columns: Floats, a: int, b: int, f: float) -> tuple[complex, ...]:
    return (
        _pair(columns, a, b, f),
        _pair(columns, a + 2 * WIDTH, b + 2 * WIDTH, f),
        _pair(columns, a + 4 * WIDTH, b + 4 * WIDTH, f),
        _pair(columns, a + 6 * WIDTH, b + 6 * WIDTH, f),
        _pair(columns, a + 8 * WIDTH, b + 8 * WIDTH, f),
        _pair(columns, a + 10 * WIDTH, b + 10 * WIDTH, f),
        _pair(columns, a + 12 * WIDTH, b + 12 * WIDTH, f),
        _pair(columns, a + 14 * WIDTH, b + 14 * WIDTH, f),
    )


@inlined
def _weigh(x: Floats, table: VariationTable, out: Floats, n: int, parts: int, amplitudes: Any, density: Any) -> None:
    """Densities of the drawn decay and the variations go one after the other into the scratch rows.

    parts, amplitudes, density : 4, `_real`, `spin_density`, or 16, `_complex`, `both_waves`; the compiler makes a loop
    of its own for each.
    """
    spin, columns, groups = table.spin, table.columns, table.groups
    lepton_mass, width = table.lepton_mass, table.width
    for i in range(n):
        # Everything of the event is read before the loop: the compiler cannot know that the scratch rows are elsewhere.
        k = int(x[row.NODE + i])
        f = x[row.NODE + i] - k
        x_lepton = lepton_mass / np.sqrt(x[row.Q2 + i])
        theta, v, cos_chi, sin_chi = x[row.COS_THETA + i], x[row.COS_V + i], x[row.COS_CHI + i], x[row.SIN_CHI + i]
        px, py, pz = x[row.POLARISATION_X + i], x[row.POLARISATION_Y + i], x[row.POLARISATION_Z + i]
        for group in range(groups):
            low = (k * groups + group) * (parts * WIDTH)
            high = low + groups * (parts * WIDTH)
            place = row.SCRATCH_0 + group * WIDTH
            for j in range(width):
                x[place + j] = chain_density(
                    x_lepton, spin, theta, v, cos_chi, sin_chi, px, py, pz,
                    amplitudes(columns, low + j, high + j, f), density,
                )  # fmt: skip
        scale = 1.0 / x[row.SCRATCH_0]
        for j in range(table.variations):
            out[i, j] = x[row.SCRATCH_0 + 1 + j] * scale


@kernel
def _weights_real(x: Floats, table: VariationTable, out: Floats, n: int) -> None:
    _weigh(x, table, out, n, 4, _real, spin_density)


@kernel
def _weights_complex(x: Floats, table: VariationTable, out: Floats, n: int) -> None:
    _weigh(x, table, out, n, 16, _complex, both_waves)
