"""`semitau budget TEMPLATES`: the uncertainty by source."""

from __future__ import annotations

from pathlib import Path

import click

from ..invocation import Invocation, shared_options
from ..template_options import template_options


@click.command()
@template_options
@shared_options
def command(
    call: Invocation, templates: Path, data: Path | None, expected: bool, fix: tuple[str, ...], exact_templates: bool
) -> None:
    """Take the uncertainty of each ratio apart by source.

    Sources are the finite data, the finite templates, each group of nuisances and the constrained yields; their squares
    add up to the square of the whole error.
    """
    from semitau.fit.decomposition import budget

    from ..fit_parts import budget_parts, ratio_parts
    from ..fitting import choose_data, described, fit_or_fail, open_model
    from ..summary import budget_table

    model = open_model(templates, not exact_templates, fix)
    observed, source = choose_data(model, data, expected)
    result = fit_or_fail(model, observed)
    split = budget(model, result)
    parts, ratios = budget_parts(split), ratio_parts(model, result, split)
    call.terminal.show(described(source), "", budget_table(parts, ratios))
    call.terminal.result(
        {
            "data": source.model_dump(mode="json"),
            "ratios": [ratio.model_dump(mode="json") for ratio in ratios],
            "budget": [part.model_dump(mode="json") for part in parts],
            "parameters": {name: dict(part.sources) for name, part in split.items()},
        }
    )
