"""What an event's |M|² is made of: its real bilinear pieces in the operators, relative to the |M|² it was drawn from.

With amplitudes M = sum of g_m M_m over a few operators, |M|² = sum over m, n of g_m* g_n D_mn, where D is a Hermitian
matrix of the event. Re D_mn and Im D_mn give its weight for every value of all Wilson coefficients (four operators and
16 numbers at most), or of shifts of form factors. D uses the spin of D* and tau as `spin_algebra.chain_density` does,
whose quadratic form it polarises: the tau decay is the form W = 1 + odd . sigma on the two lepton helicities.
"""

from __future__ import annotations

from functools import lru_cache
from typing import Any, NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel

from .. import block as row
from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.form_factor_shifts import Coefficient
from ..decays.operators import Operators, operators, shift_operators
from .channel_table import regular_amplitudes
from .charm_spin import TWO_UNITS_TO_VECTOR, CharmSpin, first_wave, second_wave
from .spin_algebra import helicity_states, lepton_terms
from .variation_weights import VariationTable, analyse, variation_table

Floats = npt.NDArray[np.float64]
Integers = npt.NDArray[np.int64]

OPERATORS_AT_MOST = 6
AMPLITUDES = 8


class PieceTable(NamedTuple):
    """Amplitudes by operator of one decay chain.

    columns : flat (nodes, operators, 8), J_+, J_-, J_0, J_t, S, T_+, T_-, T_0 times sqrt(q²).
    operators : 0 if there is nothing to do. imaginary : 1 with imaginary parts. pieces : how many.
    drawn (pieces,) : what each counts in the density that events were drawn from.
    chain : what else the kernel needs of the decay chain.
    """

    columns: Floats
    operators: int
    imaginary: int
    pieces: int
    drawn: Floats
    chain: VariationTable


def piece_table(channel: Channel, coefficients: tuple[Coefficient, ...]) -> tuple[PieceTable, Operators]:
    """Table for `bilinear_pieces`, and how the coefficients combine its pieces.

    coefficients : parts of Wilson coefficients ("SR", "Im_T"), or shifts of form factors; not both that act.
    """
    taken = _operators(channel.decay, coefficients)
    nodes_first = np.ascontiguousarray(np.moveaxis(taken.amplitudes, 0, -2))
    table = PieceTable(
        columns=nodes_first.ravel(),
        operators=taken.number,
        imaginary=int(taken.imaginary),
        pieces=len(taken.pieces),
        drawn=taken.drawn,
        chain=variation_table(channel, [channel.decay], shape_only=False),
    )
    return table, taken


def no_pieces(chain: VariationTable) -> PieceTable:
    """A table that asks for nothing."""
    return PieceTable(np.zeros(0), 0, 0, 0, np.zeros(0), chain)


@lru_cache(maxsize=8)  # chains of one decay follow each other
def _operators(decay: Decay, coefficients: tuple[Coefficient, ...]) -> Operators:
    couplings = [one for one in coefficients if isinstance(one, str)]
    if len(couplings) == len(coefficients):
        return operators(decay, couplings, _columns)
    return shift_operators(decay, coefficients, _columns)


def _columns(decay: Decay) -> npt.NDArray[np.complex128]:
    """(..., nodes, 8) amplitudes at the nodes of the tables."""
    return np.stack(list(vars(regular_amplitudes(decay)).values()), axis=-1)


@kernel
def bilinear_pieces(x: Floats, table: PieceTable, out: Floats, n: int) -> None:
    """Pieces of the first n lanes of a block over the density drawn from, in the order of `Operators.pieces`.

    x : block as `variation_weights` takes it. out : (>= n, >= pieces).
    """
    analyse(x, table.chain)
    if table.chain.spin.wave == TWO_UNITS_TO_VECTOR:
        _pieces_of_both_waves(x, table, out, n)
    else:
        _pieces_of_one_wave(x, table, out, n)


@inlined
def _fill_pieces(x: Floats, table: PieceTable, out: Floats, n: int, fill: Any, real: Any, imaginary: Any) -> None:
    """fill, real, imaginary : `_states`, `_real_part`, `_imaginary_part`, or their like for both waves."""
    spin = table.chain.spin
    states = np.zeros((OPERATORS_AT_MOST, 14))
    for i in range(n):
        fill(x, i, table, states)
        px, py, pz = x[row.POLARISATION_X + i], x[row.POLARISATION_Y + i], x[row.POLARISATION_Z + i]
        place = 0
        for m in range(table.operators):
            for k in range(m, table.operators):
                out[i, place] = real(states[m], states[k], spin, px, py, pz)
                place += 1
        if table.imaginary:
            for m in range(table.operators):
                for k in range(m + 1, table.operators):
                    out[i, place] = imaginary(states[m], states[k], spin, px, py, pz)
                    place += 1
        density = 0.0
        for p in range(table.pieces):
            density += table.drawn[p] * out[i, p]
        scale = 1.0 / density
        for p in range(table.pieces):
            out[i, p] *= scale


@kernel
def _pieces_of_one_wave(x: Floats, table: PieceTable, out: Floats, n: int) -> None:
    _fill_pieces(x, table, out, n, _states, _real_part, _imaginary_part)


@kernel
def _pieces_of_both_waves(x: Floats, table: PieceTable, out: Floats, n: int) -> None:
    _fill_pieces(x, table, out, n, _both_states, _both_real_parts, _both_imaginary_parts)


