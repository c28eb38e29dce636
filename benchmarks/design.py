"""Working points a second: expected errors from sums of candidates, for the Marlow study."""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
from semitau.core.engine import available_cores
from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.reader import read_study
from semitau.study.design.evaluation import Evaluator
from semitau.study.design.run import evaluator_of
from semitau.study.design.space import WorkingPoint

from .figures import Figure
from .timing import interleaved

STUDY = Path(__file__).parents[1] / "configs" / "marlow.toml"
EVENTS = 200_000
"""Generated of each component: what a point costs hardly depends on it."""


def design_figures(points: int, repetitions: int) -> list[Figure]:
    """Points with cuts drawn at random from those of [design], none looked at before, in the binning of the study."""
    study = read_study(STUDY)
    design = (study.design or DesignSection()).model_copy(update={"events": EVENTS})
    workers = min(2, available_cores())
    evaluator = evaluator_of(study, design, workers)
    drawn = some_points(evaluator, points)

    def look(workers: int) -> None:
        evaluator.remembered.clear()
        replace(evaluator, workers=workers).merits(drawn)

    timings = interleaved({str(n): (lambda n=n: look(n)) for n in (1, workers)}, repetitions)
    size = sum(table.nbytes for table in evaluator.grid.tables) / 1e6
    told = [t for table in range(len(evaluator.space.tables)) for t in evaluator.told(evaluator.space.start, table)]
    bins, names = sum(own.bins for own in told), len(evaluator.sensitivity.names)
    return [
        Figure(
            "working points of the Marlow study, two workers", points / timings[str(workers)].wall, "a second", 200.0,
            "at least", f"{bins} bins, {names} parameters; {size:.0f} MB of sums",
        ),
        Figure("… by processor time", points / timings["1"].cpu, "and core"),
    ]  # fmt: skip


def some_points(evaluator: Evaluator, number: int) -> list[WorkingPoint]:
    """Points with random cuts, the same every time."""
    random = np.random.default_rng(1)
    sizes = [len(variable.values) for variable in evaluator.space.variables]
    start = evaluator.space.start
    return [replace(start, cuts=tuple(int(random.integers(size)) for size in sizes)) for _ in range(number)]
