"""`semitau toys TEMPLATES`: is the fit unbiased, and do its errors cover?"""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.fit_choices import FitChoices, fit_choices
from ..terminal.invocation import Invocation, shared_options

SEED = 1


@click.command()
@click.argument("templates", type=click.Path(path_type=Path))
@click.option("--number", type=click.IntRange(2), default=2000, show_default=True, help="Toys.")
@click.option(
    "--factors", default="", metavar="LIST", help='Also fit toys at these multiples of the ratios, e.g. "0.8,1,1.2".'
)
@fit_choices
@click.option("--output", type=click.Path(path_type=Path, dir_okay=False), help="ROOT file for every toy.")
@shared_options
def command(
    call: Invocation,
    templates: Path,
    number: int,
    factors: str,
    choices: FitChoices,
    output: Path | None,
) -> None:
    """Bias, pulls and coverage of the fit from pseudo-data sets.

    Each toy draws counts and auxiliary measurements from the model of TEMPLATES and is fitted. The seed is 1 unless
    --seed says otherwise.
    """
    from semitau.fit.toys.straightness import linearity
    from semitau.fit.toys.toys import run_toys

    from ..parts.toy_file import write_toys
    from ..parts.toy_parts import linearity_parts, overall_verdict, toys_part
    from ..run.fitting import open_model, read_factors
    from ..terminal.summary import linearity_table, toy_table, verdict_text

    seed = SEED if call.seed is None else call.seed
    multiples = read_factors(factors)
    model = open_model(templates, choices)
    labels = {parameter.name: parameter.label for parameter in model.parameters}
    with call.terminal.progress() as report:
        toys = run_toys(model, number, seed, call.workers, report)
        lines = linearity(model, multiples, number, seed, call.workers, report) if multiples else None
    if output is not None:
        write_toys(output, toys, dict(zip(lines.factors, lines.points, strict=True)) if lines is not None else {})
    part, line_parts = toys_part(toys, labels), linearity_parts(lines, labels) if lines is not None else ()
    verdict = overall_verdict(part, line_parts, lines.lines if lines is not None else {})
    call.terminal.show(toy_table(part), "")
    if line_parts:
        call.terminal.show(linearity_table(line_parts), "")
    call.terminal.show(verdict_text(verdict))
    call.terminal.result(
        {
            "seed": seed,
            "toys": part.model_dump(mode="json"),
            "linearity": [line.model_dump(mode="json") for line in line_parts],
            "verdict": verdict.model_dump(mode="json"),
        }
    )
