"""`semitau report FOLDER`: pictures and report from the stored results."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("folder", type=click.Path(path_type=Path))
@shared_options
def command(call: Invocation, folder: Path) -> None:
    """Draw pictures and report of a study folder again.

    FOLDER is the output of `semitau study`; its results.json says everything that is drawn.
    """
    from ..pictures import draw_pictures
    from ..report import write_report
    from ..results import read_results
    from ..terminal.summary import summary

    results = read_results(folder / "results.json")
    with call.terminal.progress() as report:
        pictures = draw_pictures(results, folder / "pictures", report, again=True)
    write_report(results, pictures, folder / "report.html")
    call.terminal.show(summary(results, str(folder / "report.html")))
    call.terminal.result({"report": str(folder / "report.html"), "pictures": [picture.name for picture in pictures]})
