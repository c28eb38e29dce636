"""Toys: pseudo-data drawn from the model and fitted, thousands of times, on all cores.

In each toy the counts are Poisson numbers about the expectation at the injected values, and every auxiliary measurement
fluctuates too: the centre of each constraint about the injected value, the centre of each bin's template-statistics
factor about 1. So the errors, which contain all of these, must cover. (Keeping the centres in place would make toys
that vary less than the errors say.) Every toy draws from its own numbered stream: the same toys for any number of
workers.

The counts may also be drawn about what another model expects, to see what this model makes of them; the auxiliary
measurements stay those of this model, since they are what its user knows.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from contextlib import closing
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from semitau.core.compiled import kernel
from semitau.core.elementary import normal_pair
from semitau.core.engine import Job, run
from semitau.core.errors import InputError, Problem
from semitau.core.kept import Kept
from semitau.core.streams import event_key, stream_key, uniform
from semitau.core.templates import Floats

from ..fitting.ending import CONVERGED, short_reason
from ..fitting.model import Model
from ..fitting.newton import Scratch, errors_at, minimise, scratch
from ..likelihood.constraints import BLOCK, GAUSSIAN, LOG_NORMAL
from ..likelihood.layout import APPROXIMATE, EXACT_BY_COMPONENT, Arrays, Indices
from .kept_toys import Batch, joined, keeping, kept_batch, toys_key
from .poisson import poisson
from .pulls import Summary, summarise
from .verdict import Verdict, judge

BATCH = 32
"""Toys of a task; the same for any number of workers, though nothing depends on it."""

Report = Callable[[str, int, int], None]

_ZERO, _ONE, _TWO = np.uint64(0), np.uint64(1), np.uint64(2)
_PARAMETERS = np.uint64(1 << 40)
"""Parameters of a toy have keys from here on, bins from 0."""

_TEMPLATES = np.uint64(1 << 41)
"""Keys of the templates' own fluctuations, where they are Poisson numbers."""


@dataclass(frozen=True, eq=False)
class Expectation:
    """What a model expects, for another model to be fitted to.

    counts : (bins,) expected events. true : true value of each of its ratios.
    """

    counts: Floats
    true: Mapping[str, float]

    @classmethod
    def of(cls, model: Model) -> Expectation:
        """What a model expects at its injected values."""
        counts = model.expected_counts()
        counts.flags.writeable = False
        return cls(counts, {name: float(model.injected[model.index(name)]) for name in model.ratios})

    def seen_by(self, model: Model) -> tuple[Floats, float]:
        """(bins,) the counts without those where the model expects none, which no fit can take; and the sum of these.

        Raises InputError when the model has other bins.
        """
        if self.counts.shape != (model.bins,):
            raise InputError(
                Problem("the models have different bins", "expectation", str(self.counts.shape), f"({model.bins},)")
            )
        hollow = model.layout.bin_lane < 0
        return np.where(hollow, 0.0, self.counts), float(self.counts[hollow].sum())


@dataclass(frozen=True, eq=False)
class ToyResults:
    """All fits of one set of toys.

    names : all parameters in the order of the model; `ratios` those of interest (not fixed).
    injected : (parameters,) true values of the toys.
    values, errors : (toys, parameters) fitted values and errors; the errors of failed fits are NaN.
    statuses : (toys,) how each fit ended, 0 for success (ending.py).
    statistics : (toys,) goodness-of-fit statistic of each; its distribution replaces χ² when bins hold few events.
    foreign : whether the counts were drawn about what another model expects; `injected` then has its true ratios.
    """

    names: tuple[str, ...]
    ratios: tuple[str, ...]
    injected: Floats
    values: Floats
    errors: Floats
    statuses: NDArray[np.int64]
    statistics: Floats
    steps: NDArray[np.int64]
    seed: int
    foreign: bool = False

    @property
    def number(self) -> int:
        return int(self.statuses.size)

    @property
    def valid(self) -> NDArray[np.bool_]:
        """(toys,) whether the fit succeeded."""
        return np.equal(self.statuses, CONVERGED)

    @property
    def failures(self) -> dict[str, int]:
        """What went wrong -> in how many toys."""
        found, times = np.unique(self.statuses[~self.valid], return_counts=True)
        return {short_reason(int(status)): int(count) for status, count in zip(found, times, strict=True)}

    def fitted(self, name: str) -> Floats:
        """(valid toys,) fitted values of a parameter."""
        return self._column(self.values, name)

    def fit_errors(self, name: str) -> Floats:
        """(valid toys,) errors that the fits gave."""
        return self._column(self.errors, name)

    def pulls(self, name: str) -> Floats:
        """(valid toys,) (fitted - injected)/error."""
        return (self.fitted(name) - float(self.injected[self._index(name)])) / self.fit_errors(name)

    def summary(self, name: str) -> Summary:
        """Bias, pull mean and width, coverage and failures of a parameter."""
        injected = float(self.injected[self._index(name)])
        return summarise(name, injected, self.fitted(name), self.fit_errors(name), self.number)

    def summaries(self) -> dict[str, Summary]:
        """Summary of each ratio."""
        return {name: self.summary(name) for name in self.ratios}

    def verdict(self) -> dict[str, Verdict]:
        """For each ratio, what these toys do and do not show, in words with their significance."""
        return {name: judge(summary) for name, summary in self.summaries().items()}

    def share_above(self, statistic: float) -> float:
        """Share of valid toys with a larger goodness-of-fit statistic: a p-value for bins with any number of events."""
        return float(np.mean(self.statistics[self.valid] > statistic))

    def _column(self, table: Floats, name: str) -> Floats:
        column: Floats = table[self.valid, self._index(name)]
        return column

    def _index(self, name: str) -> int:
        if name not in self.names:
            raise InputError(Problem("there is no such parameter", got=repr(name), wanted=", ".join(self.names)))
        return self.names.index(name)


