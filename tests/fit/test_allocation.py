"""Events for a given time: the rule with minima against general minimisers that know nothing of it."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import optimize
from semitau.core.errors import InputError
from semitau.fit import Model, best_events, event_numbers, least_events

from . import problems

Floats = NDArray[np.float64]


def cases(n: int = 12) -> Iterator[tuple[Floats, Floats, Floats]]:
    rng = np.random.default_rng(problems.SEED)
    for _ in range(n):
        size = int(rng.integers(2, 8))
        gains, seconds = np.exp(rng.normal(scale=2.0, size=size)), np.exp(rng.normal(scale=1.5, size=size))
        least = np.exp(rng.normal(scale=1.5, size=size)) * rng.choice([1e-3, 1.0], size=size)
        yield gains, seconds, least


def smallest_variance(gains: Floats, seconds: Floats, least: Floats, time: float) -> Floats:
    """By sequential quadratic programming in the logarithms of the numbers (scipy)."""
    start = np.log(np.maximum(least * 1.5, 1e-3))
    found = optimize.minimize(
        lambda x: np.log(np.sum(gains * np.exp(-x))),
        start,
        jac=lambda x: -gains * np.exp(-x) / np.sum(gains * np.exp(-x)),
        method="SLSQP",
        bounds=[(low, None) for low in np.log(least)],
        constraints={
            "type": "ineq",
            "fun": lambda x: 1.0 - np.exp(x) @ seconds / time,
            "jac": lambda x: -np.exp(x) * seconds / time,
        },
        options={"maxiter": 2000, "ftol": 1e-14},
    )
    best: Floats = np.exp(found.x)
    return best


def test_best_events_against_a_general_minimiser() -> None:
    bound = 0
    for gains, seconds, least in cases():
        time = 1.5 * float(least @ seconds)
        events = best_events(gains, seconds, time, least)
        assert events @ seconds == pytest.approx(time, rel=1e-9)
        assert np.all(events >= least)
        other = smallest_variance(gains, seconds, least, time)
        assert np.sum(gains / events) == pytest.approx(np.sum(gains / other), rel=1e-6)
        assert events == pytest.approx(other, rel=5e-3)
        bound += int(np.sum(events == least))
    assert bound > 5  # minima did act


def test_three_samples_against_a_grid() -> None:
    """Brute force: no point of a fine grid on the plane of equal time is better."""
    gains, seconds, least, time = np.array([4.0, 1.0, 0.2]), np.array([1.0, 3.0, 0.5]), np.array([1.0, 8.0, 2.0]), 60.0
    best = np.sum(gains / best_events(gains, seconds, time, least))
    first, second = np.meshgrid(np.linspace(1.0, 40.0, 2000), np.linspace(8.0, 20.0, 600), indexing="ij")
    third = (time - first * seconds[0] - second * seconds[1]) / seconds[2]
    inside = third >= least[2]
    grid = gains[0] / first[inside] + gains[1] / second[inside] + gains[2] / third[inside]
    assert best <= grid.min() <= best * 1.001


def test_closed_form_without_minima() -> None:
    """(Σ √(A t))²/T, J. Neyman, J. R. Stat. Soc. 97 (1934) 558, with costs (from memory)."""
    gains, seconds = np.array([9.0, 1.0]), np.array([1.0, 4.0])
    events = best_events(gains, seconds, 10.0, 1e-9)
    assert np.sum(gains / events) == pytest.approx((3.0 + 2.0) ** 2 / 10.0, rel=1e-12)
    assert events == pytest.approx([6.0, 1.0], rel=1e-12)


def test_least_events_turn_the_question_round() -> None:
    for gains, seconds, least in cases():
        time = 1.7 * float(least @ seconds)
        events = best_events(gains, seconds, time, least)
        again = least_events(gains, seconds, float(np.sum(gains / events)), least)
        assert again == pytest.approx(events, rel=1e-7)
    # Minima that do already.
    assert least_events([1.0, 2.0], [1.0, 1.0], 10.0, [5.0, 5.0]) == pytest.approx([5.0, 5.0])


def test_samples_that_do_not_matter_get_the_minimum() -> None:
    assert best_events([0.0, 4.0], 1.0, 10.0, 2.0) == pytest.approx([2.0, 8.0])
    assert best_events([0.0, 0.0], 1.0, 10.0, 2.0) == pytest.approx([2.0, 2.0])


def test_optimum_of_the_whole_expected_error() -> None:
    """The rule minimises the first-order variance. With template statistics at a tenth of the error or less it is
    within a per mille of what a general minimiser makes of the whole expected error."""
    numbers = event_numbers(Model(problems.small(variance=0.2)))
    seconds = np.array([2.0, 1.0, 0.5, 0.7, 0.1])
    time = float(seconds.sum())
    target = 0
    events = best_events(numbers.first_order()[target], seconds, time, 1e-6)

    def error(logs: Floats) -> float:
        x = np.exp(logs)
        return float(np.log(numbers.errors(x * time / (x @ seconds))[target]))

    found = optimize.minimize(error, np.zeros(5), method="Nelder-Mead", options={"xatol": 1e-6, "fatol": 1e-12,
                              "maxiter": 20_000, "maxfev": 20_000})  # fmt: skip
    best = np.exp(found.fun)
    assert best * (1.0 - 1e-9) <= numbers.errors(events)[target] <= best * 1.001
    assert numbers.errors(events)[target] < numbers.errors(1.0)[target]


@pytest.mark.parametrize(
    ("arguments", "what"),
    [
        (([1.0], [1.0], 0.5, 1.0), "the least numbers of events take longer than that"),
        (([1.0], [1.0], -1.0, 1.0), "must be positive"),
        (([-1.0], [1.0], 1.0, 1.0), "variance times events"),
        (([1.0], [0.0], 1.0, 1.0), "seconds for an event"),
        (([1.0], [1.0], 1.0, 0.0), "least number of events"),
        (([np.nan], [1.0], 1.0, 1.0), "variance times events"),
    ],
)
def test_wrong_numbers(arguments: tuple[object, ...], what: str) -> None:
    with pytest.raises(InputError, match=what):
        best_events(*arguments)  # type: ignore[arg-type]


def test_a_variance_must_be_positive() -> None:
    with pytest.raises(InputError, match="variance"):
        least_events([1.0], [1.0], 0.0)
