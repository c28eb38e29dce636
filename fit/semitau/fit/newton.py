"""Maximum of the likelihood by damped Newton steps with exact derivatives.

Far from the minimum of -ln L the steps use the expected (Fisher) Hessian, which is never indefinite; from an estimated
distance below 1 (half a unit of 2 ln L is one standard deviation) the exact one, which converges quadratically. Each
step is halved until -ln L falls enough. Where the exact Hessian is indefinite the step falls back to the expected one,
and where that is singular (parameters that do the same) a small ridge keeps the step in the other directions. There are
no bounds: a ratio or yield may come out negative, which keeps the mean of many fits unbiased.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.compiled import kernel
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats

from .algebra import factorise, solve
from .data import Data, Source
from .ending import CONVERGED, FLAT, NO_MINIMUM, NOT_FINITE, RUNAWAY, STALLED, TOO_LONG, Ending
from .layout import Arrays, Indices
from .likelihood import EXACT, FISHER, Workspace, evaluate, has_hold, workspace
from .model import Model
from .result import FitResult, assemble

STEPS_AT_MOST = 200
DISTANCE = 1e-12
"""Estimated distance to the minimum, in -ln L, at which a fit is done; that is about 1e-6 of an error."""

ROUNDING = 1e-8
"""Distance below which -ln L of many events is too coarse to judge a step by; the gradient is not, so it is taken."""

_RIDGES = (1e-7, 1e-4, 1e-1)


class Scratch(NamedTuple):
    """What one minimisation writes to; `gradient` and `hessian` hold those of the last accepted point."""

    gradient: Floats  # (parameters,)
    hessian: Floats  # (parameters, parameters)
    trial_gradient: Floats
    trial_hessian: Floats
    trial: Floats  # (parameters,)
    lower: Floats  # (free, free) factor of the Hessian
    scale: Floats  # (free,)
    step: Floats  # (free,)
    work: Workspace


def scratch(arrays: Arrays) -> Scratch:
    n = arrays.inverse_variance.size
    vector, matrix = [np.zeros(n) for _ in range(5)], [np.zeros((n, n)) for _ in range(3)]
    return Scratch(
        vector[0], matrix[0], vector[1], matrix[1], vector[2], matrix[2], vector[3], vector[4], workspace(arrays)
    )


@kernel
def minimise(
    arrays: Arrays, free: Indices, counts: Floats, gamma_centres: Floats, centres: Floats, x: Floats, s: Scratch
) -> Ending:
    """Move the free parameters of x to the minimum of -ln L.

    counts, gamma_centres : (lanes,); centres : (parameters,). When it converged, s.lower and s.scale hold the factor
    of the exact Hessian at x.
    """
    n = free.shape[0]
    mode = FISHER
    value = evaluate(arrays, x, counts, gamma_centres, centres, mode, s.gradient, s.hessian, s.work)
    evaluations = 1
    distance = np.inf
    for step in range(STEPS_AT_MOST):
        definite = factorise(s.hessian, free, 0.0, s.scale, s.lower)
        was_exact = mode == EXACT
        if not definite and was_exact:
            mode = FISHER
            evaluate(arrays, x, counts, gamma_centres, centres, mode, s.gradient, s.hessian, s.work)
            evaluations += 1
            definite = factorise(s.hessian, free, 0.0, s.scale, s.lower)
        flat = not definite
        for ridge in _RIDGES:
            if not definite:
                definite = factorise(s.hessian, free, ridge, s.scale, s.lower)
        if not (definite and np.isfinite(value)):
            return Ending(NOT_FINITE, value, distance, step, evaluations)
        solve(s.lower, s.scale, free, s.gradient, s.step)
        distance = 0.0
        for i in range(n):
            distance += 0.5 * s.gradient[free[i]] * s.step[i]
        if distance < DISTANCE and was_exact:
            if mode == EXACT:
                status = CONVERGED if _all_held(arrays, free, x, s.work) else RUNAWAY
                return Ending(status, value, distance, step, evaluations)
            return Ending(FLAT if flat else NO_MINIMUM, value, distance, step, evaluations)

        next_mode = EXACT if distance < 1.0 else FISHER
        length = 1.0
        x_free = s.trial
        x_free[:] = x
        accepted = False
        while length > 1e-9:
            for i in range(n):
                x_free[free[i]] = x[free[i]] - length * s.step[i]
            trial = evaluate(
                arrays, x_free, counts, gamma_centres, centres, next_mode, s.trial_gradient, s.trial_hessian, s.work
            )
            evaluations += 1
            enough = value - 1e-4 * length * 2.0 * distance + 1e-13 * (1.0 + abs(value))
            if trial <= enough or (distance < ROUNDING and trial < value + ROUNDING):
                accepted = True
                break
            length *= 0.5
        if not accepted:
            return Ending(STALLED, value, distance, step, evaluations)
        x[:] = x_free
        s.gradient[:] = s.trial_gradient
        s.hessian[:, :] = s.trial_hessian
        value = trial
        mode = next_mode
    return Ending(TOO_LONG, value, distance, STEPS_AT_MOST, evaluations)


@kernel
def _all_held(arrays: Arrays, free: Indices, x: Floats, work: Workspace) -> bool:
    """Whether every free parameter without constraint still changes a bin that is not under the protection."""
    if work.protected[0] > 0:
        for p in free:
            if arrays.inverse_variance[p] == 0.0 and not has_hold(arrays, p, x, work):
                return False
    return True


def maximise(
    model: Model, data: Source, start: ArrayLike | dict[str, float] | None = None, *, fixed: tuple[str, ...] = ()
) -> FitResult:
    """Fit a model to data.

    data : whatever `Model.data` takes, or `Model.expected_data()`.
    start : values to start from, by name or as a (parameters,) array; default the injected ones.
    fixed : names of parameters to hold at their start value, besides those that the model holds.

    A fit that finds no minimum does not raise: the result says valid=False and gives its reasons.
    Raises InputError for data that do not fit the model.
    """
    checked = model.data(data)
    free = np.array([i for i in model.free if model.names[i] not in _known(model, fixed)], dtype=np.int64)
    x = model.start.copy() if start is None else model.values(start)
    held = [i for i, parameter in enumerate(model.parameters) if parameter.fixed is not None]
    x[held] = model.start[held]
    ending, s = run(model, checked, free, x)
    return assemble(model, checked, free, x, ending, s.hessian)


def run(model: Model, data: Data, free: Indices, x: Floats) -> tuple[Ending, Scratch]:
    """Minimise in place from x with only `free` moving; the Hessian left behind is the exact one at the end."""
    arrays = model.layout.arrays
    counts, gammas = model.lanes(data.counts, 0.0), model.lanes(data.gamma_centres, 1.0)
    s = scratch(arrays)
    ending = minimise(arrays, free, counts, gammas, data.centres, x, s)
    if ending.status != CONVERGED:
        evaluate(arrays, x, counts, gammas, data.centres, EXACT, s.gradient, s.hessian, s.work)
    return ending, s


def _known(model: Model, names: tuple[str, ...]) -> tuple[str, ...]:
    for name in names:
        model.index(name)
    if not isinstance(names, tuple):
        raise InputError(Problem("give the names to hold as a tuple", "fixed", got=type(names).__name__))
    return names
