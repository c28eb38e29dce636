"""`semitau profile TEMPLATES`: likelihood curves and the joint region."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.fit_choices import FitChoices
from ..terminal.invocation import Invocation, shared_options
from ..terminal.template_options import template_options


@click.command()
@template_options
@click.option("--output", type=click.Path(path_type=Path), help="Folder for the picture; without it none is drawn.")
@click.option("--points", type=click.IntRange(5, 500), default=41, show_default=True, help="Points along each axis.")
@shared_options
def command(
    call: Invocation,
    templates: Path,
    data: Path | None,
    expected: bool,
    choices: FitChoices,
    output: Path | None,
    points: int,
) -> None:
    """Likelihood curves of the ratios and their joint region.

    At each point all other parameters are fitted. The interval of a ratio is where −2 ln L is within 1 of its minimum;
    the region of the first two ratios holds 39.3, 68.3, 95.4 and 99.7 %.
    """
    import numpy as np
    from semitau.fit.uncertainty.curves import profile, region

    from ..blinding.cover import cover_of
    from ..parts.coefficient_fits import refuse_hidden
    from ..parts.likelihood_parts import curve_document, curve_table, drawn_curves, region_document
    from ..run.fitting import choose_data, described, fit_or_fail, open_model

    model = open_model(templates, choices)
    observed, source = choose_data(model, data, expected)
    hiding = cover_of(model.templates, source.kind)
    refuse_hidden(model, hiding)
    best = fit_or_fail(model, observed)
    shown = best if hiding is None else hiding.result(model, best)
    free = [name for name in model.ratios if best.error(name) > 0]
    curves = []
    plane = None
    with call.terminal.progress() as report:
        steps = len(free) + (len(free) > 1)
        for done, name in enumerate(free, start=1):
            grid = best.value(name) + best.error(name) * np.linspace(-3.0, 3.0, points)
            curves.append(profile(model, observed, name, grid, result=best))
            report("curves", done, steps)
        if len(free) > 1:
            plane = region(model, observed, (free[0], free[1]), points, result=best)
            report("curves", steps, steps)
    if hiding is not None:
        curves = [hiding.curve(curve) for curve in curves]
        plane = None if plane is None else hiding.region(plane)
    call.terminal.show(described(source), "", curve_table(model, shown, curves))
    if output is not None:
        drawn_curves(model, curves, plane, hiding is not None).save(
            output, "likelihood", "Likelihood", "Likelihood curves of the ratios and their joint region."
        )
        call.terminal.show("", f"Picture: {output / 'likelihood.svg'}, {output / 'likelihood.png'}")
    call.terminal.result(
        {
            "data": source.model_dump(mode="json"),
            "blinding": None if hiding is None else hiding.part.model_dump(mode="json"),
            "curves": [curve_document(curve) for curve in curves],
            "region": None if plane is None else region_document(plane),
        }
    )
