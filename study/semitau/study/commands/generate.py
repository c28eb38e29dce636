"""`semitau generate FILE`: the events themselves."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="ROOT file; default: events.root in [study] output.")
@click.option(
    "--format",
    "format_",
    type=click.Choice(["ttree", "rntuple"]),
    default="ttree",
    show_default=True,
    help="How ROOT stores them.",
)
@click.option(
    "--compression", type=click.Choice(["zstd", "lz4"]), default="zstd", show_default=True, help="Of the ROOT file."
)
@click.option(
    "--share",
    type=click.FloatRange(0, 1, min_open=True),
    default=1.0,
    show_default=True,
    help="Part of the study's events to generate; weights grow accordingly.",
)
@shared_options
def command(call: Invocation, file: Path, output: Path | None, format_: str, compression: str, share: float) -> None:
    """Write truth and reconstructed events to a ROOT file.

    The tree `truth` holds every generated decay, `candidates` what the detector makes of it, backgrounds by shape
    included; these are the events that templates are made from. The text `meta` in the file explains the columns.
    """
    from semitau.core.whole_files import write_whole
    from semitau.gen.templates.event_files import generate

    from ..numbers import counted
    from ..run.opening import open_study, thinned
    from ..run.study_folder import claimed_folder

    study = thinned(open_study(file, call.seed), share)
    target = output
    if target is None:
        folder = claimed_folder(Path(study.study.output), study.study.name)
        write_whole(folder.study_file, study.text)
        target = folder.path / "events.root"
    with call.terminal.progress() as report:
        report("events", 0, None)
        entries = generate(
            study,
            target,
            format_,
            call.workers,
            lambda _, done, total: report("events", done, total),
            compression=compression,
        )
    size = target.stat().st_size
    what = ", ".join(f"{counted(count)} in `{tree}`" for tree, count in entries.items())
    call.terminal.show(f"Events: {target} ({what}; {size / 1e6:.0f} MB)")
    call.terminal.result({"events": str(target), "entries": entries, "bytes": size})
