"""Workers on other machines, through a scheduler of dask.distributed.

What goes there are tasks (engine.py): functions of this program by their names, and numbers; never a passphrase. The
part that many jobs have in common is sent once, and the scheduler can make it again where a worker was lost. Results
come back in the order of the tasks, so that sums are those of a run on threads, bit for bit where the machines are of
one kind.
"""

from __future__ import annotations

import json
import logging
import pickle
import platform
import queue
import re
import threading
import time
import uuid
import warnings
from collections import deque
from collections.abc import Callable, Iterator
from concurrent.futures import CancelledError, Future, wait
from contextlib import contextmanager
from functools import cache
from pathlib import Path
from typing import Any, TypeVar

from .code_digest import code_digest, versions
from .engine import Job
from .errors import InputError, Problem, RunError

T = TypeVar("T")

AHEAD = 4
"""Tasks under way per thread: twice as many as here, for the time that they spend between the machines."""

ANSWER_SECONDS = 5.0
"""How long a scheduler may take to answer."""

WORKER_SECONDS = 15.0
"""How long there may be no worker: time for the first to come, or for one that died to be started again."""

LOOK_SECONDS = 1.0
"""Between two looks at how many workers there are."""

AT_MOST_TOLD = 4
"""Workers of other versions that a message names."""

_ADDRESS = re.compile(r"tcp://(\[[0-9A-Fa-f:.]+\]|[^\s/:\[\]]+):(\d{1,5})")


def scheduler_address(engine: str) -> str:
    """The address tcp://HOST:PORT of a scheduler, given itself or as the path of the scheduler's file.

    Raises
    ------
    InputError : neither an address nor a file, or a file that a scheduler did not write.
    """
    if _is_address(engine):
        return engine
    wanted = "tcp://HOST:PORT or the path of a scheduler file"
    if "://" in engine:
        raise InputError(Problem("is no address of a scheduler", "--engine", repr(engine), wanted))
    try:
        address = json.loads(Path(engine).read_bytes())["address"]
    except OSError:
        remedy = "A scheduler writes it with --scheduler-file; it must be seen from here, too."
        raise InputError(Problem("there is no such file", "--engine", repr(engine), wanted, remedy)) from None
    except (ValueError, KeyError, TypeError):
        raise InputError(Problem("is no scheduler file", f"--engine: {engine}", wanted='JSON with "address"')) from None
    if not (isinstance(address, str) and _is_address(address)):
        raise InputError(
            Problem("holds no address that can be used", f"--engine: {engine}", repr(address), "tcp://HOST:PORT")
        )
    return address


def _is_address(text: str) -> bool:
    match = _ADDRESS.fullmatch(text)
    return match is not None and 0 < int(match[2]) < 65536


@contextmanager
def connected(engine: str, *, patience: float | None = None) -> Iterator[Cluster]:
    """The workers of a scheduler, for as long as the context lasts; they are left running.

    engine : tcp://HOST:PORT or the path of a scheduler file. patience : seconds without any worker,
    WORKER_SECONDS for None.

    Raises
    ------
    InputError : engine is neither; dask.distributed is not installed.
    RunError : the scheduler does not answer, has no workers, or has workers with other versions of this program.
    """
    address = scheduler_address(engine)
    try:
        import dask
        import distributed
    except ImportError:
        remedy = "Install it with pip install 'semitau[dask]', or leave --engine out to use the cores of this machine."
        raise InputError(Problem("needs dask.distributed, which is not installed", "--engine", remedy=remedy)) from None
    # What goes wrong is told here, in our words; what the library says beside it would stand between our lines.
    with (
        _quiet("distributed", "tornado"),
        dask.config.set({"distributed.admin.large-graph-warning-threshold": "1TiB"}),
        warnings.catch_warnings(),
    ):
        warnings.simplefilter("ignore")
        client = _client(distributed.Client, address)
        try:
            cluster = Cluster(client, address, WORKER_SECONDS if patience is None else patience)
            cluster.expect_workers()
            yield cluster
        finally:
            client.close(timeout=ANSWER_SECONDS)


