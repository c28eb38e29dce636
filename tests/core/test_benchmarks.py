"""The benchmarks' own arithmetic: medians in turns, aims, and the count of random numbers."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]


@pytest.fixture(autouse=True)
def root_on_the_path(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.syspath_prepend(str(ROOT))


def test_workloads_run_in_turns_after_one_warm_up() -> None:
    from benchmarks.timing import interleaved

    calls: list[str] = []
    timings = interleaved({name: lambda name=name: calls.append(name) for name in "ab"}, 3)
    assert calls == list("ab" * 4)
    assert timings.keys() == {"a", "b"}
    assert all(timing.wall >= 0 and timing.cpu >= 0 for timing in timings.values())


def test_aims() -> None:
    from benchmarks.figures import Figure, number

    assert Figure("a", 1.6, "", 1.7, "at least").reached is False
    assert Figure("a", 1.8, "", 1.7, "at least").reached is True
    assert Figure("a", 4.9, "", 5.0).reached is True
    assert Figure("a", 5.1, "", 5.0).reached is False
    assert Figure("a", 5.1, "").reached is None
    assert "MISSED" in Figure("a", 5.1, "s", 5.0).line()
    assert [number(value) for value in (1234567.0, 999.6, 0.01234)] == ["1,230,000", "1e+03", "0.0123"]


def test_random_numbers_are_counted() -> None:
    """B -> D tau nu as truth_draws.py lists it: q2 3, daughter of the tau 3 + 3, angles 5 + 4 + 2, rotation 3."""
    from benchmarks.random_numbers import counted

    (kind, (truth, find, measure)) = next(iter(counted(str(ROOT / "configs" / "marlow_small.toml"), 1).items()))
    assert kind == "D0  none none none False True"
    assert truth == 23
    # find: collision energy 2, flight 3 + 1, D0 -> K pi 2, three tracks seen, lepton identified
    assert find == 12
    # measure: three tracks of 4, tag 2 + 4, noise 3, random soft candidate 4
    assert measure == 25


def test_the_command_explains_itself() -> None:
    done = subprocess.run(
        [sys.executable, "-m", "benchmarks", "--help"], cwd=ROOT, capture_output=True, text=True, check=True
    )
    assert "--json" in done.stdout
