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

from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from .bin_statistics import bin_terms as bin_terms
from .bin_statistics import deviance as deviance
from .component_sums import add_components
from .constraints import add_constraints
from .effective_sums import add_variance_products, sum_effective_bins
from .expectation import EXACT as EXACT
from .expectation import FISHER as FISHER
from .expectation import VALUE as VALUE
from .expectation import Workspace as Workspace
from .expectation import add_curvature, set_point, sum_pieces
from .expectation import expectations as expectations
from .expectation import has_hold as has_hold
from .expectation import workspace as workspace
from .functions import pull_back, set_functions
from .interpolation import positive
from .layout import APPROXIMATE, EXACT_BY_COMPONENT, Arrays
from .outer_products import add_outer_products as add_outer_products


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

    Parameters that are functions of others are set in x first; their derivatives go to those that they follow.

    counts : (lanes,); centres : (p,) auxiliary measurements of the constrained parameters.
    gamma_centres : (lanes,), or for the exact form with one number a component as long as arrays.nominal.
    """
    parameters = x.shape[0]
    work.protected[0] = 0
    set_functions(arrays.functions, x)
    value: float = add_constraints(arrays.constraints, x, centres, mode != VALUE, mode == EXACT, gradient, hessian)
    set_point(arrays, x, work)
    for tile in range(arrays.tile_filled.shape[0]):
        sum_pieces(arrays, tile, x, mode, work)
        if arrays.form == EXACT_BY_COMPONENT:
            value += add_components(arrays, tile, x, counts, gamma_centres, mode, gradient, hessian, work)
            continue
        if arrays.form == APPROXIMATE:
            value += sum_effective_bins(arrays, tile, x, counts, gamma_centres, mode, work)
        else:
            value += sum_bins(arrays, tile, counts, gamma_centres, mode, work)
        if mode != VALUE:
            add_outer_products(arrays, tile, gradient, hessian, work)
        if mode != VALUE and arrays.form == APPROXIMATE:
            add_variance_products(arrays, tile, x, mode, gradient, hessian, work)
        if mode == EXACT:
            add_curvature(arrays, tile, arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1], x, hessian, work)
    if mode != VALUE:
        for p in range(parameters):
            for q in range(p):
                hessian[q, p] = hessian[p, q]
        if arrays.functions.parameter.shape[0] > 0:
            pull_back(arrays.functions, x, mode == EXACT, gradient, hessian)
    return value


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
