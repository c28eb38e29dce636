"""Workers of dask.distributed: the results that threads give, whatever dies, and clear words when nothing is left."""

from __future__ import annotations

import contextlib
import functools
import json
import os
import signal
import socket
import subprocess
import sys
import textwrap
import threading
import time
from collections.abc import Iterator
from concurrent.futures import Future
from pathlib import Path

import numpy as np
import pytest
from semitau.core import cluster as cluster_module
from semitau.core.cluster import Cluster, connected, scheduler_address
from semitau.core.engine import WAITING_PER_WORKER, Job, elsewhere, run
from semitau.core.errors import InputError, Problem, RunError

from . import cluster_tasks as tasks
from .local_cluster import LocalCluster, local_cluster

pytest.importorskip("distributed")


@pytest.fixture(scope="module")
def processes(tmp_path_factory: pytest.TempPathFactory) -> Iterator[LocalCluster]:
    with local_cluster(tmp_path_factory.mktemp("cluster"), 2) as made:
        yield made


@pytest.fixture
def cluster(processes: LocalCluster) -> Iterator[Cluster]:
    """Two workers, made anew where a test has ended one."""
    for worker in list(processes.workers):
        if worker.poll() is not None:
            processes.workers.remove(worker)
    while len(processes.workers) < 2:
        processes.add_worker()
    with connected(str(processes.file)) as made, elsewhere(made):
        began = time.monotonic()
        while made.threads() < 2 and time.monotonic() - began < 60:
            made._looked = float("-inf")
            time.sleep(0.1)
        yield made


def test_results_are_those_of_threads_in_their_order(cluster: Cluster) -> None:
    common = np.random.default_rng(1).normal(size=1000)
    work = [Job(tasks.product, common, (number,)) for number in range(40)]
    work += [Job(tasks.product, common[:10] + 1.0, (number,)) for number in range(3)]
    there = [result.tobytes() for result in run(work, 1)]
    assert there == [work[k]().tobytes() for k in range(43)]
    began, seen = time.monotonic(), set[int]()
    while len(seen) < 2 and time.monotonic() - began < 60:  # one worker may be late, or quick enough for both
        seen |= {*run([Job(tasks.process, None, (number,)) for number in range(8)])}
    assert len(seen - {os.getpid()}) == 2
    assert list(run([functools.partial(pow, 3, number) for number in range(5)])) == [1, 3, 9, 27, 81]


def test_results_do_not_pile_up(cluster: Cluster) -> None:
    drawn = 0

    def work() -> Iterator[Job[int]]:
        nonlocal drawn
        for number in range(40):
            drawn += 1
            yield Job(tasks.slow, 0.001, (number,))

    most = cluster_module.AHEAD * cluster.threads()
    for consumed, _ in enumerate(run(work())):
        assert drawn - consumed <= most + 1


def test_outside_of_the_context_threads_work_again(processes: LocalCluster, cluster: Cluster) -> None:
    with connected(str(processes.file)) as other, elsewhere(other):
        pass
    assert set(run([Job(tasks.process, None, (0,))])) != {os.getpid()}

    def alone() -> None:
        found.extend(run([Job(tasks.process, None, (0,))], 1))

    found: list[int] = []
    thread = threading.Thread(target=alone)  # has a context of its own
    thread.start()
    thread.join()
    assert found == [os.getpid()]


def test_what_a_task_raises_comes_whole(cluster: Cluster) -> None:
    seen = []
    with pytest.raises(InputError) as caught:
        seen.extend(run([Job(tasks.refuse, "there", (number,)) for number in range(6)]))
    assert seen == [0, 1, 2]
    assert caught.value.problems == (Problem("is no number", "there", got="3", remedy="Take another."),)


def test_a_killed_worker_is_made_up_for(processes: LocalCluster, cluster: Cluster) -> None:
    results = run([Job(tasks.slow, 0.1, (number,)) for number in range(30)])
    seen = [next(results) for _ in range(3)]
    processes.workers[0].send_signal(signal.SIGKILL)
    assert [*seen, *results] == list(range(30))


