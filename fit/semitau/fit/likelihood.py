"""The extended binned likelihood with its exact gradient and Hessian, compiled, without allocation.

For counts n, expectations μ(parameters), and per bin a factor γ for the finite templates, whose auxiliary measurement
γ₀ (1 in real data, fluctuating in toys) has the squared relative error v of the bin's expectation:

    -ln L = Σ_bins [ γμ - n + n ln(n/γμ) + (γ - γ₀)²/2v ] + Σ_constraints (θ - θ₀)²/2σ²

This is counted from the saturated model (γμ = n, γ = γ₀, θ = θ₀), so twice its minimum is the likelihood-ratio
statistic of Baker and Cousins, NIM 221 (1984) 437. One γ per bin is the light version of the method of Barlow and
Beeston, as in J. S. Conway, arXiv:1103.0354: at given μ the best γ solves γ² + γ(μv - γ₀) - nv = 0. With γ profiled,

    d(-ln L)/dμ = γ - n/μ,    d²(-ln L)/dμ² = n/μ² + dγ/dμ,    dγ/dμ = -γv/√((μv - γ₀)² + 4nv),

and the expected second derivative is 1/(μ + μ²v), the inverse of the sum of both variances. In a bin without counts
γ = max(0, γ₀ - μv): there the second derivative is negative, which is why the exact Hessian alone is not enough.
v is kept at its value at the injected parameters.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from semitau.core.compiled import inlined, kernel
from semitau.core.elementary import log
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
    lanes: Floats  # (5, lanes of a tile): plain sum, first derivative, weight, product, -ln L
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
        np.zeros((5, lanes)),
        np.zeros(arrays.component_first.size - 1),
        np.zeros((parameters, 3)),
        np.zeros(1, dtype=np.int64),
    )


@inlined
def deviance(n: float, mu: float) -> float:
    """μ - n + n ln(n/μ), accurate to its own last digits: n and μ cancel down to the square of their distance.

    ln(n/μ) = 2 artanh(r) with r = (n - μ)/(n + μ), which gives (n - μ) r + 2n (artanh(r) - r); the series for small r.
    """
    total = n + mu
    r = (n - mu) / total if total > 0.0 else 0.0
    t = r * r
    series = t * r * (1 / 3 + t * (1 / 5 + t * (1 / 7 + t * (1 / 9 + t * (1 / 11 + t * (1 / 13 + t * (1 / 15)))))))
    near = (n - mu) * r + 2.0 * n * series
    far = mu - n + n * log(n / mu if n > 0.0 else 1.0)
    return near if t < 0.01 else far


@inlined
def bin_terms(mu: float, n: float, centre: float, variance: float) -> tuple[float, float, float, float]:
    """One bin with γ profiled: -ln L from the saturated model, its first and second derivative in μ, and γ."""
    b = mu * variance - centre
    root = np.sqrt(b * b + 4.0 * n * variance)
    # Both are the positive root; the first has no cancellation where b > 0. Without counts it is max(0, -b).
    gamma = 2.0 * n * variance / (b + root) if b > 0.0 else 0.5 * (root - b)
    seen = n > 0.0
    # (γ - γ₀)/v = n/γ - μ at the root: of both ways to the difference the one that loses fewer digits.
    pull = variance * (n / gamma - mu) if seen and mu * variance < 1.0 else gamma - centre
    value = deviance(n, gamma * mu) + (0.5 * pull * pull / variance if variance > 0.0 else 0.0)
    first = gamma - n / mu
    second = n / (mu * mu) - (gamma * variance / root if root > 0.0 else 0.0)
    return value, first, second, gamma


@inlined
def scale_of(arrays: Arrays, component: int, x: Floats, skip: int, skip_too: int) -> float:
    """Product of a component's scale parameters over their injected values, without up to two of them."""
    product = 1.0
    for i in range(arrays.component_first[component], arrays.component_first[component + 1]):
        p = arrays.component_scales[i]
        if p != skip and p != skip_too:
            product *= x[p] * arrays.inverse_injected[p]
    return product


@kernel
def evaluate(
    arrays: Arrays,
    x: Floats,
    counts: Floats,
    gamma_centres: Floats,
    centres: Floats,
    mode: int,
    gradient: Floats,
    hessian: Floats,
    work: Workspace,
) -> float:
    """-ln L at the parameters x, from the saturated model; fills gradient (p,) and hessian (p, p) as `mode` asks.

    counts, gamma_centres : (lanes,); centres : (p,) auxiliary measurements of the constrained parameters.
    """
    parameters = x.shape[0]
    value = 0.0
    work.protected[0] = 0
    for p in range(parameters):
        pull = x[p] - centres[p]
        value += 0.5 * pull * pull * arrays.inverse_variance[p]
        work.bends[p, 0], work.bends[p, 1], work.bends[p, 2] = bend(x[p])
        if mode != VALUE:
            gradient[p] = pull * arrays.inverse_variance[p]
            hessian[p, :] = 0.0
            hessian[p, p] = arrays.inverse_variance[p]
    for c in range(work.scales.shape[0]):
        work.scales[c] = scale_of(arrays, c, x, -1, -1)
    for tile in range(arrays.tile_filled.shape[0]):
        sum_pieces(arrays, tile, x, mode, work)
        value += sum_bins(arrays, tile, counts, gamma_centres, mode, work)
        if mode != VALUE:
            add_outer_products(arrays, tile, gradient, hessian, work)
        if mode == EXACT:
            add_curvature(arrays, tile, x, hessian, work)
    if mode != VALUE:
        for p in range(parameters):
            for q in range(p):
                hessian[q, p] = hessian[p, q]
    return value