def _client(make: Any, address: str) -> Any:
    """A client of the scheduler. Made in a thread, as the library waits for ever for somebody who speaks otherwise.

    Raises
    ------
    RunError : nothing has come of it in time.
    """
    client = make.__new__(make)
    ended: queue.SimpleQueue[Exception | None] = queue.SimpleQueue()

    def ask() -> None:
        try:
            client.__init__(address, timeout=ANSWER_SECONDS, set_as_default=False, name="semitau")
            ended.put(None)
        except Exception as error:
            ended.put(error)

    threading.Thread(target=ask, daemon=True).start()
    try:
        error = ended.get(timeout=2.0 * ANSWER_SECONDS)
        got = "" if error is None else _first_line(error)
    except queue.Empty:
        got = "nothing that a scheduler says"
    if got:
        client.status = "closed"  # there is nothing to close, which the library would wait for
        raise _no_answer(address, got)
    return client


def _no_answer(address: str, got: str) -> RunError:
    return RunError(
        Problem(
            "the scheduler does not answer",
            f"--engine: {address}",
            got,
            remedy="Check host and port, whether `dask scheduler` runs there, with about the same version of "
            "distributed, and the way through firewalls; or leave --engine out.",
        )
    )


class Cluster:
    """The workers of one scheduler. `connected` makes it; `engine.elsewhere` sends tasks there."""

    def __init__(self, client: Any, address: str, patience: float) -> None:
        self.address = address
        self._client = client
        self._patience = patience
        self._wanted = fingerprint()
        self._threads = 0
        self._looked = float("-inf")
        self._seen = time.monotonic()

    def expect_workers(self) -> None:
        """Wait for a worker, and refuse those whose results could differ from ours.

        Raises
        ------
        RunError : there is none, or one has other versions.
        """
        end = time.monotonic() + max(self._patience, ANSWER_SECONDS)
        while True:
            while self.threads() == 0:
                time.sleep(0.1)
            found: dict[str, Any] = self._client.run(fingerprint, on_error="return")
            if not any(isinstance(told, OSError) for told in found.values()) or time.monotonic() > end:
                break
            self._looked = float("-inf")  # one has died just now, and the scheduler does not know it yet
            time.sleep(0.1)
        problems = [self._refusal(worker, told) for worker, told in found.items() if told != self._wanted]
        if problems:
            more = len(problems) - AT_MOST_TOLD
            rest = [Problem(f"and {more} more workers", f"--engine: {self.address}")] * (more > 0)
            raise RunError(*problems[:AT_MOST_TOLD], *rest)

    def threads(self) -> int:
        """Threads of all workers, 0 for a while without any.

        Raises
        ------
        RunError : there has been no worker for longer than the patience, or the scheduler has gone.
        """
        now = time.monotonic()
        if now - self._looked < LOOK_SECONDS and self._threads > 0:
            return self._threads
        if self._client.status != "running":
            raise self._lost()
        try:
            self._threads = sum(self._client.nthreads().values())
        except (OSError, RuntimeError, CancelledError):
            raise self._lost() from None
        self._looked = now
        if self._threads > 0:
            self._seen = now
        elif now - self._seen > self._patience:
            raise RunError(
                Problem(
                    "the scheduler has no worker",
                    f"--engine: {self.address}",
                    f"none for {self._patience:g} s",
                    remedy=f"Start some with `dask worker {self.address}`, and look into their logs if they died. "
                    "What was finished is stored; run the same command again.",
                )
            )
        return self._threads

    def results(self, tasks: Iterator[Callable[[], T]]) -> Iterator[T]:
        """Results in the order of the tasks; what is under way is cancelled when the iterator is closed.

        Tasks of a worker that dies are done by another one.

        Raises
        ------
        RunError : as `threads`; or one task ended several workers. What a task raises is raised at its place.
        """
        executor = self._client.get_executor(pure=False)
        sender = _Sender(self._client)
        waiting: deque[Future[T]] = deque()
        try:
            for task in tasks:
                while waiting and len(waiting) >= AHEAD * self.threads():
                    yield self._result(waiting.popleft())
                if isinstance(task, Job):
                    common, own = sender.sent(task.common), task.own
                    submitted = task.function, common, *own
                else:
                    submitted = (task,)
                waiting.append(executor.submit(_done, self._wanted, *submitted, key=_key(submitted[0])))
            while waiting:
                yield self._result(waiting.popleft())
        finally:
            executor.shutdown(wait=False)

    def _result(self, future: Future[T]) -> T:
        from distributed.scheduler import KilledWorker

        # Not result(timeout): it may end between its time-out and a look at it, and a task may raise the same error.
        while not wait((future,), timeout=LOOK_SECONDS).done:
            self.threads()
        try:
            return future.result()
        except CancelledError:
            raise self._lost() from None
        except KilledWorker as error:
            remedy = "Look into the logs of the workers; most often their memory is full: give them more each."
            what = "several workers died over the same task"
            raise RunError(Problem(what, f"--engine: {self.address}", _first_line(error), remedy=remedy)) from None
        except OtherVersions as error:
            raise RunError(self._refusal(*error.args)) from None

    def _refusal(self, worker: str, told: object) -> Problem:
        where = f"--engine: {self.address}"
        remedy = "Give all workers the same environment as here."
        if not isinstance(told, dict):  # what went wrong there when it was asked
            got = _first_line(told) if isinstance(told, Exception) else repr(told)
            return Problem(f"worker {worker} cannot run semitau", where, got, remedy=remedy)
        names = [name for name, here in self._wanted.items() if told.get(name) != here]
        got = ", ".join(f"{name} {told.get(name, 'missing')}" for name in names)
        here = ", ".join(f"{name} {self._wanted[name]}" for name in names)
        return Problem(f"worker {worker} has other versions", where, got, f"as here, {here}", remedy)

    def _lost(self) -> RunError:
        remedy = "Look whether it still runs. What was finished is stored; run the same command again."
        return RunError(Problem("the connection to the scheduler was lost", f"--engine: {self.address}", remedy=remedy))