def test_a_task_that_kills_every_worker(processes: LocalCluster) -> None:
    """Each worker that dies of it is followed by another; the scheduler gives up after the fourth."""
    with connected(str(processes.file)) as made, elsewhere(made):
        for _ in range(3):
            processes.add_worker()
        with pytest.raises(RunError, match=r"several workers died over the same task .*memory"):
            list(run([Job(tasks.fatal, None, (0,))]))


def test_no_worker_left(processes: LocalCluster, cluster: Cluster) -> None:
    cluster._patience = 1.0
    results = run([Job(tasks.slow, 0.1, (number,)) for number in range(1000)])
    next(results)
    for worker in processes.workers:
        worker.kill()
    with pytest.raises(RunError, match=r"no worker \(got none for 1 s\).*dask worker tcp.*run the same command again"):
        list(results)


@pytest.fixture
def another_numba(monkeypatch: pytest.MonkeyPatch) -> Iterator[dict[str, str]]:
    """Here, not on the workers."""
    here = {**cluster_module.versions(), "numba": "0.1"}
    monkeypatch.setattr(cluster_module, "versions", lambda: here)
    cluster_module.fingerprint.cache_clear()
    yield cluster_module.fingerprint()
    cluster_module.fingerprint.cache_clear()


def test_other_versions_are_refused(cluster: Cluster, another_numba: dict[str, str]) -> None:
    message = r"worker tcp://127.0.0.1:\d+ has other versions \(got numba 0.\d+.\d+, allowed as here, numba 0.1\)"
    with pytest.raises(RunError, match=message) as caught, connected(cluster.address):
        pass
    assert len(caught.value.problems) == 2
    cluster._wanted = another_numba  # as if they had come later
    with pytest.raises(RunError, match=message):
        list(run([Job(tasks.slow, 0.0, (1,))]))


def test_a_worker_that_died_just_now_is_not_asked_for_its_versions(processes: LocalCluster, cluster: Cluster) -> None:
    processes.workers[0].kill()
    with connected(cluster.address) as again, elsewhere(again):  # perhaps before the scheduler has seen it
        assert list(run([Job(tasks.slow, 0.0, (number,)) for number in range(3)])) == [0, 1, 2]


class Late(Future[int]):
    """Ends just after its time is up, before anybody has looked."""

    def result(self, timeout: float | None = None) -> int:
        if timeout is not None and not self.done():
            self.set_result(7)
            raise TimeoutError
        return super().result(timeout)


def test_a_result_that_comes_as_the_time_is_up(monkeypatch: pytest.MonkeyPatch) -> None:
    made, late = Cluster(None, "tcp://nowhere:1", 1.0), Late()
    monkeypatch.setattr(cluster_module, "LOOK_SECONDS", 0.01)
    monkeypatch.setattr(made, "threads", lambda: late.done() or late.set_result(7))
    assert made._result(late) == 7
    failed = Future[int]()
    failed.set_exception(TimeoutError("of the task"))
    with pytest.raises(TimeoutError, match="of the task"):
        made._result(failed)


def test_the_scheduler_dies(tmp_path: Path) -> None:
    with local_cluster(tmp_path, 1) as made, connected(str(made.file)) as there, elsewhere(there):
        results = run([Job(tasks.slow, 0.05, (number,)) for number in range(1000)])
        next(results)
        made.scheduler.kill()
        with pytest.raises(RunError, match="connection to the scheduler was lost"):
            list(results)


def test_a_scheduler_without_workers(tmp_path: Path) -> None:
    with (
        local_cluster(tmp_path, 0) as made,
        pytest.raises(RunError, match=r"no worker .*Start some"),
        connected(str(made.file), patience=0.5),
    ):
        pass