@kernel
def sum_pieces(arrays: Arrays, tile: int, x: Floats, mode: int, work: Workspace) -> None:
    """The plain sum of the tile's lanes and its derivatives."""
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    total = work.lanes[0]
    total[:length] = 0.0
    if mode != VALUE:
        for i in range(arrays.tile_rows[tile], arrays.tile_rows[tile + 1]):
            work.rows[arrays.rows[i], :length] = 0.0
    first_piece = arrays.tile_pieces[tile]
    for piece in range(first_piece, arrays.tile_pieces[tile + 1]):
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
                factor = scale_of(arrays, component, x, p, -1) * arrays.inverse_injected[p]
                row = work.rows[p]
                for i in range(length):
                    row[i] += factor * contents[i]


@kernel
def sum_bins(arrays: Arrays, tile: int, counts: Floats, gamma_centres: Floats, mode: int, work: Workspace) -> float:
    """-ln L of the tile's bins; leaves first derivative and weight with respect to the plain sum in the workspace."""
    first = arrays.tile_first[tile]
    length = arrays.tile_first[tile + 1] - first
    filled = arrays.tile_filled[tile]
    plain, derivative, weight, terms = work.lanes[0], work.lanes[1], work.lanes[2], work.lanes[4]
    n, centre = counts[first:], gamma_centres[first:]
    floor, variance = arrays.floor[first:], arrays.template_variance[first:]
    for i in range(length):
        mu, slope, curvature = positive(plain[i], floor[i])
        terms[i], d, second, _ = bin_terms(mu, n[i], centre[i], variance[i])
        derivative[i] = d * slope
        exact = second * slope * slope + d * curvature
        weight[i] = exact if mode == EXACT else slope * slope / (mu + mu * mu * variance[i])
    below = 0
    for i in range(filled):
        below += plain[i] < floor[i]
    work.protected[0] += below
    derivative[filled:length] = 0.0
    weight[filled:length] = 0.0
    total = 0.0
    for i in range(filled):
        total += terms[i]
    return total


@kernel
def add_outer_products(arrays: Arrays, tile: int, gradient: Floats, hessian: Floats, work: Workspace) -> None:
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    stride = work.rows.shape[1]
    derivative, weight, product = work.lanes[1], work.lanes[2], work.lanes[3]
    begin, end = arrays.tile_rows[tile], arrays.tile_rows[tile + 1]
    for j in range(begin, end):
        p = arrays.rows[j]
        row = work.rows[p]
        gradient[p] += dot(derivative, 0, row, 0, length)
        for i in range(length):
            product[i] = weight[i] * row[i]
        for l in range(begin, j + 1):
            q = arrays.rows[l]
            hessian[p, q] += dot(product, 0, work.rows, q * stride, length)


@kernel
def add_curvature(arrays: Arrays, tile: int, x: Floats, hessian: Floats, work: Workspace) -> None:
    """First derivative in the expectation times the expectation's second derivatives; lower triangle only."""
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    derivative = work.lanes[1]
    first_piece = arrays.tile_pieces[tile]
    for piece in range(first_piece, arrays.tile_pieces[tile + 1]):
        component = arrays.piece_component[piece]
        begin, end = arrays.component_first[component], arrays.component_first[component + 1]
        if end - begin > 1:
            contents = dot(derivative, 0, work.pieces, (piece - first_piece) * work.pieces.shape[1], length)
            for j in range(begin, end):
                for l in range(begin, j):
                    p, q = arrays.component_scales[j], arrays.component_scales[l]
                    factor = scale_of(arrays, component, x, p, q)
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
                hessian[k, p] += scale_of(arrays, component, x, p, -1) * arrays.inverse_injected[p] * shift


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
    for p in range(x.shape[0]):
        work.bends[p, 0], work.bends[p, 1], work.bends[p, 2] = bend(x[p])
    for c in range(work.scales.shape[0]):
        work.scales[c] = scale_of(arrays, c, x, -1, -1)
    for tile in range(arrays.tile_filled.shape[0]):
        sum_pieces(arrays, tile, x, VALUE, work)
        first = arrays.tile_first[tile]
        for lane in range(first, arrays.tile_first[tile + 1]):
            plain[lane] = work.lanes[0, lane - first]
            out[lane] = positive(plain[lane], arrays.floor[lane])[0]
