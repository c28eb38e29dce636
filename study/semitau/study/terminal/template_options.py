"""Arguments of the commands that work on a template file."""

from __future__ import annotations

from collections.abc import Callable
from pathlib import Path
from typing import Any

import click

from .fit_choices import fit_choices


def template_options(function: Callable[..., Any]) -> Callable[..., Any]:
    """Give a command TEMPLATES, --data, --expected and how to fit (`choices`)."""
    for decorate in reversed(
        (
            # Existence is checked by the reader, whose message says what to do.
            click.argument("templates", type=click.Path(path_type=Path)),
            click.option("--data", type=click.Path(path_type=Path), help="ROOT file with <category>/data to fit."),
            click.option("--expected", is_flag=True, help="Fit the expected events, even if the file holds data."),
        )
    ):
        function = decorate(function)
    return fit_choices(function)
