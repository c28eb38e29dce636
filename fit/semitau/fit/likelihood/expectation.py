"""The expectation of every bin and its derivatives in the parameters, compiled, tile by tile, without allocation."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from semitau.core.compiled import inlined, kernel
from semitau.core.templates import Floats

from .interpolation import bend, positive
from .layout import Arrays, Indices
from .vectors import dot

VALUE, FISHER, EXACT = 0, 1, 2
"""What `evaluate` computes: the value; with gradient and expected Hessian; with gradient and exact Hessian."""


class Workspace(NamedTuple):
    """Scratch of one thread."""

    rows: Floats  # (parameters, lanes of a tile): derivative of the plain sum with respect to a parameter
    pieces: Floats  # (pieces of a tile, lanes of a tile): contents at the current nuisances, unscaled
    lanes: Floats  # (9, lanes of a tile): plain sum, first derivative, weight, product, -ln L; then of the templates'
    # variance: itself, first derivative, mixed one, second one
    variance_rows: Floats  # (parameters, lanes of a tile): derivative of the templates' variance
    shares: Floats  # (4, pieces of a tile, lanes of a tile): of a component: contents, first derivative, b, curvature
    one_bin: Floats  # (3, pieces of a tile): contents, 1/effective counts, centres
    scales: Floats  # (components,)
    bends: Floats  # (parameters, 3)
    protected: Indices  # (1,): bins below their floor in the last evaluation


def workspace(arrays: Arrays) -> Workspace:
    """Scratch large enough for every tile of the arrays."""
    lanes = int(np.diff(arrays.tile_first).max())
    pieces = int(np.diff(arrays.tile_pieces).max())
    parameters = arrays.inverse_variance.size
    return Workspace(
        np.zeros((parameters, lanes)),
        np.zeros((max(1, pieces), lanes)),
        np.zeros((9, lanes)),
        np.zeros((parameters, lanes)),
        np.zeros((4, max(1, pieces), lanes)),
        np.zeros((3, max(1, pieces))),
        np.zeros(arrays.component_first.size - 1),
        np.zeros((parameters, 3)),
        np.zeros(1, dtype=np.int64),
    )


@inlined
def scale_of(arrays: Arrays, component: int, x: Floats, skip: int, skip_too: int) -> float:
    """Product of a component's scale parameters over their injected values, without up to two of them.

    skip, skip_too : places in component_scales, where a parameter may stand twice (the square of a coefficient); or -1.
    """
    product = 1.0
    for i in range(arrays.component_first[component], arrays.component_first[component + 1]):
        if i != skip and i != skip_too:
            p = arrays.component_scales[i]
            product *= x[p] * arrays.inverse_injected[p]
    return product


@kernel
def sum_pieces(arrays: Arrays, tile: int, x: Floats, mode: int, work: Workspace) -> None:
    """The plain sum of the tile's lanes and its derivatives."""
    sum_some_pieces(arrays, tile, arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1], x, mode, work)


@kernel
def sum_some_pieces(arrays: Arrays, tile: int, begin: int, end: int, x: Floats, mode: int, work: Workspace) -> None:
    """The same of the pieces from begin to before end."""
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    total = work.lanes[0]
    total[:length] = 0.0
    if mode != VALUE:
        for i in range(arrays.tile_rows[tile], arrays.tile_rows[tile + 1]):
            work.rows[arrays.rows[i], :length] = 0.0
    first_piece = arrays.tile_pieces[tile]
    for piece in range(begin, end):
        component = arrays.piece_component[piece]
        scale = work.scales[component]
        contents = work.pieces[piece - first_piece]
        nominal = arrays.nominal[arrays.piece_offset[piece] :]
        for i in range(length):
            contents[i] = nominal[i]
        for move in range(arrays.piece_moves[piece], arrays.piece_moves[piece + 1]):
            k = arrays.move_parameter[move]
            odd = arrays.odd[arrays.move_offset[move] :]
            even = arrays.even[arrays.move_offset[move] :]
            theta, value = x[k], work.bends[k, 0]
            if mode == VALUE:
                for i in range(length):
                    contents[i] += theta * odd[i] + value * even[i]
            else:
                row, slope = work.rows[k], scale * work.bends[k, 1]
                for i in range(length):
                    contents[i] += theta * odd[i] + value * even[i]
                    row[i] += scale * odd[i] + slope * even[i]
        for i in range(length):
            total[i] += scale * contents[i]
        if mode != VALUE:
            for j in range(arrays.component_first[component], arrays.component_first[component + 1]):
                p = arrays.component_scales[j]
                factor = scale_of(arrays, component, x, j, -1) * arrays.inverse_injected[p]
                row = work.rows[p]
                for i in range(length):
                    row[i] += factor * contents[i]


