"""The outline of a study as tables for people."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.text import Text

from ..graph.plan import StepPlan
from ..numbers import counted
from ..run.study_outline import StudyOutline
from .progress import duration
from .summary import plain_table


def outline_tables(outline: StudyOutline, workers: int) -> list[RenderableType]:
    """Components, categories, and one line each for variations, fit and cost."""
    components = plain_table("Component", "role", "generated", "expected", "chains", "yield")
    for part in outline.components:
        components.add_row(
            part.label,
            part.role,
            counted(part.generated),
            counted(part.expected),
            str(part.chains) if part.chains else "–",
            part.yield_,
        )
    total = sum(part.generated for part in outline.components)
    components.add_section()
    components.add_row("all", "", counted(total), "", "", "", style="bold")
    categories = plain_table("Category", "axes (bins)", "bins")
    for label, axes, bins in outline.categories:
        categories.add_row(label, axes, counted(bins))
    steps = plain_table("Step", "there already", "will be made", "about")
    for row in _step_rows(outline):
        steps.add_row(*row)
    groups = ", ".join(f"{group}: {count}" for group, count in outline.variations.items()) or "none"
    cost = (
        f"about {duration(outline.seconds)} with {workers} workers (a minute more when the code is compiled first), "
        f"{counted(outline.memory / 1e6)} MB of memory, {outline.disk / 1e6:.0f} MB on disk"
    )
    return [
        Text(f"{outline.name} is a good study file.", style="bold"),
        Text("Expected: decays beside a tag whose D is looked for, before acceptance; for backgrounds before cuts."),
        "",
        components,
        "",
        categories,
        "",
        steps,
        "",
        f"Variations: {groups}. {outline.scenarios} of their sides reconstruct the same events anew.",
        f"Data: {outline.data}. Toys: {counted(outline.toys)}. Seed: {outline.seed}. Output: {outline.output}.",
        f"Cost: {cost}.",
        *(Text(f"Look at this: {warning}", style="yellow") for warning in outline.warnings),
    ]


def _step_rows(outline: StudyOutline) -> Iterator[tuple[str, str, str, str]]:
    """Step, what is there of it, what will be made, and how long that takes; steps of components in one row."""
    by_name: dict[str, list[StepPlan]] = {}
    for step in outline.steps:
        by_name.setdefault(step.name, []).append(step)
    for name, steps in by_name.items():
        if steps[0].part:
            there = [step.part for step in steps if step.there == 1.0]
            begun = [f"{step.part} ({100 * step.there:.0f} %)" for step in steps if step.there and step.there < 1.0]
            left = [step.part for step in steps if step.there != 1.0]
            words = _listed([*there, *begun], len(steps)), _listed(left, len(steps))
        elif steps[0].there is None:
            words = "", "in any case" if name in ("fit", "pictures") else "all"
        else:
            share = steps[0].there
            words = (
                "all" if share == 1.0 else f"{100 * share:.0f} %" if share else "",
                "" if share == 1.0 else "the rest",
            )
        seconds = sum(step.seconds for step in steps)
        yield name, *words, duration(seconds) if seconds else ""


def _listed(parts: list[str], of: int) -> str:
    if len(parts) == of and not any("%" in part for part in parts):
        return "all"
    return ", ".join(parts) if len(parts) <= 2 else f"{len(parts)} of {of}"
