"""The approximate likelihood of one tile: the variance of the templates moves with the yields.

The variance of a bin is V = Σ_j scale_j² V_j, so -ln L of a bin depends on the expectation μ and on V
(bin_statistics.py). Shifts by nuisances leave V_j as it is.
"""

from __future__ import annotations

from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from .bin_statistics import effective_terms
from .expectation import EXACT, VALUE, Workspace, scale_of
from .interpolation import positive
from .layout import Arrays
from .vectors import dot


@kernel
def sum_effective_bins(
    arrays: Arrays, tile: int, x: Floats, counts: Floats, gamma_centres: Floats, mode: int, work: Workspace
) -> float:
    """-ln L of the tile's bins; leaves all derivatives of the bins in the workspace."""
    first = arrays.tile_first[tile]
    length = arrays.tile_first[tile + 1] - first
    filled = arrays.tile_filled[tile]
    _sum_variances(arrays, tile, x, mode, work)
    plain, variance, terms = work.lanes[0], work.lanes[5], work.lanes[4]
    n, centre, floor = counts[first:], gamma_centres[first:], arrays.floor[first:]
    for i in range(length):
        mu, slope, curvature = positive(plain[i], floor[i])
        value, d, of_v, second, mixed, second_v, _ = effective_terms(mu, n[i], centre[i], variance[i])
        terms[i] = value
        work.lanes[1, i] = d * slope
        exact = second * slope * slope + d * curvature
        work.lanes[2, i] = exact if mode == EXACT else slope * slope / (mu + variance[i])
        work.lanes[6, i] = of_v
        work.lanes[7, i] = mixed * slope
        work.lanes[8, i] = second_v
    below, total = 0, 0.0
    for i in range(filled):
        below += plain[i] < floor[i]
        total += terms[i]
    work.protected[0] += below
    for row in (1, 2, 6, 7, 8):
        work.lanes[row, filled:length] = 0.0
    return total


@kernel
def _sum_variances(arrays: Arrays, tile: int, x: Floats, mode: int, work: Workspace) -> None:
    """V of the tile's lanes and its derivatives in the scale parameters."""
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    total = work.lanes[5]
    total[:length] = 0.0
    for piece in range(arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1]):
        c = arrays.piece_component[piece]
        for j in range(arrays.component_first[c], arrays.component_first[c + 1]):
            work.variance_rows[arrays.component_scales[j], :length] = 0.0
    for piece in range(arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1]):
        c = arrays.piece_component[piece]
        scale = work.scales[c]
        part = arrays.variance[arrays.piece_offset[piece] :]
        for i in range(length):
            total[i] += scale * scale * part[i]
        if mode != VALUE:
            for j in range(arrays.component_first[c], arrays.component_first[c + 1]):
                p = arrays.component_scales[j]
                factor = 2.0 * scale * scale_of(arrays, c, x, j, -1) * arrays.inverse_injected[p]
                for i in range(length):
                    work.variance_rows[p, i] += factor * part[i]


@kernel
def add_variance_products(
    arrays: Arrays, tile: int, x: Floats, mode: int, gradient: Floats, hessian: Floats, work: Workspace
) -> None:
    """What the derivatives of V add to gradient and Hessian (lower triangle; the expected one has none)."""
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    stride = work.rows.shape[1]
    of_v, product = work.lanes[6], work.lanes[3]
    begin, end = arrays.tile_rows[tile], arrays.tile_rows[tile + 1]
    for j in range(begin, end):
        p = arrays.rows[j]
        if not arrays.inverse_injected[p] > 0.0:  # nuisances leave V
            continue
        row = work.variance_rows[p]
        gradient[p] += dot(of_v, 0, row, 0, length)
        if mode != EXACT:
            continue
        for i in range(length):
            product[i] = work.lanes[7, i] * row[i]
        for l in range(begin, end):
            q = arrays.rows[l]
            shared = dot(product, 0, work.rows, q * stride, length)
            hessian[max(p, q), min(p, q)] += 2.0 * shared if p == q else shared
        for i in range(length):
            product[i] = work.lanes[8, i] * row[i]
        for l in range(begin, j + 1):
            q = arrays.rows[l]
            if arrays.inverse_injected[q] > 0.0:
                hessian[p, q] += dot(product, 0, work.variance_rows, q * stride, length)
    if mode == EXACT:
        _add_variance_curvature(arrays, tile, x, hessian, work)


@kernel
def _add_variance_curvature(arrays: Arrays, tile: int, x: Floats, hessian: Floats, work: Workspace) -> None:
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    for piece in range(arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1]):
        c = arrays.piece_component[piece]
        begin, end = arrays.component_first[c], arrays.component_first[c + 1]
        if begin == end:
            continue
        shared = 2.0 * dot(work.lanes[6], 0, arrays.variance, arrays.piece_offset[piece], length)
        for j in range(begin, end):
            p = arrays.component_scales[j]
            first = scale_of(arrays, c, x, j, -1) * arrays.inverse_injected[p]
            for l in range(begin, j + 1):
                q = arrays.component_scales[l]
                other = scale_of(arrays, c, x, l, -1) * arrays.inverse_injected[q]
                second = 0.0  # of the scale itself
                if j != l:
                    second = scale_of(arrays, c, x, j, l) * arrays.inverse_injected[p] * arrays.inverse_injected[q]
                twice = 2.0 if p == q and j != l else 1.0
                hessian[max(p, q), min(p, q)] += twice * shared * (first * other + work.scales[c] * second)
