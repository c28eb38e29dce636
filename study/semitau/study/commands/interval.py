"""`semitau interval TEMPLATES`: intervals of the ratios of every kind."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.fit_choices import FitChoices
from ..terminal.invocation import Invocation, shared_options
from ..terminal.template_options import template_options

SEED = 1


@click.command()
@template_options
@click.option("--confidence", type=float, default=0.6827, show_default=True, help="Of the interval from toys.")
@click.option("--toys", type=click.IntRange(0), default=1000, show_default=True, help="At each of ten values; 0: none.")
@click.option("--precision", type=float, default=0.1, show_default=True, help="Largest error of an end, in errors.")
@shared_options
def command(
    call: Invocation,
    templates: Path,
    data: Path | None,
    expected: bool,
    choices: FitChoices,
    confidence: float,
    toys: int,
    precision: float,
) -> None:
    """Intervals of the ratios: curvature, likelihood curve, toys, and corrected for poor templates.

    The interval from toys (Neyman) needs no asymptotic formula. The corrected one takes the templates' own noise out of
    the information; use it when it differs from the others.
    """
    from ..blinding.cover import cover_of
    from ..parts.coefficient_fits import refuse_hidden
    from ..parts.interval_parts import found_intervals, interval_table
    from ..run.fitting import choose_data, described, fit_or_fail, open_model

    seed = SEED if call.seed is None else call.seed
    model = open_model(templates, choices)
    observed, source = choose_data(model, data, expected)
    hiding = cover_of(model.templates, source.kind)
    refuse_hidden(model, hiding)
    best = fit_or_fail(model, observed)
    if hiding is not None:
        hiding.result(model, best)  # refuses what must not be shown
    with call.terminal.progress() as report:
        found = found_intervals(model, observed, best, hiding, confidence, toys, seed, precision, call.workers, report)
    call.terminal.show(described(source), "", interval_table(found))
    call.terminal.result(
        {
            "data": source.model_dump(mode="json"),
            "blinding": None if hiding is None else hiding.part.model_dump(mode="json"),
            "intervals": found,
        }
    )
