"""`semitau bias FILE`: what the fit makes of a world that is not quite the study's."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="Folder for the picture; without it none is drawn.")
@shared_options
def command(call: Invocation, file: Path, output: Path | None) -> None:
    """Every alternative made with each and fitted with each, and whether a systematic covers it.

    Builds the templates of FILE and of its [[alternative]] tables with common random numbers. For each pair: the shift
    of the ratios without fluctuations, its error from finite templates, pulls, coverage and goodness of fit of toys,
    and the shift against the error that is meant to cover it.
    """
    from ..bias.run import bias_part
    from ..graph.materials import Materials
    from ..graph.open_store import open_store
    from ..run.opening import open_study
    from ..terminal.bias_summary import bias_summary

    study = open_study(file, call.seed)
    # What an alternative does not touch is made once: the store knows it again.
    with call.terminal.progress() as report, open_store(study) as store:
        found = bias_part(study, Materials(study, store, call.workers), call.workers, report)
    call.terminal.show(*store.notes)
    call.terminal.show(*bias_summary(found))
    if output is not None:
        from ..pictures.bias_matrix import bias_matrix

        bias_matrix(found).save(output, "bias_matrix", "Bias matrix", "Shift of each ratio for every pair of studies.")
        call.terminal.show("", f"Picture: {output / 'bias_matrix.svg'}, {output / 'bias_matrix.png'}")
    call.terminal.result(found.model_dump(mode="json"))
