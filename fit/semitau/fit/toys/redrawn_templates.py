"""Toys in which the templates are drawn anew as well, as another set of generated events would show them.

The templates of the model count as the truth. In each toy every content of every component becomes a Poisson number of
its effective counts T²/V (bin_statistics.py) times the factor of that component, with the variance that this sample
shows; its variations keep their relative changes, as weights of the same events do. The data are Poisson numbers of
the true expectation and know nothing of the new templates, constraints fluctuate as in toys.py. The fit takes the new
templates for what they seem to be: what these toys show of pulls and coverage no fit can know by itself.

A bin in which a toy's templates expect nothing is left out of its fit, data and all.

Left out: the true templates are those at hand, which have fluctuations of their own, so that with factors of order 1
components look more different than they are; and nothing fluctuates between plus and minus of a variation.
"""

from __future__ import annotations

from collections.abc import Mapping
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.compiled import kernel
from semitau.core.engine import Job, run
from semitau.core.errors import InputError, Problem
from semitau.core.streams import event_key, stream_key
from semitau.core.templates import Floats

from ..fitting.model import Model
from ..fitting.newton import Scratch, scratch
from ..likelihood.interpolation import FLOOR
from ..likelihood.layout import EXACT_BY_COMPONENT, Arrays, Indices
from .kept_toys import Batch, joined
from .poisson import poisson
from .toys import (
    BATCH,
    Report,
    ToyResults,
    check_number,
    draw_toy,
    fit_toy,
    padded_means,
    toy_results,
    unfitted,
)

_ZERO = np.uint64(0)


def toys_with_new_templates(
    model: Model,
    factors: Mapping[str, float] | float,
    n: int,
    seed: int,
    workers: int | None = None,
    report: Report | None = None,
    *,
    injected: Mapping[str, float] | ArrayLike | None = None,
    label: str = "toys with new templates",
) -> ToyResults:
    """Draw templates and data n times, and fit each.

    factors : times the generated events of the model's templates, one for all components or by component (the others
        have exact templates); inf is exact.
    injected : true values of the toys, as in `run_toys`; other ratios than those of the templates show how far poor
        templates pull the fit towards themselves.
    seed, workers, report : as in `run_toys`; toy i depends on (seed, i) and its factors alone.

    Raises InputError for n < 1, a bad seed, unknown names, factors that are not positive, and fitted coefficients.
    """
    check_number(n)
    if model.coefficients:
        raise InputError(Problem("templates cannot be drawn anew while coefficients are fitted", "toys"))
    thinning = _thinning(model, factors)
    truth = model.values(injected)
    start = model.holding(truth)
    streams = stream_key(seed, "toys"), stream_key(seed, "templates of toys")
    means = padded_means(model, truth)
    common = _Toys(model.layout.arrays, model.template_statistics, thinning, model.free, *streams, truth, start, means)
    tasks = [Job(_batch, common, (first, min(BATCH, n - first))) for first in range(0, n, BATCH)]
    progress = None if report is None else lambda done, _: report(label, min(n, done * BATCH), n)
    return toy_results(model, truth, joined(list(run(tasks, workers, progress))), seed)


def _thinning(model: Model, factors: Mapping[str, float] | float) -> Floats:
    """(components,) one over the factor of each."""
    names = [component.name for component in model.templates.components]
    given = factors if isinstance(factors, Mapping) else dict.fromkeys(names, factors)
    unknown = [name for name in given if name not in names]
    if unknown:
        raise InputError(Problem("there is no such component", "factors", repr(unknown[0]), ", ".join(names)))
    wrong = [f"{name} = {factor:g}" for name, factor in given.items() if not factor > 0.0]
    if wrong:
        raise InputError(Problem("must be positive", "multiples of the generated events", ", ".join(wrong)))
    return np.array([1.0 / given[name] if name in given else 0.0 for name in names])


class _Toys(NamedTuple):
    """What all batches have in common, without the model: workers elsewhere need no more."""

    arrays: Arrays
    counted: bool
    thinning: Floats
    free: Indices
    stream: np.uint64
    template_stream: np.uint64
    truth: Floats
    start: Floats
    means: Floats


