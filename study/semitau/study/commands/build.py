"""`semitau build FILE`: the templates."""

from __future__ import annotations

from contextlib import nullcontext
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

    from ..graph.materials import Materials
    from ..graph.store import Store
    from ..parts.reweighting_parts import reweighting_line, reweighting_warnings
    from ..run.opening import open_study
    from ..run.study_folder import StudyFolder, claimed_folder, own_folder
    from ..run.study_templates import study_templates, write_template_file
    from ..terminal.summary import cut_flow_table

    study = open_study(file, call.seed)
    folder = claimed_folder(Path(study.study.output), study.study.name) if output is None else own_folder(study)
    if folder is not None and output is None:
        write_whole(folder.study_file, study.text)
    store = None if folder is None else Store(folder.store, fresh=again)
    target = output or StudyFolder(Path(study.study.output)).templates
    with call.terminal.progress() as report, nullcontext() if store is None else store.in_use():
        made = study_templates(Materials(study, store, call.workers, report))
        write_template_file(made.templates, target, store)
    call.terminal.show(*(store.notes if store is not None else ()))
    reused = " (all events were there already; --again makes them anew)" if made.reused else ""
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
