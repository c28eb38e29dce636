"""A scheduler and workers of dask.distributed as processes of this machine, on the loopback alone."""

from __future__ import annotations

import os
import subprocess
import sys
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path

ROOT = Path(__file__).parents[2]
"""Where workers find the tasks of tests."""

LOOPBACK = ["--host", "127.0.0.1", "--no-dashboard"]


@dataclass
class LocalCluster:
    """folder : for the scheduler file and logs. environment : of workers that are started."""

    folder: Path
    scheduler: subprocess.Popen[bytes]
    workers: list[subprocess.Popen[bytes]] = field(default_factory=list)

    @property
    def file(self) -> Path:
        return self.folder / "scheduler.json"

    def add_worker(self, **environment: str) -> subprocess.Popen[bytes]:
        """One more worker, without a nanny that would start it again."""
        options = ["--scheduler-file", str(self.file), "--no-nanny", "--nthreads", "1", *LOOPBACK]
        log = self.folder / f"worker_{len(self.workers)}.log"
        worker = _started("dask_worker", [*options, "--local-directory", str(self.folder)], log, environment)
        self.workers.append(worker)
        return worker


def _started(module: str, options: list[str], log: Path, environment: dict[str, str]) -> subprocess.Popen[bytes]:
    with log.open("wb") as file:
        return subprocess.Popen(
            [sys.executable, "-m", f"distributed.cli.{module}", *options],
            stdout=subprocess.DEVNULL,
            stderr=file,
            env={
                **os.environ,
                "PYTHONPATH": os.pathsep.join([str(ROOT), os.environ.get("PYTHONPATH", "")]),
                **environment,
            },
        )


@contextmanager
def local_cluster(folder: Path, workers: int) -> Iterator[LocalCluster]:
    """A cluster of single-threaded worker processes; all are ended at the end."""
    file = folder / "scheduler.json"
    options = ["--port", "0", "--scheduler-file", str(file), *LOOPBACK]
    cluster = LocalCluster(folder, _started("dask_scheduler", options, folder / "scheduler.log", {}))
    try:
        for _ in range(600):
            if file.exists() or cluster.scheduler.poll() is not None:
                break
            time.sleep(0.1)
        for _ in range(workers):
            cluster.add_worker()
        yield cluster
    finally:
        for process in (*cluster.workers, cluster.scheduler):
            process.kill()
            process.wait()
