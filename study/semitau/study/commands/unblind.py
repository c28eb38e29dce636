"""`semitau unblind FILE`: show the ratios of a final study."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--by", required=True, metavar="NAME", help="Who looks.")
@click.option("--output", type=click.Path(path_type=Path), help="The study's folder, instead of [study] output.")
@shared_options
def command(call: Invocation, file: Path, by: str, output: Path | None) -> None:
    """Show the true ratios of a study that was declared final.

    Refuses if study, templates, data, code or passphrase have changed since. Writes who, when and the hashes into
    unblinding.json first; then results, pictures and report, not hidden, into the folder `unblinded`.
    """
    from ..blinding.finality import unblind
    from ..terminal.summary import summary

    with call.terminal.progress() as report:
        run, record = unblind(file, by, output, call.seed, call.workers, report)
    call.terminal.show(summary(run.results, str(run.folder.report)))
    call.terminal.result({"record": record, "ratios": [ratio.model_dump(mode="json") for ratio in run.results.ratios]})
