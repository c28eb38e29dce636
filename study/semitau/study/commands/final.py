"""`semitau final FILE`: declare a hidden study final."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--by", required=True, metavar="NAME", help="Who declares it.")
@click.option("--output", type=click.Path(path_type=Path), help="The study's folder, instead of [study] output.")
@shared_options
def command(call: Invocation, file: Path, by: str, output: Path | None) -> None:
    """Declare a study with hidden ratios final, before it is unblinded.

    Writes who, when, and the hashes of study, templates, data and code into final.json of the study's folder.
    """
    from ..blinding.finality import declare_final

    declaration = declare_final(file, by, output, call.seed)
    call.terminal.show(f"{declaration['name']} is final, says {by} ({declaration['when']}).")
    call.terminal.show(f"Study {declaration['study'][:16]}, templates {declaration['templates'][:16]}.")
    call.terminal.result(declaration)
