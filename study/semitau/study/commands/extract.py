"""`semitau extract TEMPLATES`: the fit."""

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
    """Fit templates to data: ratios, errors, correlations.

    TEMPLATES is a template file from anybody's simulation (docs/template_file.md). What is fitted: the file of --data,
    else the data in TEMPLATES, else the expected events.
    """
    from semitau.fit.uncertainty.decomposition import budget

    from ..blinding.cover import cover_of
    from ..parts.coefficient_fits import fit_coefficients, refuse_hidden
    from ..parts.fit_parts import fit_part, ratio_parts
    from ..run.fitting import choose_data, described, fit_or_fail, open_model
    from ..terminal.summary import goodness_line, hidden_line, parameter_table, ratio_table

    model = open_model(templates, choices)
    observed, source = choose_data(model, data, expected)
    hiding = cover_of(model.templates, source.kind)
    refuse_hidden(model, hiding)
    result, notes = fit_coefficients(model, observed) if model.coefficients else (fit_or_fail(model, observed), ())
    shown = result if hiding is None else hiding.result(model, result)
    ratios = ratio_parts(model, shown, budget(model, result), hidden=hiding is not None)
    fit = fit_part(model, shown)
    call.terminal.show(described(source), "", ratio_table(ratios), "")
    if hiding is not None:
        call.terminal.show(hidden_line(hiding.part))
    call.terminal.show(goodness_line(fit), parameter_table(fit))
    call.terminal.show(*(f"Look at this: {note}" for note in notes))
    call.terminal.result(
        {
            "data": source.model_dump(mode="json"),
            "blinding": None if hiding is None else hiding.part.model_dump(mode="json"),
            "ratios": [ratio.model_dump(mode="json") for ratio in ratios],
            "fit": fit.model_dump(mode="json"),
            "warnings": list(notes),
        }
    )
