"""Toys that are kept: more of them, fewer, interrupted, whatever the workers, the same toys to the last bit."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np
import pytest
from semitau.fit import Model, linearity, run_toys
from semitau.fit.toys.toys import ToyResults

from . import problems

COLUMNS = ("values", "errors", "statistics", "statuses", "steps")


class Memory:
    """Keeps arrays in memory, and counts the toys that were fitted."""

    def __init__(self, pause: float = 1e9) -> None:
        self.known: dict[str, Mapping[str, Any]] = {}
        self.pause = pause
        self.fitted = 0

    def take(self, kind: str, key: str) -> Any:
        return self.known.get(key)

    def keep(self, kind: str, key: str, arrays: Mapping[str, Any]) -> None:
        before = self.known.get(key)
        self.fitted += arrays["statuses"].size - (0 if before is None else before["statuses"].size)
        self.known[key] = dict(arrays)


@pytest.fixture(scope="module")
def model() -> Model:
    return Model(problems.small(factor=5.0))


def expect_same(one: ToyResults, other: ToyResults) -> None:
    for name in COLUMNS:
        np.testing.assert_array_equal(getattr(one, name), getattr(other, name))
        assert getattr(one, name).dtype == getattr(other, name).dtype
    assert (one.names, one.ratios, one.seed) == (other.names, other.ratios, other.seed)


def test_only_what_is_missing_is_fitted(model: Model) -> None:
    memory = Memory()
    for number, fitted in ((70, 70), (150, 150), (41, 150), (150, 150), (151, 151)):
        expect_same(run_toys(model, number, 3, 2, kept=memory), run_toys(model, number, 3, 1))
        assert memory.fitted == fitted


def test_others_are_other_toys(model: Model) -> None:
    memory = Memory()
    run_toys(model, 40, 3, kept=memory)
    name = model.ratios[0]
    expect_same(run_toys(model, 40, 4, kept=memory), run_toys(model, 40, 4))
    more = {name: 1.3 * float(model.injected[model.index(name)])}
    expect_same(run_toys(model, 40, 3, injected=more, kept=memory), run_toys(model, 40, 3, injected=more))
    held = Model(problems.small(factor=5.0), fixed={model.names[-1]: 0.3})
    expect_same(run_toys(held, 40, 3, kept=memory), run_toys(held, 40, 3))
    more_events = Model(problems.small(factor=5.0000001))
    expect_same(run_toys(more_events, 40, 3, kept=memory), run_toys(more_events, 40, 3))
    assert memory.fitted == 200
    assert len(memory.known) == 5


class Stop(Exception):
    pass


@pytest.mark.parametrize("workers", [1, 2])
def test_interrupted_toys_go_on_where_they_stopped(model: Model, workers: int) -> None:
    memory, furthest, stops = Memory(), 0, 0

    def stopping() -> Any:
        calls = 0

        def report(label: str, done: int, total: int) -> None:
            nonlocal calls, furthest
            calls += 1
            assert done > furthest  # nothing is made twice
            if calls > 2:
                raise Stop
            furthest = done

        return report

    while True:
        try:
            found = run_toys(model, 300, 3, workers, stopping(), kept=memory)
            break
        except Stop:
            stops += 1
    assert stops >= 3
    expect_same(found, run_toys(model, 300, 3, 1))
    assert memory.fitted == 300


def test_unfinished_toys_are_kept_now_and_then(model: Model) -> None:
    memory = Memory(pause=-1.0)
    sizes = []
    keep = memory.keep
    memory.keep = lambda kind, key, arrays: (sizes.append(arrays["statuses"].size), keep(kind, key, arrays))[1]  # type: ignore[method-assign]
    run_toys(model, 100, 3, 1, kept=memory)
    assert sizes == [32, 64, 96, 100]


def test_points_of_a_line_are_kept_one_by_one(model: Model) -> None:
    memory = Memory()
    first = linearity(model, (0.8, 1.2), 40, 3, kept=memory)
    again = linearity(model, (0.8, 1.2, 1.4), 40, 3, kept=memory)
    assert memory.fitted == 120
    for one, other in zip(first.points, again.points, strict=False):
        expect_same(one, other)
    assert again.lines == linearity(model, (0.8, 1.2, 1.4), 40, 3).lines


@pytest.mark.parametrize("wrong", ["name", "kind", "parameters", "length", "nothing"])
def test_arrays_that_are_not_toys_are_not_taken(model: Model, wrong: str) -> None:
    memory = Memory()
    run_toys(model, 40, 3, kept=memory)
    (arrays,) = memory.known.values()
    assert isinstance(arrays, dict)
    if wrong == "name":
        del arrays["steps"]
    elif wrong == "kind":
        arrays["values"] = arrays["values"].astype(np.float32)
    elif wrong == "parameters":
        arrays["errors"] = arrays["errors"][:, 1:]
    elif wrong == "length":
        arrays["statistics"] = arrays["statistics"][:-1]
    else:
        arrays.update({name: array[:0] for name, array in arrays.items()})
    expect_same(run_toys(model, 40, 3, kept=memory), run_toys(model, 40, 3))
