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
@click.option(
    "--luminosity",
    type=click.FloatRange(min=0.0, min_open=True),
    help="Integrated luminosity in fb⁻¹, instead of pairs.",
)
@click.option("--growing", is_flag=True, help="Generated events grow with the data.")
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
    luminosity: float | None,
    growing: bool,
    choices: FitChoices,
    output: Path | None,
) -> None:
    """Expected errors and significance against the amount of data.

    The events of TEMPLATES are multiplied, the generated ones stay as many as they are. Everything is from expected
    sets: --seed and --workers change nothing.
    """
    from semitau.core.errors import InputError, Problem
    from semitau.core.template_file import read_templates

    from ..pictures.reach import CAPTION, reach_curves
    from ..reach.options import asked_reach
    from ..reach.run import reach_of
    from ..terminal.reach_summary import reach_summary

    if pairs is not None and luminosity is not None:
        raise InputError(Problem("pairs and luminosity are two axes", "--luminosity", remedy="Leave one of them out."))
    asked = asked_reach(factors, true, against, pairs, luminosity, growing)
    read = read_templates(templates)
    with call.terminal.progress() as report:
        part = reach_of(read, asked, choices.model, report)
    call.terminal.show(*reach_summary(part))
    if output is not None:
        reach_curves(part).save(output, "reach", "Reach", CAPTION)
        call.terminal.show("", f"Picture: {output / 'reach.svg'}, {output / 'reach.png'}")
    call.terminal.result(part.model_dump(mode="json"))
