"""`semitau reach TEMPLATES`: what more data would bring."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.fit_choices import FitChoices, fit_choices
from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("templates", type=click.Path(path_type=Path))
@click.option(
    "--factors",
    default="0.1,0.2,0.5,1,2,5,10,20,50,100",
    show_default=True,
    metavar="LIST",
    help="Multiples of the data.",
)
@click.option("--true", "true", multiple=True, metavar="NAME=VALUE", help="True ratio; default: that of the templates.")
@click.option(
    "--against", multiple=True, metavar="NAME=VALUE:ERROR", help="What the ratio is compared with; may be repeated."
)
@click.option("--pairs", type=click.FloatRange(min=1.0), help="B pairs of the templates; default: of their study.")
@fit_choices
@click.option("--output", type=click.Path(path_type=Path), help="Folder for the picture; without it none is drawn.")
@shared_options
def command(
    call: Invocation,
    templates: Path,
    factors: str,
    true: tuple[str, ...],
    against: tuple[str, ...],
    pairs: float | None,
    choices: FitChoices,
    output: Path | None,
) -> None:
    """Expected errors and significance against the amount of data.

    The events of TEMPLATES are multiplied, the generated ones stay as many as they are. Everything is from expected
    sets: --seed and --workers change nothing.
    """
    from semitau.core.template_file import read_templates
    from semitau.fit.uncertainty.prospects import reach

    from ..parts.reach_parts import axis_of, reach_document, reach_picture, reach_summary, read_compared, read_true
    from ..run.fitting import read_factors

    at, compared, multiples = read_true(true), read_compared(against), read_factors(factors)
    read = read_templates(templates)
    axis = axis_of(read, pairs)
    with call.terminal.progress() as report:
        found = reach(read, multiples, true=at, against=compared, make=choices.model, report=report)
    labels = {parameter.name: parameter.label for parameter in read.parameters}
    call.terminal.show(*reach_summary(found, labels, axis))
    if output is not None:
        reach_picture(found, labels, axis).save(
            output, "reach", "Reach", "Errors by source and expected significance against the amount of data."
        )
        call.terminal.show("", f"Picture: {output / 'reach.svg'}, {output / 'reach.png'}")
    call.terminal.result(reach_document(found, axis))
