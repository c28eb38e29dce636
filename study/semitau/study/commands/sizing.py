"""`semitau sizing FILE`: how many events to generate, and of what."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.fit_choices import FitChoices, fit_choices
from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--share", type=click.FloatRange(min=0.0, max=1.0, min_open=True), help="Instead of [sizing] share.")
@click.option("--toys", type=click.IntRange(min=0), help="Instead of [sizing] toys.")
@click.option("--output", type=click.Path(path_type=Path), help="Folder for pictures and snippets; without it none.")
@fit_choices
@shared_options
def command(
    call: Invocation, file: Path, share: float | None, toys: int | None, output: Path | None, choices: FitChoices
) -> None:
    """What finite templates cost, how many events are needed, and how to share out the time.

    FILE is a study file: its templates are built, and others with fewer events, to verify the prediction and to measure
    times. Or FILE is a template file from anybody: then nothing is generated, and numbers of events are multiples of
    those behind the templates. Options for the fit go with template files; a study file has [fit].
    """
    from matplotlib import rc_context
    from semitau.core.whole_files import write_whole

    from ..pictures.sizing import sizing_drawings
    from ..pictures.style import RC
    from ..sizing.opening import sizing_of_file
    from ..terminal.sizing_summary import sizing_summary

    with call.terminal.progress() as report:
        found = sizing_of_file(file, choices, share, toys, call.seed, call.workers, report)
    call.terminal.show(*sizing_summary(found))
    if output is not None:
        with rc_context(RC):
            for name, title, caption, draw in sizing_drawings(found):
                draw().save(output, name, title, caption)
        snippets = {"needed": found.snippet, "best": found.allocation.snippet if found.allocation else ""}
        for name, text in snippets.items():
            if text:
                write_whole(output / f"events_{name}.toml", text)
        call.terminal.show("", f"Pictures and numbers of events: {output}")
    call.terminal.result(found.model_dump(mode="json"))
