"""What a command prints: tables for people, JSON for programs, progress on stderr."""

from __future__ import annotations

import json
from collections.abc import Iterator, Mapping
from contextlib import contextmanager
from typing import TYPE_CHECKING

import click

if TYPE_CHECKING:
    from rich.console import Console, RenderableType

    from .progress import Report


class Terminal:
    """Standard output and error of one command.

    With `as_json`, standard output carries one JSON document and nothing else. With `quiet`, nothing is shown but that
    document, errors and warnings. Colours and widths follow the terminal; a pipe gets plain text.
    """

    def __init__(self, quiet: bool = False, as_json: bool = False) -> None:
        self.quiet = quiet
        self.as_json = as_json

    def show(self, *things: RenderableType) -> None:
        """Print text or rich tables for a person to read."""
        if not self.quiet and not self.as_json:
            console = self._console()
            for thing in things:
                console.print(thing, highlight=False)

    def result(self, document: Mapping[str, object]) -> None:
        """Print the document as JSON if the user asked for it."""
        if self.as_json:
            click.echo(json.dumps(document, indent=2, ensure_ascii=False, allow_nan=False))

    @contextmanager
    def progress(self) -> Iterator[Report]:
        """A function report(label, done, total) that shows how far the work is, and how long it will take."""
        from .progress import bars, silence, sparse_lines

        if self.quiet:
            yield silence
            return
        console = self._console(stderr=True)
        with (bars if console.is_terminal else sparse_lines)(console) as report:
            yield report

    def _console(self, stderr: bool = False) -> Console:
        from rich.console import Console

        console = Console(stderr=stderr)
        if not console.is_terminal:
            # Rich folds at 80 columns when it writes to a pipe; tables there should keep their lines.
            console.width = max(console.width, 120)
        elif not stderr:
            console.width = max(console.width, 80)  # rather lines that the terminal breaks than figures that are cut
        return console
