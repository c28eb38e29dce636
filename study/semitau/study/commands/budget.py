"""`semitau budget TEMPLATES`: the uncertainty by source."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.fit_choices import FitChoices
from ..terminal.invocation import Invocation, shared_options
from ..terminal.template_options import template_options


@click.command()
@template_options
@shared_options
def command(call: Invocation, templates: Path, data: Path | None, expected: bool, choices: FitChoices) -> None:
    """Take the uncertainty of each ratio apart by source.

    Sources are the finite data, the finite templates, each group of nuisances and the constrained yields; their squares
    add up to the square of the whole error. Then by how much the error falls, in quadrature, when one source alone is
    held, and each nuisance: its pull, its error over that of its auxiliary measurement, what it does to the ratios.
    """
    from semitau.fit.uncertainty.decomposition import budget
    from semitau.fit.uncertainty.nuisances import held_in_turn, nuisance_shifts

    from ..blinding.cover import cover_of
    from ..parts.coefficient_fits import refuse_hidden
    from ..parts.fit_parts import budget_parts, nuisance_parts, ratio_parts
    from ..run.fitting import choose_data, described, fit_or_fail, open_model
    from ..terminal.summary import budget_table, held_table, nuisance_table

    model = open_model(templates, choices)
    observed, source = choose_data(model, data, expected)
    hiding = cover_of(model.templates, source.kind)
    refuse_hidden(model, hiding)
    result = fit_or_fail(model, observed)
    split = budget(model, result)
    parts = budget_parts(split, {name: held_in_turn(model, result, name) for name in split})
    nuisances = nuisance_parts(nuisance_shifts(model, observed, result))
    shown = result if hiding is None else hiding.result(model, result)
    ratios = ratio_parts(model, shown, split, hidden=hiding is not None)
    call.terminal.show(
        described(source),
        "",
        budget_table(parts, ratios),
        "",
        held_table(parts, ratios),
        "",
        nuisance_table(nuisances, ratios),
    )
    call.terminal.result(
        {
            "data": source.model_dump(mode="json"),
            "ratios": [ratio.model_dump(mode="json") for ratio in ratios],
            "blinding": None if hiding is None else hiding.part.model_dump(mode="json"),
            "nuisances": [part.model_dump(mode="json") for part in nuisances],
            "budget": [part.model_dump(mode="json") for part in parts],
            "parameters": {name: dict(part.sources) for name, part in split.items()},
        }
    )
