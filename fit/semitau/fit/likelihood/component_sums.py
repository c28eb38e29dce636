"""The exact likelihood of one tile: a factor for each component in each bin (exact_statistics.py).

With m_j the contents of the components, the Hessian in the parameters is

    Σ_bins { w wᵀ/D + Σ_j [ g_j ∂²m_j - (t² b_j/a_j) ∂m_j ∂m_jᵀ ] },    w = Σ_j b_j ∂m_j,    g_j = d(-ln L)/dm_j,

so the derivatives of each component are needed by themselves, which the tile's sums do not keep: they are summed again.
"""

from __future__ import annotations

from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from .exact_statistics import exact_value, solve_bin
from .expectation import EXACT, FISHER, VALUE, Workspace, add_curvature, sum_some_pieces
from .interpolation import positive
from .layout import Arrays
from .outer_products import add_outer_products
from .vectors import dot


@kernel
def add_components(
    arrays: Arrays,
    tile: int,
    x: Floats,
    counts: Floats,
    gamma_centres: Floats,
    mode: int,
    gradient: Floats,
    hessian: Floats,
    work: Workspace,
) -> float:
    """-ln L of the tile, whose plain sums are in the workspace; adds to gradient and Hessian (lower triangle)."""
    value: float = _solve_bins(arrays, tile, counts, gamma_centres, mode, work)
    if mode == VALUE:
        return value
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    work.lanes[1, :length] = 0.0
    add_outer_products(arrays, tile, gradient, hessian, work)  # expected Hessian, or what the protection adds
    begin, end = arrays.tile_rows[tile], arrays.tile_rows[tile + 1]
    stride = work.rows.shape[1]
    for j in range(begin, end):
        work.variance_rows[arrays.rows[j], :length] = 0.0
    first_piece = arrays.tile_pieces[tile]
    for piece in range(first_piece, arrays.tile_pieces[tile + 1]):
        sum_some_pieces(arrays, tile, piece, piece + 1, x, FISHER, work)
        place = piece - first_piece
        derivative, product = work.shares[1, place], work.lanes[3]
        b, own = work.shares[2, place], work.shares[3, place]
        for j in range(begin, end):
            p = arrays.rows[j]
            row = work.rows[p]
            if not _any(row, length):
                continue
            gradient[p] += dot(derivative, 0, row, 0, length)
            if mode == EXACT:
                for i in range(length):
                    work.variance_rows[p, i] += b[i] * row[i]
                    product[i] = own[i] * row[i]
                for l in range(begin, j + 1):
                    q = arrays.rows[l]
                    hessian[p, q] -= dot(product, 0, work.rows, q * stride, length)
        if mode == EXACT:
            work.lanes[1, :length] = derivative[:length]
            add_curvature(arrays, tile, piece, piece + 1, x, hessian, work)
    if mode == EXACT:
        for j in range(begin, end):
            p = arrays.rows[j]
            work.rows[p, :length] = work.variance_rows[p, :length]
        work.lanes[1, :length] = 0.0
        work.lanes[2, :length] = work.lanes[5, :length]
        add_outer_products(arrays, tile, gradient, hessian, work)
    return value


@kernel
def _any(row: Floats, length: int) -> bool:
    found = False
    for i in range(length):
        found = found or row[i] != 0.0
    return found


@kernel
def _solve_bins(arrays: Arrays, tile: int, counts: Floats, gamma_centres: Floats, mode: int, work: Workspace) -> float:
    """-ln L of the tile's bins; leaves the derivatives in each component's contents in the workspace."""
    first = arrays.tile_first[tile]
    length = arrays.tile_first[tile + 1] - first
    filled = arrays.tile_filled[tile]
    first_piece, end = arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1]
    pieces = end - first_piece
    # Toys move each component by itself; otherwise there is one centre a bin.
    each = gamma_centres.shape[0] != arrays.floor.shape[0]
    m, inverse, centre = work.one_bin[0, :pieces], work.one_bin[1, :pieces], work.one_bin[2, :pieces]
    total = 0.0
    below = 0
    for i in range(filled):
        n, plain = counts[first + i], work.lanes[0, i]
        mu, slope, curvature = positive(plain, arrays.floor[first + i])
        below += plain < arrays.floor[first + i]
        spread = 0.0
        for j in range(pieces):
            offset = arrays.piece_offset[first_piece + j]
            m[j] = work.scales[arrays.piece_component[first_piece + j]] * work.pieces[j, i]
            inverse[j] = arrays.inverse_effective[offset + i]
            centre[j] = gamma_centres[offset + i] if each else gamma_centres[first + i]
            spread += m[j] * m[j] * inverse[j]
        t, inverse_d = solve_bin(n, m, inverse, centre, mu - plain)
        total += exact_value(n, m, inverse, centre, mu - plain, t)
        if mode == VALUE:
            continue
        for j in range(pieces):
            share = 1.0 / (1.0 + m[j] * inverse[j] * t)
            b = centre[j] * share * share
            work.shares[1, j, i] = t * (centre[j] * share + slope - 1.0)
            work.shares[2, j, i] = b + slope - 1.0
            work.shares[3, j, i] = t * t * b * inverse[j]
        work.lanes[5, i] = inverse_d
        work.lanes[2, i] = t * curvature if mode == EXACT else slope * slope / (mu + spread)
    work.protected[0] += below
    work.lanes[2, filled:length] = 0.0
    work.lanes[5, filled:length] = 0.0
    work.shares[:, :pieces, filled:length] = 0.0
    return total