class _Sender:
    """Sends what jobs have in common; keeps the last one, as jobs come in groups."""

    def __init__(self, client: Any) -> None:
        self._client = client
        self._last: object = None
        self._sent: Any = None

    def sent(self, common: object) -> Any:
        """A stand-in for `common` in what is submitted."""
        if self._sent is None or common is not self._last:
            # A task, not data put there: the scheduler knows how to make it again when the worker that has it dies.
            packed = pickle.dumps(common, protocol=pickle.HIGHEST_PROTOCOL)
            self._last = common
            self._sent = self._client.submit(pickle.loads, packed, key=f"semitau-common-{uuid.uuid4().hex}")
        return self._sent


class OtherVersions(Exception):
    """A worker that came later, with other versions: its address and its fingerprint."""


@cache
def fingerprint() -> dict[str, str]:
    """What must be the same on all workers for the same results: versions, and a digest of our source."""
    return {
        **versions(),
        "python": ".".join(platform.python_version_tuple()[:2]),
        "code": code_digest("core", "gen", "fit")[:12],
    }


def _done(wanted: dict[str, str], function: Callable[..., T], *arguments: object) -> T:
    """A task on a worker."""
    here = fingerprint()
    if here != wanted:
        from distributed import get_worker

        raise OtherVersions(get_worker().address, here)
    return function(*arguments)


def _key(function: Callable[..., Any]) -> str:
    """A new name for a task. Its first word tells the scheduler which tasks take alike long."""
    kind = re.sub("[^a-z]", "", getattr(function, "__name__", "")) or "task"
    return f"{kind}-{uuid.uuid4().hex}"


def _first_line(error: BaseException) -> str:
    lines = str(error).splitlines()
    return f"{type(error).__name__}: {lines[0]}" if lines else type(error).__name__


@contextmanager
def _quiet(*names: str) -> Iterator[None]:
    before = {name: logging.getLogger(name).level for name in names}
    for name in names:
        logging.getLogger(name).setLevel(logging.CRITICAL + 1)
    try:
        yield
    finally:
        for name, level in before.items():
            logging.getLogger(name).setLevel(level)
