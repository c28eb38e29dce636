"""What poor templates do to a fit besides widening it: bias, and errors that are too small.

Noise makes components that look alike look different. The fit takes it for information: it is pulled, and reports an
error that is too small (poor_templates.py, from which these are the leading terms). With c_k the expectation of
component k in a bin, ∂c_k its derivatives, v_k c_k² its variance, μ = Σ c_k, v the relative variance of the bin at
the injected point, and r the row of the inverse information that belongs to a ratio, the noise of the components k of a
sample adds

    bias of the ratio          - r · Σ_bins (Σ_k v_k c_k ∂c_k/μ - v ∂μ)
    false information          r · Σ_bins (Σ_k v_k ∂c_k ∂c_kᵀ/μ - v ∂μ ∂μᵀ/μ) · r     over the variance of the ratio:

the part by which the reported variance is too small. Both fall as 1/f with f times the events, faster than the
template error itself, which falls as 1/√f; so they matter where events are few.

All this is of the light form, with one factor for a bin. A fit that takes its templates as exact has v = 0, and leaves
out the template error itself besides. The other forms let each component fluctuate, which takes the bias away; their
errors are too small as well, but by how much is not worked out here.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.compiled import kernel
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats

from ..fitting.model import Model
from ..likelihood.expectation import FISHER, Workspace, set_point, sum_some_pieces, workspace
from ..likelihood.layout import Arrays
from .template_costs import event_numbers


@dataclass(frozen=True, eq=False)
class TemplateBias:
    """(ratios, samples) arrays, to first order with the events as they are; with f times the events over f.

    bias : of the fitted ratio. understated : part by which the reported variance is too small; may be negative.
    bias_error, understated_error : from the finite numbers of events that they are known from.
    """

    ratios: tuple[str, ...]
    samples: tuple[str, ...]
    bias: Floats
    bias_error: Floats
    understated: Floats
    understated_error: Floats


def bias_is_known(model: Model) -> bool:
    """Whether `template_bias` can tell: not for fitted coefficients, nor for forms with factors of components."""
    return not model.coefficients and (model.likelihood == "light" or not model.template_statistics)


def template_bias(
    model: Model,
    samples: Mapping[str, Sequence[str]] | None = None,
    injected: Mapping[str, float] | ArrayLike | None = None,
) -> TemplateBias:
    """Bias and false information from the templates of each sample.

    samples : as in `event_numbers`. injected : true values, other than those of the templates.

    Raises InputError as `event_numbers`, and for a model with fitted coefficients or another form of the likelihood
    than the light one; RunError as `event_numbers`.
    """
    where = "bias from poor templates"
    if model.coefficients:
        raise InputError(Problem("is not known while coefficients are fitted", where))
    if not bias_is_known(model):
        raise InputError(Problem("is not known for this form of the likelihood", where, model.likelihood, "light"))
    numbers = event_numbers(model, samples)
    samples = {name: (name,) for name in numbers.samples} if samples is None else samples
    components = [component.name for component in model.templates.components]
    values = model.holding(model.values(injected))
    arrays, free = model.layout.arrays, model.free
    lanes = arrays.floor.size
    contents, rows = np.zeros((len(components), lanes)), np.zeros((len(components), lanes, values.size))
    _fill(arrays, np.array(values), workspace(arrays), contents, rows)
    there = model.layout.lane_bin >= 0
    contents = contents[:, there]
    rows = (rows[:, there] @ model.jacobian(values))[:, :, free]
    relative = _relative_variances(arrays, len(components))[:, there]
    mu, whole = np.maximum(contents.sum(axis=0), 1e-300), rows.sum(axis=0)
    reach = numbers.reach(np.inf)  # (free, ratios)
    along, together = rows @ reach, whole @ reach  # (components, bins, ratios), (bins, ratios)
    exact = numbers.errors(np.inf)
    # Of each bin of each component; its number of effective events is 1/relative.
    own = relative[:, :, None]
    spread = _spread_at_injection(model, components)[:, there][:, :, None] * float(model.template_statistics)
    pulls = -(own * contents[:, :, None] * along / mu[:, None] - spread * together)
    false = (own * along**2 / mu[:, None] - spread * together**2 / mu[:, None]) * (1.0 / exact**2)
    members = np.array([[float(c in names) for c in components] for names in samples.values()])
    members = members.reshape(len(samples), len(components))

    def summed(terms: Floats) -> tuple[Floats, Floats]:
        # Every term is proportional to the number of events in its bin.
        total, error = terms.sum(axis=1), np.sqrt((terms**2 * own).sum(axis=1))
        return (members @ total).T, np.sqrt(members @ error**2).T

    understated, unsure = summed(false)
    if not model.template_statistics:
        understated = understated + numbers.first_order() / exact[:, None] ** 2
        unsure = np.hypot(unsure, numbers.first_order_errors() / exact[:, None] ** 2)
    return TemplateBias(numbers.ratios, numbers.samples, *summed(pulls), understated, unsure)


def _relative_variances(arrays: Arrays, components: int) -> Floats:
    """(components, lanes) variance over squared contents; 0 where nothing is expected."""
    found = np.zeros((components, arrays.floor.size))
    for tile in range(arrays.tile_filled.size):
        first, filled = int(arrays.tile_first[tile]), int(arrays.tile_filled[tile])
        for piece in range(int(arrays.tile_pieces[tile]), int(arrays.tile_pieces[tile + 1])):
            begin = int(arrays.piece_offset[piece])
            here = arrays.inverse_effective[begin : begin + filled]
            found[int(arrays.piece_component[piece]), first : first + filled] = here
    return found


def _spread_at_injection(model: Model, components: Sequence[str]) -> Floats:
    """(components, lanes) part of the fit's relative variance of the bin, which is that of the injected point."""
    arrays = model.layout.arrays
    found = np.zeros((len(components), arrays.floor.size))
    total = np.zeros(arrays.floor.size)
    for tile in range(arrays.tile_filled.size):
        first, filled = int(arrays.tile_first[tile]), int(arrays.tile_filled[tile])
        for piece in range(int(arrays.tile_pieces[tile]), int(arrays.tile_pieces[tile + 1])):
            begin = int(arrays.piece_offset[piece])
            here = slice(begin, begin + filled)
            total[first : first + filled] += arrays.nominal[here]
            found[int(arrays.piece_component[piece]), first : first + filled] = arrays.variance[here]
    return np.where(total > 0.0, found / np.where(total > 0.0, total, 1.0) ** 2, 0.0)


@kernel
def _fill(arrays: Arrays, x: Floats, work: Workspace, contents: Floats, rows: Floats) -> None:
    set_point(arrays, x, work)
    for tile in range(arrays.tile_filled.shape[0]):
        first = arrays.tile_first[tile]
        for piece in range(arrays.tile_pieces[tile], arrays.tile_pieces[tile + 1]):
            c = arrays.piece_component[piece]
            sum_some_pieces(arrays, tile, piece, piece + 1, x, FISHER, work)
            for i in range(arrays.tile_filled[tile]):
                contents[c, first + i] = work.lanes[0, i]
                for j in range(arrays.tile_rows[tile], arrays.tile_rows[tile + 1]):
                    p = arrays.rows[j]
                    rows[c, first + i, p] = work.rows[p, i]
