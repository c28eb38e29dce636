"""The engine: order, bounds, failures and interrupts, whatever runs the tasks."""

from __future__ import annotations

import functools
import os
import signal
import subprocess
import sys
import textwrap
import threading
import time
from concurrent.futures import ProcessPoolExecutor
from multiprocessing import get_context

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from semitau.core.engine import WAITING_PER_WORKER, available_cores, checked_workers, run
from semitau.core.errors import InputError


@settings(deadline=None)
@given(waits=st.lists(st.integers(0, 3), max_size=12), workers=st.integers(1, 5))
def test_results_come_in_the_order_of_the_tasks(waits: list[int], workers: int) -> None:
    def task(number: int, wait: int) -> int:
        time.sleep(wait * 1e-3)
        return number

    tasks = [functools.partial(task, number, wait) for number, wait in enumerate(waits)]
    assert list(run(tasks, workers)) == list(range(len(waits)))


def test_sum_is_the_same_to_the_last_bit_for_any_number_of_workers() -> None:
    def task(number: int) -> np.ndarray:
        return np.random.default_rng(number).normal(size=100) * 10.0 ** (number % 7)

    tasks = [functools.partial(task, number) for number in range(40)]
    sums = {sum(run(tasks, workers)).tobytes() for workers in (1, 2, 3, 8)}
    assert len(sums) == 1


@pytest.mark.parametrize("workers", [1, 2, 3])
def test_results_do_not_pile_up(workers: int) -> None:
    drawn = 0

    def tasks():
        nonlocal drawn
        for _ in range(50):
            drawn += 1
            yield lambda: None

    for consumed, _ in enumerate(run(tasks(), workers)):
        time.sleep(1e-3)
        assert drawn - consumed <= WAITING_PER_WORKER * workers
    assert drawn == 50


def test_two_workers_work_at_the_same_time() -> None:
    both = threading.Barrier(2, timeout=10)
    assert sorted(run([both.wait, both.wait], 2)) == [0, 1]


@pytest.mark.parametrize("workers", [1, 2, 4])
def test_a_failure_comes_at_its_place_and_the_rest_is_not_started(workers: int) -> None:
    started: list[int] = []

    def task(number: int) -> int:
        started.append(number)
        if number == 5:
            raise ValueError("task five")
        if number == 3:
            time.sleep(0.02)  # fails later by the clock than number 5
            raise ValueError("task three")
        return number

    seen: list[int] = []
    with pytest.raises(ValueError, match="task three"):
        seen.extend(run([functools.partial(task, number) for number in range(1000)], workers))
    assert seen == [0, 1, 2]
    assert len(started) <= 3 + WAITING_PER_WORKER * workers + 1


@pytest.mark.parametrize("with_report", [False, True])
def test_an_abandoned_iterator_stops_its_workers(with_report: bool) -> None:
    started = []
    before = threading.active_count()
    results = run(
        (functools.partial(started.append, number) for number in range(1000)),
        3,
        (lambda done, total: None) if with_report else None,
    )
    next(results)
    results.close()
    assert threading.active_count() == before
    assert len(started) <= 1 + WAITING_PER_WORKER * 3


@pytest.mark.parametrize(("sized", "total"), [(True, 4), (False, None)])
@pytest.mark.parametrize("workers", [1, 2])
def test_report(sized: bool, total: int | None, workers: int) -> None:
    calls = []
    tasks = [lambda: None] * 4
    consumer = threading.get_ident()

    def report(done: int, total: int | None) -> None:
        calls.append((done, total, threading.get_ident() == consumer))

    list(run(tasks if sized else iter(tasks), workers, report))
    assert calls == [(done, total, True) for done in (1, 2, 3, 4)]


@pytest.mark.parametrize("workers", [0, -1, 1.5, "2", True])
def test_workers_are_checked_at_once(workers: object) -> None:
    with pytest.raises(InputError, match=r"workers: .* whole number .*allowed 1 or more"):
        run([], workers)  # type: ignore[arg-type]


def test_none_means_all_cores() -> None:
    assert checked_workers(None) == available_cores() >= 1


@pytest.mark.parametrize("workers", [1, 2])
def test_the_callers_floating_point_rules_hold_in_the_tasks(workers: int) -> None:
    tasks = [lambda: np.log(np.zeros(1))] * 2
    with np.errstate(divide="raise"), pytest.raises(FloatingPointError, match="divide by zero"):
        list(run(tasks, workers))


def test_another_executor_can_take_the_place_of_the_threads() -> None:
    with ProcessPoolExecutor(2, mp_context=get_context("spawn")) as processes:
        tasks = [functools.partial(pow, 2, number) for number in range(9)]
        assert list(run(tasks, 2, executor=processes)) == [2**number for number in range(9)]
        assert processes.submit(pow, 2, 3).result() == 8  # it is left running


INTERRUPTED = textwrap.dedent("""
    import functools, signal, sys, time
    from pathlib import Path
    from semitau.core.engine import run
    from semitau.core.whole_files import whole_file

    signal.signal(signal.SIGINT, signal.default_int_handler)  # a background shell may have switched it off

    def task(number):
        time.sleep(0.1)
        return str(number)

    try:
        with whole_file(sys.argv[1]) as part, part.open("w") as file:
            for result in run([functools.partial(task, n) for n in range(10_000)], int(sys.argv[2])):
                file.write(result)
                file.flush()
                print("working", flush=True)
    except KeyboardInterrupt:
        print("interrupted")
        sys.exit(1)
""")


@pytest.mark.parametrize("workers", ["1", "2"])
def test_ctrl_c_stops_at_once_and_leaves_only_whole_files(tmp_path, workers: str) -> None:
    target = tmp_path / "results.json"
    target.write_text("whole")
    with subprocess.Popen(
        [sys.executable, "-c", INTERRUPTED, str(target), workers],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    ) as child:
        assert child.stdout is not None
        assert child.stdout.readline() == "working\n"
        os.kill(child.pid, signal.SIGINT)
        began = time.monotonic()
        out, err = child.communicate(timeout=60)
        took = time.monotonic() - began
    assert child.returncode == 1
    assert out.endswith("interrupted\n")
    assert err == ""
    assert took < 10, "the running tasks take 0.1 s; the limit is wide for a busy machine"
    assert [path.name for path in tmp_path.iterdir()] == ["results.json"]
    assert target.read_text() == "whole"
