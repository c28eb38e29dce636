"""The options that every command takes, and what a command gets from them."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from functools import update_wrapper
from typing import Any

import click

from .terminal import Terminal


@dataclass(frozen=True)
class Invocation:
    """How a command was called.

    seed : overrides the seed of the study file, or None.
    workers : number of worker threads of this machine, at least 1.
    terminal : where results, tables and progress go.
    """

    seed: int | None
    workers: int
    terminal: Terminal


def shared_options(function: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command --seed, --workers, --engine, --quiet, --json; its first argument is an `Invocation`.

    With --engine, tasks that the command runs go to the workers of a scheduler until it returns.
    """

    @click.option("--seed", type=click.IntRange(0, 2**63 - 1), help="Random seed, instead of the one in the file.")
    @click.option("--workers", type=click.IntRange(1, 1024), help="Worker threads; default: all cores.")
    @click.option(
        "--engine",
        metavar="ADDRESS",
        help="Scheduler of dask.distributed, tcp://HOST:PORT or its scheduler file; default: threads here.",
    )
    @click.option("--quiet", is_flag=True, help="No progress, no tables; errors and warnings only.")
    @click.option("--json", "as_json", is_flag=True, help="Print the result as JSON on standard output.")
    def wrapped(
        seed: int | None, workers: int | None, engine: str | None, quiet: bool, as_json: bool, **arguments: Any
    ) -> Any:
        from semitau.core.engine import checked_workers, elsewhere

        call = Invocation(seed, checked_workers(workers), Terminal(quiet, as_json))
        if engine is None:
            return function(call, **arguments)
        from semitau.core.cluster import connected

        with connected(engine) as cluster, elsewhere(cluster):
            return function(call, **arguments)

    return update_wrapper(wrapped, function)
