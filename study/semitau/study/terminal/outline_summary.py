"""The outline of a study as tables for people."""

from __future__ import annotations

from rich.console import RenderableType
from rich.text import Text

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
        f"Variations: {groups}. {outline.scenarios} of their sides reconstruct the same events anew.",
        f"Data: {outline.data}. Toys: {counted(outline.toys)}. Seed: {outline.seed}. Output: {outline.output}.",
        f"Cost: {cost}.",
        *(Text(f"Look at this: {warning}", style="yellow") for warning in outline.warnings),
    ]
