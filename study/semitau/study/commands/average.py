"""`semitau average FILE`: combine measurements, compare with a prediction, and ask what one more would change."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="Folder, instead of [average] output.")
@shared_options
def command(call: Invocation, file: Path, output: Path | None) -> None:
    """Combine measurements with correlations; compatibility with a prediction.

    FILE lists measurements of R(D) and R(D*) with their errors, correlations and common sources, a prediction, and
    planned measurements. Nothing is drawn at random: --seed and --workers change nothing.
    """
    from semitau.core.whole_files import write_whole

    from ..averages.measurement_file import read_average
    from ..averages.picture import saved_picture
    from ..averages.run import averaged
    from ..averages.summary import average_summary

    given = read_average(file)
    found = averaged(given)
    folder = output or Path(given.section.output)
    picture = saved_picture(found.results, folder)
    write_whole(folder / "average.json", found.results.text())
    call.terminal.show(*average_summary(found.results))
    call.terminal.show("", f"Results and picture: {folder / 'average.json'}, {folder / picture.name}.svg, .png")
    call.terminal.result(found.results.model_dump(mode="json"))
