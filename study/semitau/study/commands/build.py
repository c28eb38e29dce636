"""`semitau build FILE`: the templates."""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@click.option("--output", type=click.Path(path_type=Path), help="File; default: templates.root in [study] output.")
@click.option("--again", is_flag=True, help="Make them anew, whatever is stored.")
@shared_options
def command(call: Invocation, file: Path, output: Path | None, again: bool) -> None:
    """Make the templates of a study file.

    Every component is generated, reconstructed, selected and filled with all its variations; the template file is
    explained in docs/template_file.md.
    """
    from semitau.core.whole_files import write_whole

    from ..parts.reweighting_parts import reweighting_line, reweighting_warnings
    from ..run.opening import open_study
    from ..run.study_folder import claimed_folder
    from ..run.study_templates import study_templates
    from ..terminal.summary import cut_flow_table

    study = open_study(file, call.seed)
    target = output
    if target is None:
        folder = claimed_folder(Path(study.study.output), study.study.name)
        write_whole(folder.study_file, study.text)
        target = folder.templates
    with call.terminal.progress() as report:
        made = study_templates(study, target, call.workers, report, again)
    reused = " (they were there already; --again makes them anew)" if made.reused else ""
    call.terminal.show(cut_flow_table(made.cut_flow), "", reweighting_line(made.reweightings))
    call.terminal.show(*(f"Look at this: {warning}" for warning in reweighting_warnings(made.reweightings)))
    call.terminal.show(f"Templates: {target}{reused}")
    call.terminal.result(
        {
            "templates": str(target),
            "reused": made.reused,
            "cut_flow": [part.model_dump(mode="json") for part in made.cut_flow],
            "reweightings": [part.model_dump(mode="json") for part in made.reweightings],
        }
    )