def _batch(common: _Toys, first: int, size: int) -> Batch:
    true, counted, thinning, free, stream, template_stream, truth, start, means = common
    fits = unfitted(size, truth.size)
    own = true._replace(
        nominal=true.nominal.copy(),
        odd=true.odd.copy(),
        even=true.even.copy(),
        floor=true.floor.copy(),
        template_variance=true.template_variance.copy(),
        variance=true.variance.copy(),
        inverse_effective=true.inverse_effective.copy(),
    )
    exact = true.form == EXACT_BY_COMPONENT
    lanes = np.zeros(means.size), np.ones(true.nominal.size if exact else means.size), np.ones(means.size)
    _fit_toys(
        true, own, counted, thinning, free, stream, template_stream, np.uint64(first), truth, start, means, *lanes,
        np.zeros(truth.size), scratch(true), fits,
    )  # fmt: skip
    return fits


@kernel
def redraw(true: Arrays, own: Arrays, counted: bool, thinning: Floats, key: np.uint64, there: Floats) -> None:
    """Fill the templates of `own` with one sample of those of `true`.

    counted : whether the fit counts template statistics. thinning : (components,) one over the factor on the events.
    there : (lanes,) becomes 1 for bins that expect something, 0 for those that are left out.
    """
    for tile in range(true.tile_filled.shape[0]):
        first, filled = true.tile_first[tile], true.tile_filled[tile]
        for piece in range(true.tile_pieces[tile], true.tile_pieces[tile + 1]):
            thin = thinning[true.piece_component[piece]]
            begin = true.piece_offset[piece]
            for i in range(filled):
                k = begin + i
                spread = thin * true.inverse_effective[k]
                share = 1.0
                if spread > 0.0:
                    share = poisson(1.0 / spread, event_key(key, np.uint64(k)), _ZERO) * spread
                own.nominal[k] = share * true.nominal[k]
                own.variance[k] = thin * share * true.variance[k]
                own.inverse_effective[k] = spread / share if share > 0.0 else 0.0
                for move in range(true.piece_moves[piece], true.piece_moves[piece + 1]):
                    m = true.move_offset[move] + i
                    own.odd[m] = share * true.odd[m]
                    own.even[m] = share * true.even[m]
        _sum_lanes(true, own, counted, tile, first, filled, there)


@kernel
def _sum_lanes(true: Arrays, own: Arrays, counted: bool, tile: int, first: int, filled: int, there: Floats) -> None:
    for i in range(filled):
        lane = first + i
        before, expected, variance = 0.0, 0.0, 0.0
        for piece in range(true.tile_pieces[tile], true.tile_pieces[tile + 1]):
            k = true.piece_offset[piece] + i
            before += true.nominal[k]
            expected += own.nominal[k]
            variance += own.variance[k]
        there[lane] = 1.0
        own.floor[lane] = true.floor[lane]
        own.template_variance[lane] = 0.0
        if expected > 0.0:
            own.floor[lane] = FLOOR * expected
            own.template_variance[lane] = variance / (expected * expected) if counted else 0.0
        elif before > 0.0:  # nothing is expected any more: no parameter moves it, and it holds no data
            there[lane], own.floor[lane] = 0.0, 1.0
            for piece in range(true.tile_pieces[tile], true.tile_pieces[tile + 1]):
                k = true.piece_offset[piece] + i
                own.nominal[k], own.variance[k], own.inverse_effective[k] = 0.0, 0.0, 0.0
                for move in range(true.piece_moves[piece], true.piece_moves[piece + 1]):
                    m = true.move_offset[move] + i
                    own.odd[m], own.even[m] = 0.0, 0.0


@kernel
def _fit_toys(
    true: Arrays,
    own: Arrays,
    counted: bool,
    thinning: Floats,
    free: Indices,
    stream: np.uint64,
    template_stream: np.uint64,
    first: np.uint64,
    truth: Floats,
    start: Floats,
    means: Floats,
    counts: Floats,
    gammas: Floats,
    there: Floats,
    centres: Floats,
    s: Scratch,
    fits: Batch,
) -> None:
    for i in range(fits[2].shape[0]):
        toy = first + np.uint64(i)
        redraw(true, own, counted, thinning, event_key(template_stream, toy), there)
        draw_toy(own, event_key(stream, toy), truth, means, counts, gammas, centres)
        gammas[:] = 1.0  # here the templates themselves fluctuate, not what is known of them
        for lane in range(counts.shape[0]):
            counts[lane] *= there[lane]
        fit_toy(own, free, start, counts, gammas, centres, s, i, fits)
