"""The design of a study: search on one sample, confirmation on another, and what there is to say about both."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass, replace

from semitau.core.engine import checked_workers
from semitau.core.errors import InputError, Problem
from semitau.fit.uncertainty.working_points import FIRST, Sensitivity, scale_columns, side_columns
from semitau.gen.candidates.grid_sums import Columns, grid_sums
from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.design_conflicts import design_conflicts
from semitau.gen.study_file.study import StudyConfig

from .confirming import BATCHES, LEAST_BATCHES, Confirmed, confirm, confirmation_space
from .evaluation import Evaluator
from .goal import Goal
from .merging import Merged, Wanted, choices, merge
from .search import GAIN, Budget, best_cuts
from .skeleton import skeleton_model
from .space import Space, WorkingPoint, make_space

Report = Callable[[str, int, int | None], None]
SEARCH, CONFIRMATION = "design", "confirmation"
"""Names of the random streams: independent of each other and of the templates."""

ROUNDS = 4
"""Binnings and cuts in turn, at most so often: the best cuts move with the axes."""


@dataclass(frozen=True)
class Choice:
    """A binning of one table that was compared. chosen : whether it was taken."""

    table: int
    observables: tuple[str, ...]
    merged: Merged
    chosen: bool


@dataclass(frozen=True, eq=False)
class Found:
    """Everything about a search. choices : as compared at the best cuts."""

    evaluator: Evaluator
    proposed: WorkingPoint
    confirmed: Confirmed
    choices: tuple[Choice, ...]
    points: int
    generated: int


def columns_of(study: StudyConfig) -> tuple[Sensitivity, Columns]:
    """What the parameters of a study need to be summed of its candidates."""
    model = skeleton_model(study)
    sensitivity = Sensitivity.of(model)
    return sensitivity, Columns(sensitivity.names, scale_columns(model), side_columns(model, study.fit.mirrored))


def evaluator_of(
    study: StudyConfig,
    design: DesignSection,
    workers: int | None = None,
    report: Report | None = None,
    *,
    purpose: str = SEARCH,
) -> Evaluator:
    """Working points of a study on events generated for them.

    purpose : names the random streams; that of the templates gives the events of the templates.

    Raises InputError for what cannot be scanned, and what `grid_sums` raises.
    """
    workers = checked_workers(workers)
    refused = list(design_conflicts(study, design))
    if refused:
        raise InputError(*(Problem(c.what, ".".join(map(str, c.place)), c.got, c.wanted, c.remedy) for c in refused))
    sensitivity, columns = columns_of(study)
    goal = Goal.of(design.minimise, sensitivity.ratios, sensitivity.values)
    space = make_space(study, design, FIRST + len(sensitivity.names))
    (grid,) = grid_sums(
        study, space.grids(study.categories), columns, purpose=purpose, most_events=design.events, workers=workers,
        report=report,
    )  # fmt: skip
    return Evaluator.on(space, grid, sensitivity, goal, workers)


def search(
    study: StudyConfig, design: DesignSection, workers: int | None = None, report: Report | None = None
) -> Found:
    """Search for the best working point and confirm it.

    Raises InputError for what cannot be scanned, for a selection that leaves no candidates, and where the ratios cannot
    be told at the starting point.
    """
    evaluator = evaluator_of(study, design, workers, report)
    space = evaluator.space
    if evaluator.covariance(space.start) is None:
        raise InputError(
            Problem(
                "the ratios cannot be told at the starting point: no expected information on some parameter",
                where="[design]",
                remedy="Constrain or fix yields, loosen the selection, or generate more events.",
            )
        )
    budget = Budget(design.points, design.points, report)
    best = best_cuts(evaluator, space.start, study.study.seed, budget)
    compared: tuple[Choice, ...] = ()
    looked_at = 0
    for number in range(ROUNDS if design.binning else 0):
        best, compared = _best_binnings(evaluator, design, best, report)
        looked_at += sum(len(choice.merged.bins) for choice in compared)
        moved = best if number == ROUNDS - 1 else best_cuts(evaluator, best, study.study.seed, budget)
        if moved.cuts == best.cuts:
            break  # what was compared was compared at the proposed cuts
        best = moved
    if not evaluator.merit(best) < evaluator.merit(space.start) * (1.0 - GAIN):
        best = space.start
    confirmed = _confirm(study, design, evaluator, best, report)
    return Found(evaluator, best, confirmed, compared, budget.used + looked_at, evaluator.grid.generated)


def _best_binnings(
    evaluator: Evaluator, design: DesignSection, point: WorkingPoint, report: Report | None
) -> tuple[WorkingPoint, tuple[Choice, ...]]:
    """The binning of each table in turn: of those that lose next to nothing against the best the one with fewest bins.

    The binning that a table has stays unless another one is better, or as good with fewer bins.
    """
    space = evaluator.space
    wanted = Wanted(design.least, design.poor, design.loss)
    sets = [(table, own) for table, known in enumerate(space.tables) for own in choices(known, design.most_axes)]
    compared: list[Choice] = []
    for table in range(len(space.tables)):
        found = []
        for number, observables in ((k, own) for k, (t, own) in enumerate(sets) if t == table):
            found.append(Choice(table, observables, merge(evaluator, point, table, observables, wanted), False))
            if report is not None:
                report("binnings", number + 1, len(sets))
        limit = min(choice.merged.merit for choice in found) * (1.0 + design.loss)
        close = [choice for choice in found if choice.merged.merit <= limit]
        taken = min(close, key=lambda choice: (choice.merged.size, choice.merged.merit))
        now, merit = _bins_now(evaluator, point, table), evaluator.merit(point)
        if merit <= limit and now <= taken.merged.size:
            compared += found
            continue
        point = point.with_binning(table, taken.merged.binning)
        compared += [replace(choice, chosen=choice is taken) for choice in found]
    return point, tuple(compared)


def _bins_now(evaluator: Evaluator, point: WorkingPoint, table: int) -> int:
    size = 1
    for edges in evaluator.space.template_axes(point, table).values():
        size *= len(edges) - 1
    return size


def _confirm(
    study: StudyConfig, design: DesignSection, evaluator: Evaluator, best: WorkingPoint, report: Report | None
) -> Confirmed:
    space: Space = evaluator.space
    points = (space.start, best)
    coarse = confirmation_space(space, points)
    _, columns = columns_of(study)
    few = coarse.grids(study.categories)
    room = design.memory * 1_000_000 // (8 * len(columns.all) * sum(grid.rows for grid in few))
    grids = grid_sums(
        study, few, columns, purpose=CONFIRMATION, most_events=design.events,
        batches=min(BATCHES, max(LEAST_BATCHES, room)), workers=evaluator.workers, report=_renamed(report),
    )  # fmt: skip
    return confirm(space, coarse, grids, points, evaluator.sensitivity, evaluator.goal)


def _renamed(report: Report | None) -> Report | None:
    if report is None:
        return None
    return lambda _, done, total: report("confirmation", done, total)
