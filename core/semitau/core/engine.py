"""Run many independent tasks on all cores and hand their results back in the order of the tasks.

The order of the results, and so everything summed from them, does not depend on the number of workers. Workers are
threads, because the compiled kernels let go of the interpreter lock. Any other `concurrent.futures.Executor` can take
their place, or, for all that runs inside `elsewhere`, other machines (cluster.py); then tasks and results must pickle.
A `Job` is a task that keeps apart what it has in common with others, which then travels once.
"""

from __future__ import annotations

import contextvars
import os
from collections import deque
from collections.abc import Callable, Iterable, Iterator, Sized
from concurrent.futures import Executor, Future, ThreadPoolExecutor
from contextlib import contextmanager
from dataclasses import dataclass
from typing import Any, Generic, Protocol, TypeVar

from .errors import InputError, Problem

T = TypeVar("T")
T_co = TypeVar("T_co", covariant=True)
Report = Callable[[int, int | None], None]

WAITING_PER_WORKER = 2
"""Tasks handed out and not yet consumed, per worker: enough to keep each busy, few enough to bound the memory."""


@dataclass(frozen=True, eq=False)
class Job(Generic[T_co]):
    """A task: function(common, *own).

    function : of a module, so that other processes find it by its name. common : may be large; workers elsewhere get it
    once for all successive jobs with the very same object. own : small.
    """

    function: Callable[..., T_co]
    common: object
    own: tuple[Any, ...] = ()

    def __call__(self) -> T_co:
        return self.function(self.common, *self.own)


class Workers(Protocol):
    """Workers that are not threads of this process."""

    def results(self, tasks: Iterator[Callable[[], T]]) -> Iterator[T]:
        """Results in the order of the tasks, a bounded number of them under way."""
        ...


_ELSEWHERE: contextvars.ContextVar[Workers | None] = contextvars.ContextVar("semitau_workers", default=None)


@contextmanager
def elsewhere(workers: Workers) -> Iterator[None]:
    """Tasks that are run inside, by this thread, go to these workers."""
    before = _ELSEWHERE.set(workers)
    try:
        yield
    finally:
        _ELSEWHERE.reset(before)


def available_cores() -> int:
    """Cores that this process may use (its CPU affinity), at least 1."""
    try:
        return len(os.sched_getaffinity(0)) or 1
    except AttributeError:  # not every system has affinities
        return os.cpu_count() or 1


def checked_workers(workers: int | None) -> int:
    """The number of workers to start, all cores for None. Raises InputError unless it is a whole number >= 1."""
    if workers is None:
        return available_cores()
    if isinstance(workers, bool) or not isinstance(workers, int) or workers < 1:
        raise InputError(
            Problem(
                "the number of workers must be a whole number",
                where="workers",
                got=repr(workers),
                wanted="1 or more",
                remedy="Leave it out to use all cores.",
            )
        )
    return workers


def run(
    tasks: Iterable[Callable[[], T]],
    workers: int | None = None,
    report: Report | None = None,
    *,
    executor: Executor | None = None,
) -> Iterator[T]:
    """Iterate over the results of the tasks, in the order of the tasks.

    Parameters
    ----------
    tasks : callables without arguments, each independent of the others; may be a generator, which is then drawn from
        as needed. Keep each under about a second: an interrupt waits for the tasks that are running.
    workers : threads; None for all cores. With 1 the tasks run in the calling thread.
    report : called as report(done, total) in the calling thread after each result; total is None for a generator.
    executor : runs the tasks instead of threads started here; `workers` then only sets how many tasks are handed out
        ahead of the results. It is left running.

    Inside `elsewhere` the workers are those given there, as many as they are.

    At most WAITING_PER_WORKER tasks per worker are under way or finished and not consumed: a slow consumer slows the
    workers instead of piling up results. An exception of a task is raised at its place in the order, whatever failed
    first by the clock; tasks not started are then cancelled, as they are on Ctrl-C and when the iterator is closed.

    Raises
    ------
    InputError : workers is no whole number >= 1 (at once, not at the first result).
    """
    count = checked_workers(workers)
    total = len(tasks) if isinstance(tasks, Sized) else None
    if executor is not None:
        results = _spread(iter(tasks), executor.submit, count)
    elif (others := _ELSEWHERE.get()) is not None:
        results = others.results(iter(tasks))
    elif count == 1:
        results = (task() for task in tasks)
    else:
        results = _on_threads(iter(tasks), count)
    return results if report is None else _reported(results, total, report)


def _on_threads(tasks: Iterator[Callable[[], T]], workers: int) -> Iterator[T]:
    pool = ThreadPoolExecutor(workers, thread_name_prefix="semitau")

    def submit(task: Callable[[], T]) -> Future[T]:
        # The caller's context goes along, so that np.errstate holds in the threads as it does with one worker.
        return pool.submit(contextvars.copy_context().run, task)

    try:
        yield from _spread(tasks, submit, workers)
    finally:
        pool.shutdown(wait=True, cancel_futures=True)


def _spread(
    tasks: Iterator[Callable[[], T]], submit: Callable[[Callable[[], T]], Future[T]], workers: int
) -> Iterator[T]:
    waiting: deque[Future[T]] = deque()
    try:
        for task in tasks:
            waiting.append(submit(task))
            if len(waiting) == WAITING_PER_WORKER * workers:
                yield waiting.popleft().result()
        while waiting:
            yield waiting.popleft().result()
    finally:
        for future in waiting:
            future.cancel()


def _reported(results: Iterator[T], total: int | None, report: Report) -> Iterator[T]:
    # Not enumerate(): an exception of the consumer must close the results, and with them the threads, at once.
    try:
        for done, result in enumerate(results, start=1):
            report(done, total)
            yield result
    finally:
        if hasattr(results, "close"):
            results.close()
