"""Events of every sample for a given processor time, and the lines for the study file."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats
from semitau.fit.uncertainty.allocation import best_events, least_events
from semitau.gen.study_file.sizing import SizingSection
from semitau.gen.study_file.sizing_conflicts import ALL

from .part import SizingAllocation, SizingGain, SizingShareOfTime
from .prediction import Prediction
from .samples import Sample

MEDIAN_ERROR = 1.2533
"""Standard error of a median over that of a mean, for a normal distribution: √(π/2)."""


def allocation_part(
    asked: SizingSection, found: Prediction, paces: Mapping[str, Sequence[float]]
) -> SizingAllocation | None:
    """The best allocation; None where events or times are not known.

    No sample gets less than bias and reported errors ask for, unless the time is too short for that.

    paces : sample -> measured seconds of an event, one or more.

    Raises InputError when the least numbers of events take longer than [sizing] seconds.
    """
    names = found.numbers.samples
    if found.events is None or any(not paces.get(name) or not min(paces[name]) > 0.0 for name in names):
        return None
    now = np.array([found.events[name] for name in names], dtype=np.float64)
    times = np.array([np.median(paces[name]) for name in names])
    gains = _gains(asked, found) * now
    time_now = float(times @ now)
    time = asked.seconds or time_now
    least = np.full(now.size, float(asked.least))
    unbiased = np.maximum(least, now * found.needs[1:].max(axis=(0, 1)))
    least = unbiased if unbiased @ times <= time else least
    try:
        best = np.floor(best_events(gains, times, time, least) * (1.0 + 1e-12))
    except InputError as error:
        raise InputError(
            *(
                Problem(p.what, "[sizing] seconds", p.got, p.wanted, "Lower [sizing] least, or give more time.")
                for p in error.problems
            )
        ) from None
    aim = asked.together or asked.share
    allowed = aim**2 * _unit(asked, found)
    cheapest = np.ceil(least_events(gains, times, allowed, unbiased))
    return SizingAllocation(
        target=asked.target,
        seconds=time,
        seconds_now=time_now,
        aim=aim,
        seconds_aim=float(times @ cheapest),
        seconds_aim_as_now=float((gains / now).sum()) / allowed * time_now,
        samples=tuple(
            SizingShareOfTime(
                sample=name,
                nanoseconds=1e9 * float(times[s]),
                nanoseconds_error=_error(paces[name]),
                now=int(now[s]),
                best=int(best[s]),
                cheapest=int(cheapest[s]),
            )
            for s, name in enumerate(names)
        ),
        gains=_gain_parts(found, best / now, cheapest / now),
        snippet=snippet(
            found.samples,
            {name: max(rounded_down(int(best[s])), asked.least) for s, name in enumerate(names)},
            f"Best allocation of {time:.3g} s of processor time",
        ),
    )


def _error(paces: Sequence[float]) -> float | None:
    """Of their median, in nanoseconds."""
    return None if len(paces) < 2 else 1e9 * MEDIAN_ERROR * float(np.std(paces, ddof=1)) / len(paces) ** 0.5


def _gains(asked: SizingSection, found: Prediction) -> Floats:
    """(samples,) what each adds to the variance that is made small, with the events as they are."""
    first = found.numbers.first_order()
    if asked.target == ALL:
        total: Floats = (first / found.numbers.errors(np.inf)[:, None] ** 2).sum(axis=0)
        return total
    chosen: Floats = first[found.numbers.ratios.index(asked.target)]
    return chosen


def _unit(asked: SizingSection, found: Prediction) -> float:
    """What a cost of one of all samples together is, in the same variance."""
    if asked.target == ALL:
        return float(len(found.numbers.ratios))
    return float(found.numbers.errors(np.inf)[found.numbers.ratios.index(asked.target)]) ** 2


def _gain_parts(found: Prediction, best: Floats, cheapest: Floats) -> tuple[SizingGain, ...]:
    numbers = found.numbers
    errors = [numbers.errors(factors) for factors in (1.0, best, cheapest)]
    parts = [np.sqrt((numbers.parts(factors) ** 2).sum(axis=1)) for factors in (1.0, best)]
    return tuple(
        SizingGain(
            ratio=ratio,
            templates_now=float(parts[0][r]),
            templates_best=float(parts[1][r]),
            error_now=float(errors[0][r]),
            error_best=float(errors[1][r]),
            error_cheapest=float(errors[2][r]),
        )
        for r, ratio in enumerate(numbers.ratios)
    )


def snippet(samples: tuple[Sample, ...], events: Mapping[str, int], title: str) -> str:
    """Lines for the study file, one table a sample: the `events` of the tables that are there already."""
    lines = [f"# {title}: put these numbers in the place of those that are there."]
    for sample in samples:
        lines += [f"[[{sample.table}]]", f'component = "{sample.name}"', f"events = {events[sample.name]:_}", ""]
    return "\n".join(lines[:-1]) + "\n"


def rounded_up(events: int) -> int:
    """To three digits, never less."""
    step = _step(events)
    return -(-events // step) * step


def rounded_down(events: int) -> int:
    """To three digits, never more."""
    step = _step(events)
    return events // step * step


def _step(events: int) -> int:
    return int(10 ** max(0, len(str(events)) - 3))
