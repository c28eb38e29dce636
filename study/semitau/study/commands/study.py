"""`semitau study FILE`: the whole job."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="Folder for everything, instead of [study] output.")
@click.option("--again", is_flag=True, help="Make everything anew, whatever is stored.")
@shared_options
def command(call: Invocation, file: Path, output: Path | None, again: bool) -> None:
    """Run a whole study: study file in; ratios, verdict, pictures and report out.

    Builds the templates of FILE, fits the data, takes the uncertainty apart, fits toys at one and at several injected
    ratios, and writes templates.root, toys.root, results.json, pictures/ and report.html into one folder. Outcomes are
    kept step by step: after a change only what depends on it is made again, and a run that was stopped goes on there.
    """
    from ..run.study_run import run_study
    from ..terminal.summary import summary

    with call.terminal.progress() as report:
        run = run_study(file, output=output, seed=call.seed, workers=call.workers, report=report, again=again)
    call.terminal.show(*run.notes)
    if run.reused:
        call.terminal.show(f"Results of this study are in {run.folder.path} already (--again makes them anew).", "")
    call.terminal.show(summary(run.results, str(run.folder.report)))
    call.terminal.result(run.results.model_dump(mode="json"))
