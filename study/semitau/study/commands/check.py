"""`semitau check FILE`: is the study file good, and what will it make?"""

from __future__ import annotations

from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.argument("file", type=click.Path(path_type=Path))
@shared_options
def command(call: Invocation, file: Path) -> None:
    """Read a study file and say what it will make.

    Every problem of FILE is told at once, with line, key, value and remedy. If there is none: components with generated
    and expected events, categories, variations, the steps with what is there of them already, and rough time, memory
    and disk.
    """
    from ..graph.store import Store
    from ..run.opening import open_study
    from ..run.study_folder import own_folder
    from ..run.study_outline import study_outline
    from ..terminal.outline_summary import outline_tables

    study = open_study(file, call.seed)
    folder = own_folder(study)
    store = None if folder is None else Store(folder.store)
    outline = study_outline(study, call.workers, store)
    call.terminal.show(*outline_tables(outline, call.workers))
    call.terminal.show(*(store.notes if store is not None else ()))
    call.terminal.result(outline.document())
