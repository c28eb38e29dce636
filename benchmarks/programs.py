"""What is measured from outside, in processes of their own: the time of --help, memory against events."""

from __future__ import annotations

import re
import subprocess
import sys
import tempfile
import time
from pathlib import Path
from statistics import median

from .figures import Figure

_PEAK = """
import resource, sys
from semitau.gen.templates.build import build_templates
from semitau.gen.study_file.reader import read_study
build = build_templates(read_study(sys.argv[1]), workers=2)
print(build.events, resource.getrusage(resource.RUSAGE_SELF).ru_maxrss * 1024)
"""


def _seconds(command: list[str]) -> float:
    start = time.perf_counter()
    subprocess.run(command, check=True, capture_output=True)
    return time.perf_counter() - start


def help_figure(repetitions: int = 15) -> Figure:
    """`semitau --help`, beside a Python that does nothing."""
    program = [str(Path(sys.executable).with_name("semitau")), "--help"]
    pairs = [(_seconds(program), _seconds([sys.executable, "-c", "pass"])) for _ in range(repetitions)]
    ours, bare = (median(kind) for kind in zip(*pairs, strict=True))
    return Figure("semitau --help", ours, "s", 0.1, note=f"of which {bare:.3f} s are Python's own start")


def memory_figures(study: Path, factors: tuple[int, ...] = (1, 4)) -> list[Figure]:
    """Peak memory of a build with more and more events."""
    text = study.read_text()
    figures = []
    for factor in factors:
        with tempfile.TemporaryDirectory() as folder:
            more = Path(folder) / study.name
            scale = lambda match: f"events = {factor * int(match[1].replace('_', ''))}"  # noqa: B023, E731
            more.write_text(re.sub(r"^events = ([\d_]+)", scale, text, flags=re.M))
            command = [sys.executable, "-c", _PEAK, str(more)]
            events, peak = subprocess.run(command, check=True, capture_output=True, text=True).stdout.split()
        figures.append(Figure(f"peak memory of building from {int(events):,} events", int(peak) / 2**20, "MiB"))
    return figures
