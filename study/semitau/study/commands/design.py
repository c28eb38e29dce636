"""`semitau design FILE`: the selection and binning with the smallest expected error."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="Folder for pictures and snippet; without it none.")
@shared_options
def command(call: Invocation, file: Path, output: Path | None) -> None:
    """The selection and binning with the smallest total expected error.

    Generates the events of FILE once, tries the cuts and axes that its [design] names by expected information,
    systematic errors and finite templates included, and confirms the proposal on independent events. Prints the error
    against each cut, cuts that do not matter, and what to change in FILE as TOML.
    """
    from semitau.core.whole_files import write_whole

    from ..design.design_part import design_part
    from ..pictures.design import design_drawings
    from ..run.opening import open_study
    from ..terminal.design_summary import design_summary

    study = open_study(file, call.seed)
    with call.terminal.progress() as report:
        found = design_part(study, None, call.workers, report)
    call.terminal.show(*design_summary(found))
    if output is not None:
        for name, title, caption, draw in design_drawings(found):
            draw().save(output, name, title, caption)
        write_whole(output / "design.toml", found.snippet)
        call.terminal.show("", f"Pictures and design.toml: {output}")
    call.terminal.result(found.model_dump(mode="json"))