def run_toys(
    model: Model,
    n: int,
    seed: int,
    workers: int | None = None,
    report: Report | None = None,
    *,
    injected: Mapping[str, float] | ArrayLike | None = None,
    expectation: Expectation | None = None,
    label: str = "toys",
    kept: Kept | None = None,
) -> ToyResults:
    """Draw and fit n toys.

    seed : whole number; toy i depends on (seed, i) alone.
    workers : threads, None for all cores; report : called as report(label, done, n).
    injected : true values, by name over those of the templates, or a (parameters,) array.
    expectation : what another model expects; the counts are drawn about it, with the same random numbers as toys of
        this model, and its ratios are the true ones. Bins where this model expects nothing stay empty.
    kept : toys that are there are not made again, and what is made is put there, also when it is interrupted; toys of
        a smaller or larger number are the same toys.

    Failed fits are counted, not raised. Raises InputError for n < 1, a bad seed, or unknown names.
    """
    check_number(n)
    common = _common(model, seed, injected, expectation)
    truth = common.truth
    key = "" if kept is None else toys_key(common)
    there = None if kept is None else kept_batch(kept, key, truth.size)
    parts = [] if there is None else [there]
    first = 0 if there is None else there[2].size
    tasks = [Job(_batch, common, (begin, min(BATCH, n - begin))) for begin in range(first, n, BATCH)]
    progress = None if report is None else lambda done, _: report(label, min(n, first + done * BATCH), n)
    batches = run(tasks, workers, progress)
    with closing(batches if kept is None else keeping(batches, kept, key, parts)) as made:  # type: ignore[type-var]
        parts = [*parts, *made]
    if expectation is not None:
        truth = truth.copy()
        for name, value in expectation.true.items():
            truth[model.index(name)] = value
    return toy_results(model, truth, joined(parts, n), seed, foreign=expectation is not None)


def check_number(n: int) -> None:
    """Raises InputError unless n is a number of toys."""
    if isinstance(n, bool) or not isinstance(n, int | np.integer) or n < 1:
        raise InputError(Problem("the number of toys must be a whole number", "toys", got=repr(n), wanted="1 or more"))


def toy_results(model: Model, truth: Floats, fits: Batch, seed: int, *, foreign: bool = False) -> ToyResults:
    """All fits of toys of a model, which become read-only."""
    for array in (truth, *fits):
        array.flags.writeable = False
    values, errors, statuses, statistics, steps = fits
    ratios = tuple(name for name in model.ratios if model.parameters[model.index(name)].fixed is None)
    return ToyResults(model.names, ratios, truth, values, errors, statuses, statistics, steps, int(seed), foreign)


def toys_kept(
    model: Model, seed: int, kept: Kept | None, injected: Mapping[str, float] | ArrayLike | None = None
) -> int:
    """How many toys `run_toys` would find kept."""
    if kept is None:
        return 0
    there = kept_batch(kept, toys_key(_common(model, seed, injected, None)), model.injected.size)
    return 0 if there is None else int(there[2].size)


class _Toys(NamedTuple):
    """What all batches have in common, without the model: workers elsewhere need no more."""

    arrays: Arrays
    free: Indices
    stream: np.uint64
    truth: Floats
    start: Floats
    means: Floats


def _common(
    model: Model, seed: int, injected: Mapping[str, float] | ArrayLike | None, expectation: Expectation | None
) -> _Toys:
    truth = model.values(injected)
    start = model.holding(truth)
    means = padded_means(model, truth) if expectation is None else model.lanes(expectation.seen_by(model)[0], 0.0)
    return _Toys(model.layout.arrays, model.free, stream_key(seed, "toys"), truth, start, means)