@kernel
def add_curvature(arrays: Arrays, tile: int, begin: int, end: int, x: Floats, hessian: Floats, work: Workspace) -> None:
    """First derivative (lanes[1]) in the contents of the pieces from begin to before end, times their second ones.

    Fills the lower triangle only.
    """
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    derivative = work.lanes[1]
    first_piece = arrays.tile_pieces[tile]
    for piece in range(begin, end):
        component = arrays.piece_component[piece]
        begin, end = arrays.component_first[component], arrays.component_first[component + 1]
        if end - begin > 1:
            contents = dot(derivative, 0, work.pieces, (piece - first_piece) * work.pieces.shape[1], length)
            for j in range(begin, end):
                for l in range(begin, j):
                    p, q = arrays.component_scales[j], arrays.component_scales[l]
                    factor = scale_of(arrays, component, x, j, l) * (2.0 if p == q else 1.0)
                    factor *= arrays.inverse_injected[p] * arrays.inverse_injected[q]
                    hessian[max(p, q), min(p, q)] += factor * contents
        for move in range(arrays.piece_moves[piece], arrays.piece_moves[piece + 1]):
            k = arrays.move_parameter[move]
            odd = dot(derivative, 0, arrays.odd, arrays.move_offset[move], length)
            even = dot(derivative, 0, arrays.even, arrays.move_offset[move], length)
            shift = odd + work.bends[k, 1] * even
            hessian[k, k] += work.scales[component] * work.bends[k, 2] * even
            for j in range(begin, end):
                p = arrays.component_scales[j]  # scale parameters come before nuisances: p < k
                hessian[k, p] += scale_of(arrays, component, x, j, -1) * arrays.inverse_injected[p] * shift


@inlined
def set_point(arrays: Arrays, x: Floats, work: Workspace) -> None:
    """What the contents of all bins need at the parameters x: interpolation of nuisances, scales of components."""
    for p in range(x.shape[0]):
        work.bends[p, 0], work.bends[p, 1], work.bends[p, 2] = bend(x[p])
    for c in range(work.scales.shape[0]):
        work.scales[c] = scale_of(arrays, c, x, -1, -1)


@kernel
def has_hold(arrays: Arrays, parameter: int, x: Floats, work: Workspace) -> bool:
    """Whether a parameter changes any bin that is above its floor, at the parameters of the last evaluation."""
    for tile in range(arrays.tile_filled.shape[0]):
        for j in range(arrays.tile_rows[tile], arrays.tile_rows[tile + 1]):
            if arrays.rows[j] == parameter:
                sum_pieces(arrays, tile, x, FISHER, work)
                for i in range(arrays.tile_filled[tile]):
                    above = work.lanes[0, i] >= arrays.floor[arrays.tile_first[tile] + i]
                    if above and work.rows[parameter, i] != 0.0:
                        return True
    return False


@kernel
def expectations(arrays: Arrays, x: Floats, work: Workspace, plain: Floats, out: Floats) -> None:
    """Fill (lanes,) arrays with the plain sums and the protected expectations at the parameters x."""
    set_point(arrays, x, work)
    for tile in range(arrays.tile_filled.shape[0]):
        sum_pieces(arrays, tile, x, VALUE, work)
        first = arrays.tile_first[tile]
        for lane in range(first, arrays.tile_first[tile + 1]):
            plain[lane] = work.lanes[0, lane - first]
            out[lane] = positive(plain[lane], arrays.floor[lane])[0]
