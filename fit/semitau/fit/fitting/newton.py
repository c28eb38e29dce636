"""Maximum of the likelihood by damped Newton steps with exact derivatives.

Far from the minimum of -ln L the steps use the expected (Fisher) Hessian, which is never indefinite; from an estimated
distance below 1 (half a unit of 2 ln L is one standard deviation) the exact one, which converges quadratically. Each
step is halved until -ln L falls enough. Where the exact Hessian is indefinite the step falls back to the expected one,
and where that is singular (parameters that do the same) a small ridge keeps the step in the other directions.

Steps are taken in coordinates in which the expectation is as linear as it can be: a ratio that multiplies a yield is
replaced by their product, so that a yield near zero on the way, or a start there, does no harm.

Parameters have no bounds unless asked: a ratio or yield may come out negative, which keeps the mean of many fits
unbiased. With bounds the method is that of active sets: a parameter that -ln L presses against its bound is left out of
the step, a step ends at the first bound, and the minimum is one where every gradient points out of the allowed range.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.compiled import kernel
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats

from ..likelihood.constraints import Constraints
from ..likelihood.functions import slopes
from ..likelihood.layout import Arrays, Indices
from ..likelihood.likelihood import EXACT, FISHER, Workspace, evaluate, has_hold, workspace
from .algebra import factorise, inverse_diagonal, solve
from .data import Data, Source
from .ending import CONVERGED, FLAT, NO_MINIMUM, NOT_FINITE, RUNAWAY, STALLED, TOO_LONG, Ending
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
    slope: Floats  # (parameters,) gradient in the coordinates of the steps
    curve: Floats  # (parameters, parameters) Hessian there
    work: Workspace


def scratch(arrays: Arrays) -> Scratch:
    n = arrays.inverse_variance.size
    v, m = [np.zeros(n) for _ in range(6)], [np.zeros((n, n)) for _ in range(4)]
    return Scratch(v[0], m[0], v[1], m[1], v[2], m[2], v[3], v[4], v[5], m[3], workspace(arrays))


@kernel
def minimise(
    arrays: Arrays, free: Indices, counts: Floats, gamma_centres: Floats, centres: Floats, x: Floats, s: Scratch
) -> Ending:
    """Move the free parameters of x to the minimum of -ln L within their bounds.

    counts, gamma_centres : (lanes,); centres : (parameters,). When it converged, s.lower and s.scale hold the factor
    of the exact Hessian at x.
    """
    known = arrays.constraints
    mate = _mates(arrays, free)
    for p in free:
        x[p] = min(max(x[p], known.lower[p]), known.upper[p])
    mode = FISHER
    value = evaluate(arrays, x, counts, gamma_centres, centres, mode, s.gradient, s.hessian, s.work)
    evaluations = 1
    distance = np.inf
    for step in range(STEPS_AT_MOST):
        was_exact = mode == EXACT
        to_steps(free, mate, x, mode == EXACT, s)
        moving = _not_pressed(known, free, x, s.slope)
        definite = factorise(s.curve, moving, 0.0, s.scale, s.lower)
        if not definite and was_exact:
            mode = FISHER
            evaluate(arrays, x, counts, gamma_centres, centres, mode, s.gradient, s.hessian, s.work)
            evaluations += 1
            to_steps(free, mate, x, False, s)
            definite = factorise(s.curve, moving, 0.0, s.scale, s.lower)
        flat = not definite
        for ridge in _RIDGES:
            if not definite:
                definite = factorise(s.curve, moving, ridge, s.scale, s.lower)
        if not (definite and np.isfinite(value)):
            return Ending(NOT_FINITE, value, distance, step, evaluations)
        solve(s.lower, s.scale, moving, s.slope, s.step)
        while True:  # a step that would leave a bound it stands on is taken without that parameter
            inside = _inside(known, moving, x, s.step)
            if inside.shape[0] == moving.shape[0]:
                break
            moving = inside
            factorise(s.curve, moving, _RIDGES[0] if flat else 0.0, s.scale, s.lower)
            solve(s.lower, s.scale, moving, s.slope, s.step)
        n = moving.shape[0]
        distance = 0.0
        for i in range(n):
            distance += 0.5 * s.slope[moving[i]] * s.step[i]
        if distance < DISTANCE and was_exact:
            if mode == EXACT:
                status = CONVERGED if _all_held(arrays, free, x, s.work) else RUNAWAY
                if status == CONVERGED and not _factorise_at_end(free, moving, s):
                    status = FLAT
                return Ending(status, value, distance, step, evaluations)
            return Ending(FLAT if flat else NO_MINIMUM, value, distance, step, evaluations)

        next_mode = EXACT if distance < 1.0 else FISHER
        length = _room(known, moving, x, s.step)
        accepted = False
        while length > 1e-9:
            _take(known, moving, mate, x, length, s.step, s.trial)
            trial = evaluate(
                arrays, s.trial, counts, gamma_centres, centres, next_mode, s.trial_gradient, s.trial_hessian, s.work
            )
            evaluations += 1
            enough = value - 1e-4 * length * 2.0 * distance + 1e-13 * (1.0 + abs(value))
            if trial <= enough or (distance < ROUNDING and trial < value + ROUNDING):
                accepted = True
                break
            length *= 0.5
        if not accepted:
            return Ending(STALLED, value, distance, step, evaluations)
        x[:] = s.trial
        s.gradient[:] = s.trial_gradient
        s.hessian[:, :] = s.trial_hessian
        value = trial
        mode = next_mode
    return Ending(TOO_LONG, value, distance, STEPS_AT_MOST, evaluations)


@kernel
def _mates(arrays: Arrays, free: Indices) -> Indices:
    """arrays.mate where both parameters are free, -1 elsewhere."""
    mate = np.full(arrays.mate.shape[0], -1, np.int64)
    for p in free:
        for q in free:
            if arrays.mate[p] == q:
                mate[p] = q
    return mate


@kernel
def to_steps(free: Indices, mate: Indices, x: Floats, exact: bool, s: Scratch) -> None:
    """Gradient and Hessian in the coordinates of the steps: a parameter with a mate is replaced by their product.

    Where a ratio multiplies a yield, templates are linear in the product and the yield, and near a yield of zero only
    those are well behaved. With u = R y: dR = du/y - (R/y) dy, and the second derivatives of R come with its slope.
    """
    s.slope[:] = s.gradient
    s.curve[:, :] = s.hessian
    for p in free:
        y = mate[p]
        if y < 0:
            continue
        inverse = 1.0 / _nonzero(x[y])
        share = -x[p] * inverse
        slope = s.slope[p]
        s.slope[y] += share * slope
        s.slope[p] *= inverse
        s.curve[y, :] += share * s.curve[p, :]
        s.curve[:, y] += share * s.curve[:, p]
        s.curve[p, :] *= inverse
        s.curve[:, p] *= inverse
        if exact:
            s.curve[p, y] -= slope * inverse * inverse
            s.curve[y, p] -= slope * inverse * inverse
            s.curve[y, y] += 2.0 * slope * x[p] * inverse * inverse


@kernel
def _nonzero(value: float) -> float:
    tiny = 1e-12
    return (tiny if value >= 0.0 else -tiny) if abs(value) < tiny else value


@kernel
def _not_pressed(known: Constraints, free: Indices, x: Floats, slope: Floats) -> Indices:
    """The free parameters but those that -ln L presses against a bound."""
    moving = np.empty_like(free)
    n = 0
    for p in free:
        if not ((x[p] <= known.lower[p] and slope[p] > 0.0) or (x[p] >= known.upper[p] and slope[p] < 0.0)):
            moving[n] = p
            n += 1
    return moving[:n].copy()


@kernel
def _inside(known: Constraints, moving: Indices, x: Floats, step: Floats) -> Indices:
    """The moving parameters but those that stand on a bound which their step would cross."""
    inside = np.empty_like(moving)
    n = 0
    for i in range(moving.shape[0]):
        p = moving[i]
        if not ((x[p] <= known.lower[p] and step[i] > 0.0) or (x[p] >= known.upper[p] and step[i] < 0.0)):
            inside[n] = p
            n += 1
    return inside[:n].copy()


@kernel
def _room(known: Constraints, moving: Indices, x: Floats, step: Floats) -> float:
    """The part of the step, up to all of it, that leads to the first bound."""
    length = 1.0
    for i in range(moving.shape[0]):
        p = moving[i]
        if x[p] - length * step[i] < known.lower[p]:
            length = (x[p] - known.lower[p]) / step[i]
        if x[p] - length * step[i] > known.upper[p]:
            length = (x[p] - known.upper[p]) / step[i]
    return max(length, 2e-9)  # a parameter may stand closer to its bound than any step: it is then put on it


@kernel
def _take(
    known: Constraints, moving: Indices, mate: Indices, x: Floats, length: float, step: Floats, out: Floats
) -> None:
    """The point after a part of the step."""
    out[:] = x
    for i in range(moving.shape[0]):
        p = moving[i]
        if mate[p] < 0:
            out[p] = min(max(x[p] - length * step[i], known.lower[p]), known.upper[p])
            near = 1e-12 * (1.0 + abs(out[p]))
            if out[p] - known.lower[p] < near:
                out[p] = known.lower[p]
            elif known.upper[p] - out[p] < near:
                out[p] = known.upper[p]
    for i in range(moving.shape[0]):
        p = moving[i]
        if mate[p] >= 0:
            out[p] = (x[p] * _nonzero(x[mate[p]]) - length * step[i]) / _nonzero(out[mate[p]])


@kernel
def _factorise_at_end(free: Indices, moving: Indices, s: Scratch) -> bool:
    """Factor of the exact Hessian in the parameters themselves.

    Parameters pressed against a bound are in it: their errors are those of the curvature there. Where that is not
    positive, they count as held.
    """
    if factorise(s.hessian, free, 0.0, s.scale, s.lower):
        return True
    if moving.shape[0] == free.shape[0]:
        return False
    s.curve[:, :] = s.hessian
    for p in free:
        held = True
        for q in moving:
            held = held and q != p
        if held:
            own = max(s.hessian[p, p], 1e-300)
            s.curve[p, :] = 0.0
            s.curve[:, p] = 0.0
            s.curve[p, p] = own
    s.hessian[:, :] = s.curve
    return bool(factorise(s.hessian, free, 0.0, s.scale, s.lower))


@kernel
def errors_at(arrays: Arrays, free: Indices, x: Floats, s: Scratch, errors: Floats) -> None:
    """Errors (parameters,) from the factor that `minimise` left; 0 for parameters that were held."""
    n = free.shape[0]
    inverse_diagonal(s.lower, s.scale, n, s.step, s.trial)
    for j in range(n):
        errors[free[j]] = np.sqrt(s.trial[j])
    f = arrays.functions
    for i in range(f.parameter.shape[0]):
        slopes(f, i, x, s.slope)
        solve(s.lower, s.scale, free, s.slope, s.step)
        variance = 0.0
        for j in range(n):
            variance += s.slope[free[j]] * s.step[j]
        errors[f.parameter[i]] = np.sqrt(variance)


@kernel
def _all_held(arrays: Arrays, free: Indices, x: Floats, work: Workspace) -> bool:
    """Whether every free parameter without constraint still changes a bin that is not under the protection."""
    if work.protected[0] > 0:
        for p in free:
            if arrays.inverse_variance[p] == 0.0 and not _has_hold(arrays, p, x, work):
                return False
    return True


@kernel
def _has_hold(arrays: Arrays, parameter: int, x: Floats, work: Workspace) -> bool:
    """Whether it changes a bin itself, or through a function of it."""
    if has_hold(arrays, parameter, x, work):
        return True
    f = arrays.functions
    for i in range(f.parameter.shape[0]):
        for k in range(f.first_factor[f.first_term[i]], f.first_factor[f.first_term[i + 1]]):
            if f.factor[k] == parameter and has_hold(arrays, f.parameter[i], x, work):
                return True
    return False


def maximise(
    model: Model, data: Source, start: ArrayLike | dict[str, float] | None = None, *, fixed: tuple[str, ...] = ()
) -> FitResult:
    """Fit a model to data.

    data : whatever `Model.data` takes, or `Model.expected_data()`.
    start : values to start from, by name or as a (parameters,) array; default the injected ones. A fit from elsewhere
        is compared with one from the injected values, and the deeper minimum counts.
    fixed : names of parameters to hold at their start value, besides those that the model holds.

    A fit that finds no minimum does not raise: the result says valid=False and gives its reasons.
    Raises InputError for data that do not fit the model.
    """
    checked = model.data(data)
    free = np.array([i for i in model.free if model.names[i] not in _known(model, fixed)], dtype=np.int64)
    x = model.start.copy() if start is None else model.holding(model.values(start))
    ending, s = run(model, checked, free, x)
    if start is not None:
        # From far out no slope may lead back, or only to a minimum of its own with negative yields.
        again = model.start.copy()
        still = np.setdiff1d(np.arange(x.size), free)
        again[still] = x[still]
        second, t = run(model, checked, free, again)
        if second.status == CONVERGED and not (ending.status == CONVERGED and ending.value <= second.value):
            ending, s, x = second, t, again
    return assemble(model, checked, free, x, ending, s.hessian)


def run(model: Model, data: Data, free: Indices, x: Floats) -> tuple[Ending, Scratch]:
    """Minimise in place from x with only `free` moving; the Hessian left behind is the exact one at the end."""
    arrays = model.layout.arrays
    counts, gammas = model.lanes(data.counts, 0.0), model.lanes(data.gamma_centres, 1.0)
    s = scratch(arrays)
    centres = data.centres.copy()  # one that may be written to, as in toys: another kind would be compiled once more
    ending = minimise(arrays, free, counts, gammas, centres, x, s)
    if ending.status != CONVERGED:
        evaluate(arrays, x, counts, gammas, centres, EXACT, s.gradient, s.hessian, s.work)
    return ending, s


def _known(model: Model, names: tuple[str, ...]) -> tuple[str, ...]:
    for name in names:
        model.index(name)
    if not isinstance(names, tuple):
        raise InputError(Problem("give the names to hold as a tuple", "fixed", got=type(names).__name__))
    return names
