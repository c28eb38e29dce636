"""The command `semitau`: a group that imports a command only when it is called, so that `--help` answers at once."""

from __future__ import annotations

import os
import sys
from collections.abc import Sequence
from difflib import get_close_matches
from importlib import import_module
from io import TextIOWrapper

import click

from .error_boundary import exit_status

COMMANDS = {
    "study": "Run a whole study: study file in; ratios, verdict, pictures and report out.",
    "check": "Read a study file and say what it will make.",
    "schema": "Write the JSON schema of study files, for editors.",
    "rates": "Rates, ratios, polarisations and asymmetries, without generating.",
    "generate": "Write truth and reconstructed events to a ROOT file.",
    "build": "Make the templates of a study file.",
    "extract": "Fit templates to data: ratios, errors, correlations.",
    "toys": "Bias, pulls and coverage of the fit from pseudo-data sets.",
    "profile": "Likelihood curves of the ratios and their joint region.",
    "interval": "Intervals of the ratios: curvature, likelihood curve, toys, and corrected for poor templates.",
    "budget": "Take the uncertainty of each ratio apart by source.",
    "final": "Declare a study with hidden ratios final, before it is unblinded.",
    "unblind": "Show the true ratios of a study that was declared final.",
    "bias": "Every alternative made with each and fitted with each, and whether a systematic covers it.",
    "sizing": "What finite templates cost, how many events are needed, and how to share out the time.",
    "design": "The selection and binning with the smallest total expected error.",
    "reach": "Expected errors and significance against the amount of data.",
    "average": "Combine measurements with correlations; compatibility with a prediction.",
    "report": "Draw pictures and report of a study folder again.",
}
"""Name -> what it does. Kept here, not in the commands, so that the list needs no import; a test compares the two."""

EPILOG = (
    "Exit status: 0 fine, 1 the work failed, 2 bad input. "
    "Every command takes --seed, --workers, --engine, --quiet and --json; `semitau COMMAND --help` tells more."
)


class LazyGroup(click.Group):
    """A group of the commands in COMMANDS, each imported from `.commands` when it is called."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        command = import_module(f".commands.{cmd_name}", __package__).command
        if not isinstance(command, click.Command):
            raise TypeError(f"commands/{cmd_name}.py has no command")
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl(list(COMMANDS.items()))

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        name = args[0]
        if name not in COMMANDS and not name.startswith("-"):
            near = get_close_matches(name, COMMANDS, n=2, cutoff=0.5)
            advice = f"Did you mean {' or '.join(near)}?" if near else f"There are: {', '.join(COMMANDS)}."
            ctx.fail(f"There is no command {name!r}. {advice}")
        return super().resolve_command(ctx, args)


def _show_version(ctx: click.Context, parameter: click.Parameter, asked: bool) -> None:
    if asked and not ctx.resilient_parsing:
        from importlib.metadata import version

        click.echo(f"semitau {version('semitau')}")
        ctx.exit()


@click.command(
    cls=LazyGroup, epilog=EPILOG, context_settings={"help_option_names": ["-h", "--help"], "max_content_width": 110}
)
@click.option(
    "--version", is_flag=True, is_eager=True, expose_value=False, callback=_show_version, help="Show the version."
)
def group() -> None:
    """Pseudo-data, templates and fits for R(D) and R(D*): does the fit return the ratio that went in?"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run `semitau` with `arguments` (default: those of the process) and return its exit status."""
    # Before numpy is loaded. Our own threads use the cores, and the matrices of a fit are small: eigenvalues of 30 x 30
    # take 20 times longer when the threads of the linear algebra wait for a busy core.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper) and stream.encoding.lower().replace("-", "") != "utf8":
            stream.reconfigure(errors="replace")  # rather a question mark than no result
    given = list(sys.argv[1:] if arguments is None else arguments)
    return exit_status(lambda: group.main(given, prog_name="semitau", standalone_mode=False))