@pytest.mark.parametrize("spoken", [None, b"", b"SSH-2.0-x\r\n"])
def test_a_scheduler_that_does_not_answer(spoken: bytes | None, monkeypatch: pytest.MonkeyPatch) -> None:
    """Nobody there; somebody who never says a word; somebody of another trade."""
    monkeypatch.setattr(cluster_module, "ANSWER_SECONDS", 1.0)

    def speak() -> None:
        with contextlib.suppress(OSError):
            while spoken is not None:
                visitor, _ = door.accept()
                visitors.append(visitor)
                visitor.sendall(spoken)

    visitors: list[socket.socket] = []
    with socket.socket() as door:
        door.bind(("127.0.0.1", 0))
        if spoken is not None:
            door.listen()
        threading.Thread(target=speak, daemon=True).start()
        address = f"tcp://127.0.0.1:{door.getsockname()[1]}"
        words = rf"{address}: the scheduler does not answer .*Check host"
        with pytest.raises(RunError, match=words), connected(address):
            pass
        door.shutdown(socket.SHUT_RDWR) if spoken is not None else None
    for visitor in visitors:
        visitor.close()


def test_without_the_library(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setitem(sys.modules, "distributed", None)
    with (
        pytest.raises(InputError, match=r"dask.distributed, which is not installed. .*pip install 'semitau\[dask\]'"),
        connected("tcp://127.0.0.1:8786"),
    ):
        pass


@pytest.mark.parametrize("good", ["tcp://10.0.0.1:8786", "tcp://node-7.cluster:1", "tcp://[::1]:8786"])
def test_addresses(good: str, tmp_path: Path) -> None:
    assert scheduler_address(good) == good
    file = tmp_path / "scheduler.json"
    file.write_text(json.dumps({"address": good, "type": "Scheduler"}))
    assert scheduler_address(str(file)) == good


@pytest.mark.parametrize(
    ("content", "words"),
    [
        (None, "there is no such file"),
        ("tcp", "is no scheduler file"),
        ("[]", "is no scheduler file"),
        ("{}", "is no scheduler file"),
        ('{"address": 3}', "holds no address that can be used"),
        ('{"address": "tls://a:1"}', "holds no address that can be used"),
    ],
)
def test_bad_files(content: str | None, words: str, tmp_path: Path) -> None:
    file = tmp_path / "scheduler.json"
    if content is not None:
        file.write_text(content)
    with pytest.raises(InputError, match=words):
        scheduler_address(str(file))


@pytest.mark.parametrize("bad", ["http://a:1", "tcp://a", "tcp://a:0", "tcp://a:99999", "tcp://a:1/x", "tcp://:1"])
def test_bad_addresses(bad: str) -> None:
    with pytest.raises(InputError, match="is no address of a scheduler"):
        scheduler_address(bad)


def test_in_flight_follows_the_workers() -> None:
    assert cluster_module.AHEAD >= WAITING_PER_WORKER


INTERRUPTED = textwrap.dedent("""
    import signal, sys
    from semitau.core.cluster import connected
    from semitau.core.engine import Job, elsewhere, run
    from tests.core.cluster_tasks import traced

    signal.signal(signal.SIGINT, signal.default_int_handler)  # a background shell may have switched it off
    try:
        with connected(sys.argv[1]) as cluster, elsewhere(cluster):
            for _ in run(Job(traced, sys.argv[2], (number,)) for number in range(10_000)):
                print("working", flush=True)
    except KeyboardInterrupt:
        print("interrupted")
        sys.exit(1)
""")


def test_ctrl_c_cancels_what_is_under_way(processes: LocalCluster, cluster: Cluster, tmp_path: Path) -> None:
    with subprocess.Popen(
        [sys.executable, "-c", INTERRUPTED, str(processes.file), str(tmp_path)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
        cwd=Path(__file__).parents[2],
    ) as child:
        assert child.stdout is not None
        assert child.stdout.readline() == "working\n"
        child.send_signal(signal.SIGINT)
        out, err = child.communicate(timeout=60)
    assert child.returncode == 1
    assert out.endswith("interrupted\n")
    assert err == ""
    time.sleep(0.5)
    begun = len(list(tmp_path.iterdir()))
    time.sleep(0.5)
    assert len(list(tmp_path.iterdir())) == begun < 1000