@inlined
def _states(x: Floats, i: int, table: PieceTable, states: Floats) -> None:
    """For each operator K of the three charm helicities and both lepton helicities, real, then the coherent sums M.

    A sum takes four numbers: real and imaginary part of M_- and of M_+. One sum for each wave of `charm_spin.py`.
    """
    k = int(x[row.NODE + i])
    f = x[row.NODE + i] - k
    x_lepton = table.chain.lepton_mass / np.sqrt(x[row.Q2 + i])
    v, cos_chi, sin_chi = x[row.COS_V + i], x[row.COS_CHI + i], x[row.SIN_CHI + i]
    plus, zero = first_wave(table.chain.spin.wave, v)
    real, turned = plus * cos_chi, plus * sin_chi
    step = table.operators * AMPLITUDES
    for o in range(table.operators):
        a = k * step + o * AMPLITUDES
        c = table.columns
        kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus = helicity_states(
            x[row.COS_THETA + i],
            *lepton_terms(
                x_lepton,
                c[a] + f * (c[a + step] - c[a]),
                c[a + 1] + f * (c[a + step + 1] - c[a + 1]),
                c[a + 2] + f * (c[a + step + 2] - c[a + 2]),
                c[a + 3] + f * (c[a + step + 3] - c[a + 3]),
                c[a + 4] + f * (c[a + step + 4] - c[a + 4]),
                c[a + 5] + f * (c[a + step + 5] - c[a + 5]),
                c[a + 6] + f * (c[a + step + 6] - c[a + 6]),
                c[a + 7] + f * (c[a + step + 7] - c[a + 7]),
            ),
        )
        s = states[o]
        s[0], s[1], s[2], s[3], s[4], s[5] = kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus
        s[6] = real * (kp_minus - km_minus) + zero * k0_minus
        s[7] = turned * (kp_minus + km_minus)
        s[8] = real * (kp_plus - km_plus) + zero * k0_plus
        s[9] = turned * (kp_plus + km_plus)


@inlined
def _both_states(x: Floats, i: int, table: PieceTable, states: Floats) -> None:
    """As `_states`, with the sums of the second wave behind."""
    _states(x, i, table, states)
    side = second_wave(table.chain.spin.wave, x[row.COS_V + i])
    real, turned = side * x[row.COS_CHI + i], side * x[row.SIN_CHI + i]
    for o in range(table.operators):
        s = states[o]
        s[10], s[11] = real * (s[0] + s[1]), turned * (s[0] - s[1])
        s[12], s[13] = real * (s[3] + s[4]), turned * (s[3] - s[4])


@inlined
def _real_part(a: Floats, b: Floats, spin: CharmSpin, px: float, py: float, pz: float) -> float:
    """Re D of two operators."""
    minus = a[0] * b[0] + a[1] * b[1] + a[2] * b[2]
    plus = a[3] * b[3] + a[4] * b[4] + a[5] * b[5]
    mixed = a[3] * b[0] + a[4] * b[1] + a[5] * b[2] + a[0] * b[3] + a[1] * b[4] + a[2] * b[5]
    flat = (1.0 - pz) * minus + (1.0 + pz) * plus + px * mixed
    return spin.incoherent * flat + spin.coherent * _real_wave(a, b, 6, px, py, pz)  # type: ignore[no-any-return]


@inlined
def _both_real_parts(a: Floats, b: Floats, spin: CharmSpin, px: float, py: float, pz: float) -> float:
    first = _real_part(a, b, spin, px, py, pz)
    return first + spin.coherent * _real_wave(a, b, 10, px, py, pz)  # type: ignore[no-any-return]


@inlined
def _real_wave(a: Floats, b: Floats, first: int, px: float, py: float, pz: float) -> float:
    """Of the sums M whose four numbers begin at `first`."""
    f, g, h, k = first, first + 1, first + 2, first + 3
    minus = a[f] * b[f] + a[g] * b[g]
    plus = a[h] * b[h] + a[k] * b[k]
    # conj(a_plus) b_minus and conj(a_minus) b_plus
    up_real, up_imaginary = a[h] * b[f] + a[k] * b[g], a[h] * b[g] - a[k] * b[f]
    down_real, down_imaginary = a[f] * b[h] + a[g] * b[k], a[f] * b[k] - a[g] * b[h]
    return (  # type: ignore[no-any-return]
        (1.0 - pz) * minus + (1.0 + pz) * plus + px * (up_real + down_real) + py * (up_imaginary - down_imaginary)
    )


@inlined
def _imaginary_part(a: Floats, b: Floats, spin: CharmSpin, px: float, py: float, pz: float) -> float:
    """Im D of two operators."""
    mixed = a[0] * b[3] + a[1] * b[4] + a[2] * b[5] - a[3] * b[0] - a[4] * b[1] - a[5] * b[2]
    wave = _imaginary_wave(a, b, 6, px, py, pz)
    return spin.incoherent * py * mixed + spin.coherent * wave  # type: ignore[no-any-return]


@inlined
def _both_imaginary_parts(a: Floats, b: Floats, spin: CharmSpin, px: float, py: float, pz: float) -> float:
    first = _imaginary_part(a, b, spin, px, py, pz)
    return first + spin.coherent * _imaginary_wave(a, b, 10, px, py, pz)  # type: ignore[no-any-return]


@inlined
def _imaginary_wave(a: Floats, b: Floats, first: int, px: float, py: float, pz: float) -> float:
    """As `_real_wave`."""
    f, g, h, k = first, first + 1, first + 2, first + 3
    minus = a[f] * b[g] - a[g] * b[f]
    plus = a[h] * b[k] - a[k] * b[h]
    up_real, up_imaginary = a[h] * b[f] + a[k] * b[g], a[h] * b[g] - a[k] * b[f]
    down_real, down_imaginary = a[f] * b[h] + a[g] * b[k], a[f] * b[k] - a[g] * b[h]
    return (  # type: ignore[no-any-return]
        (1.0 - pz) * minus + (1.0 + pz) * plus + px * (up_imaginary + down_imaginary) + py * (down_real - up_real)
    )
