"""How many events of each sample to generate when time is short: the least variance for a time, or the least time.

Sample s adds A_s/N_s to a variance with N_s generated events and takes t_s N_s seconds. The least Σ A_s/N_s for a time
T has N_s = λ √(A_s/t_s) with λ = T/Σ √(A_s t_s), and is (Σ √(A_s t_s))²/T: the rule of J. Neyman for stratified samples
with costs (J. R. Stat. Soc. 97 (1934) 558; with costs W. G. Cochran, Sampling Techniques, 1977, section 5.5; from
memory). A sample that would get less than its minimum gets the minimum, and the rule holds for the others.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats


def best_events(gains: ArrayLike, seconds: ArrayLike, time: float, least: ArrayLike = 1.0) -> Floats:
    """(samples,) numbers of events that make Σ gains/events smallest in `time` seconds.

    gains : (samples,) A, variance times events; 0 for a sample that does not matter. seconds : for one event.
    least : events of every sample at least.

    Raises InputError for numbers that make no sense, and for a time that the minimum alone takes up.
    """
    a, t, floor = _checked(gains, seconds, least)
    if not (np.isfinite(time) and time > 0.0):
        raise InputError(Problem("must be positive", "time", f"{time:g}"))
    if floor @ t > time:
        raise InputError(
            Problem(
                "the least numbers of events take longer than that",
                where="time",
                got=f"{time:.3g} s",
                wanted=f"{float(floor @ t):.3g} s or more",
            )
        )
    pace, roots = np.sqrt(a / t), np.sqrt(a * t)
    bound = pace == 0.0
    while not bound.all():
        events = np.where(bound, floor, pace * (time - float(floor[bound] @ t[bound])) / float(roots[~bound].sum()))
        short = ~bound & (events < floor)
        if not short.any():
            return events
        bound |= short  # what it gets more is taken from the others, so that the next round may find another
    return floor


def least_events(gains: ArrayLike, seconds: ArrayLike, variance: float, least: ArrayLike = 1.0) -> Floats:
    """(samples,) numbers of events that reach Σ gains/events = variance in the least time; arguments as above.

    Where the minima alone reach it, it is they.
    """
    a, t, floor = _checked(gains, seconds, least)
    if not (np.isfinite(variance) and variance > 0.0):
        raise InputError(Problem("must be positive", "variance", f"{variance:g}"))
    pace, roots = np.sqrt(a / t), np.sqrt(a * t)
    bound = pace == 0.0
    while not bound.all():
        left = variance - float((a / floor)[bound].sum())  # never zero: who is bound has more than the rule gave
        events = np.where(bound, floor, pace * float(roots[~bound].sum()) / left)
        short = ~bound & (events < floor)
        if not short.any():
            return events
        bound |= short
    return floor


def _checked(gains: ArrayLike, seconds: ArrayLike, least: ArrayLike) -> tuple[Floats, Floats, Floats]:
    a = np.array(gains, dtype=np.float64)
    t, floor = (np.array(np.broadcast_to(np.asarray(given, dtype=np.float64), a.shape)) for given in (seconds, least))
    for what, values, allowed in (
        ("variance times events", a, a >= 0.0),
        ("seconds for an event", t, t > 0.0),
        ("least number of events", floor, floor > 0.0),
    ):
        wrong = ~(allowed & np.isfinite(values))
        if wrong.any():
            wanted = "zero or more" if values is a else "more than zero"
            raise InputError(Problem(what, "allocation of events", f"{values[wrong][0]:g}", wanted))
    return a, t, floor