def _batch(common: _Toys, first: int, size: int) -> Batch:
    arrays, free, stream, truth, start, means = common
    fits = unfitted(size, truth.size)
    exact = arrays.form == EXACT_BY_COMPONENT
    lanes = np.zeros(means.size), np.ones(arrays.nominal.size if exact else means.size)
    _fit_toys(
        arrays, free, stream, np.uint64(first), truth, start, means, *lanes, np.zeros(truth.size), scratch(arrays), fits
    )
    return fits


def unfitted(size: int, parameters: int) -> Batch:
    """Room for the fits of so many toys."""
    tables = np.zeros((size, parameters)), np.zeros((size, parameters))
    return *tables, np.zeros(size, np.int64), np.zeros(size), np.zeros(size, np.int64)


def padded_means(model: Model, truth: Floats) -> Floats:
    """(lanes,) expectations, 0 where there is no bin."""
    return np.where(model.layout.lane_bin >= 0, model.lane_expectations(truth), 0.0)


@kernel
def draw_toy(
    arrays: Arrays, toy: np.uint64, truth: Floats, means: Floats, counts: Floats, gammas: Floats, centres: Floats
) -> None:
    """Fill counts (lanes,), gammas and centres (parameters,) of the toy with this key.

    gammas : (lanes,), or as long as arrays.nominal for the exact form: each component fluctuates by itself.
    """
    each = gammas.shape[0] != means.shape[0]
    for lane in range(means.shape[0]):
        key = event_key(toy, np.uint64(lane))
        counts[lane] = poisson(means[lane], key, _TWO)
        if each:
            continue
        gammas[lane] = 1.0
        if arrays.template_variance[lane] > 0.0 and arrays.form == APPROXIMATE:
            effective = 1.0 / arrays.template_variance[lane]
            gammas[lane] = poisson(effective, event_key(toy, _TEMPLATES + np.uint64(lane)), _ZERO) / effective
        elif arrays.template_variance[lane] > 0.0:
            normal, _ = normal_pair(uniform(key, _ZERO), uniform(key, _ONE))
            gammas[lane] += np.sqrt(arrays.template_variance[lane]) * normal
    if each:
        for i in range(gammas.shape[0]):
            gammas[i] = 1.0
            if arrays.inverse_effective[i] > 0.0:
                effective = 1.0 / arrays.inverse_effective[i]
                gammas[i] = poisson(effective, event_key(toy, _TEMPLATES + np.uint64(i)), _ZERO) / effective
    _draw_centres(arrays, toy, truth, centres)


@kernel
def _draw_centres(arrays: Arrays, toy: np.uint64, truth: Floats, centres: Floats) -> None:
    """Auxiliary measurements of the constrained parameters; the truth itself for the others."""
    known = arrays.constraints
    for p in range(truth.shape[0]):
        centres[p] = 0.0
        if arrays.inverse_variance[p] > 0.0:
            key = event_key(toy, _PARAMETERS + np.uint64(p))
            centres[p], _ = normal_pair(uniform(key, _ZERO), uniform(key, _ONE))
    for p in range(truth.shape[0] - 1, -1, -1):  # a block mixes the normal numbers of the parameters before
        if known.law[p] == BLOCK:
            total = 0.0
            for q in range(p + 1):
                total += known.factor[p, q] * centres[q]
            centres[p] = truth[p] + total
        elif known.law[p] == LOG_NORMAL:
            centres[p] = truth[p] * np.exp(centres[p] / np.sqrt(arrays.inverse_variance[p]))
        elif known.law[p] == GAUSSIAN:
            centres[p] = truth[p] + centres[p] / np.sqrt(arrays.inverse_variance[p])
        else:
            centres[p] = truth[p]


@kernel
def _fit_toys(
    arrays: Arrays,
    free: Indices,
    stream: np.uint64,
    first: np.uint64,
    truth: Floats,
    start: Floats,
    means: Floats,
    counts: Floats,
    gammas: Floats,
    centres: Floats,
    s: Scratch,
    fits: Batch,
) -> None:
    for i in range(fits[2].shape[0]):
        draw_toy(arrays, event_key(stream, first + np.uint64(i)), truth, means, counts, gammas, centres)
        fit_toy(arrays, free, start, counts, gammas, centres, s, i, fits)


@kernel
def fit_toy(
    arrays: Arrays,
    free: Indices,
    start: Floats,
    counts: Floats,
    gammas: Floats,
    centres: Floats,
    s: Scratch,
    place: int,
    fits: Batch,
) -> None:
    """Fit the toy that `draw_toy` left, into this place of the fits."""
    values, errors, statuses, statistics, steps = fits
    x = values[place]
    x[:] = start
    ending = minimise(arrays, free, counts, gammas, centres, x, s)
    statuses[place] = ending.status
    statistics[place] = 2.0 * ending.value
    steps[place] = ending.steps
    errors[place, :] = 0.0
    if ending.status == CONVERGED:
        errors_at(arrays, free, x, s, errors[place])
    else:
        for j in range(free.shape[0]):
            errors[place, free[j]] = np.nan
