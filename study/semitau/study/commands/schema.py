"""`semitau schema`: the JSON schema of study files, for editors that complete and check while one types."""

from __future__ import annotations

import json
from pathlib import Path

import click

from ..terminal.invocation import Invocation, shared_options


@click.command()
@click.option("--results", is_flag=True, help="The schema of results.json instead.")
@click.option("--output", type=click.Path(path_type=Path, dir_okay=False), help="File to write; default: print it.")
@shared_options
def command(call: Invocation, results: bool, output: Path | None) -> None:
    """Write the JSON schema of study files, for editors."""
    from semitau.core.whole_files import write_whole

    if results:
        from ..results import Results

        schema = dict(Results.model_json_schema())
    else:
        from semitau.gen.study_file.study import json_schema

        schema = dict(json_schema())
    text = json.dumps(schema, indent=2, ensure_ascii=False) + "\n"
    if output is None:
        click.echo(text, nl=False)
    else:
        write_whole(output, text)
        call.terminal.show(f"Wrote {output}")
