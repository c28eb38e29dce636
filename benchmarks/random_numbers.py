"""How many random numbers a decay takes: counted, by running the kernels uncompiled with a counting generator.

Runs in a process of its own: `python -m benchmarks.random_numbers STUDY [KINDS]` prints JSON, kind of chain -> [truth,
find, measure], numbers for each decay in a block at these stages; for the first KINDS kinds only, if given.
"""

from __future__ import annotations

import json
import os
import subprocess
import sys
import warnings
from typing import TYPE_CHECKING

import numpy as np

if TYPE_CHECKING:
    from semitau.gen.decays.chains import Channel

Counts = dict[str, list[float]]


def kind(channel: Channel) -> str:
    """What decides how many numbers a chain draws."""
    light = f"{channel.bachelor} {channel.second} {channel.decay.charm_mass is None}"
    return f"{channel.ground} {channel.vector} {channel.soft} {light} {bool(channel.tau_to)}"


def counted(study: str, most_kinds: int = 1000) -> Counts:
    """Numbers for each decay at each stage, for every kind of chain in a study file."""
    command = [sys.executable, "-m", "benchmarks.random_numbers", study, str(most_kinds)]
    environment = os.environ | {"NUMBA_DISABLE_JIT": "1"}
    done = subprocess.run(command, env=environment, capture_output=True, text=True, check=True)
    counts: Counts = json.loads(done.stdout)
    return counts


def _count(study_file: str, most_kinds: int) -> Counts:
    from semitau.core import streams

    plain, calls = streams.uniform, 0

    def counting(key: np.uint64, draw: np.uint64) -> float:
        nonlocal calls
        calls += 1
        return plain(key, draw)

    vars(streams)["uniform"] = counting  # before the kernels import it
    from semitau.gen.block import LANES
    from semitau.gen.study_file.reader import read_study
    from semitau.gen.templates import chunk, component_plan
    from semitau.gen.templates.chunk_tasks import channel_inputs, channel_tasks, make_bench

    stages = {"draw_block": 0, "find": 0, "measure": 0}  # kernels of a chunk, with photons in the first

    def watched(name: str) -> None:
        kernel = getattr(chunk, name)

        def run(*arguments: object) -> None:
            before = calls
            kernel(*arguments)
            stages[name] = calls - before

        setattr(chunk, name, run)

    for name in stages:
        watched(name)
    study = read_study(study_file)
    bench, counts = make_bench(study, variations=False), Counts()
    for plan in component_plan.plan_channels(study):
        if kind(plan.channel) not in counts and len(counts) < most_kinds:
            inputs = channel_inputs(plan, bench, streams.stream_key(1, "count"))
            for task in channel_tasks(inputs, bench, 0, LANES):
                task()
            counts[kind(plan.channel)] = [number / LANES for number in stages.values()]
    return counts


if __name__ == "__main__":
    warnings.simplefilter("ignore")  # plain integers of numpy warn where compiled ones wrap around
    np.seterr(all="ignore")
    print(json.dumps(_count(sys.argv[1], int(sys.argv[2]))))
