"""The command line answers at once, helps with mistakes, and every command keeps the shared promises."""

from __future__ import annotations

import json
import os
import re
import subprocess
import sys
import time
from importlib import import_module
from pathlib import Path

import click
import pytest
from semitau.study.command_line import COMMANDS, main

HEAVY = ("numpy", "pydantic", "scipy", "numba", "uproot", "awkward", "matplotlib", "rich", "jinja2", "boost_histogram")

SHARED = {"--seed", "--workers", "--engine", "--quiet", "--json"}


def test_help_imports_nothing_heavy() -> None:
    code = f"""
import sys
from semitau.study.command_line import main
status = main(["--help"])
print([name for name in {HEAVY!r} if name in sys.modules])
sys.exit(status)
"""
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines()[-1] == "[]"


def test_help_within_a_tenth_of_a_second() -> None:
    """The promise is 0.1 s on an idle machine; the best of five is allowed three times that on a loaded one."""
    command = [sys.executable, "-m", "semitau.study", "--help"]
    times = []
    for _ in range(5):
        start = time.perf_counter()
        subprocess.run(command, capture_output=True, check=True)
        times.append(time.perf_counter() - start)
    assert min(times) < 0.3, times


@pytest.mark.parametrize("name", COMMANDS)
def test_each_command_keeps_the_promises(name: str) -> None:
    command = import_module(f"semitau.study.commands.{name}").command
    assert isinstance(command, click.Command)
    options = {option for parameter in command.params for option in parameter.opts}
    assert options >= SHARED
    assert command.help
    assert command.help.splitlines()[0] == COMMANDS[name], "the list of commands tells another story than the command"


def test_commands_are_explained_in_docs() -> None:
    text = (Path(__file__).parents[2] / "docs" / "commands.md").read_text()
    sections = dict(re.findall(r"^## semitau (\w+)[^\n]*\n(.*?)(?=^## |\Z)", text, flags=re.M | re.S))
    assert list(sections) == list(COMMANDS)
    for name, section in sections.items():
        command = import_module(f"semitau.study.commands.{name}").command
        for parameter in command.params:
            if isinstance(parameter, click.Option) and not SHARED & set(parameter.opts):
                assert f"`{parameter.opts[0]}" in section, f"{name}: {parameter.opts[0]}"


@pytest.mark.parametrize(
    ("given", "advice"), [("stdy", "study"), ("extrct", "extract"), ("xyzzy", "There are: study, check")]
)
def test_misspelt_command(given: str, advice: str, capsys: pytest.CaptureFixture[str]) -> None:
    assert main([given]) == 2
    error = capsys.readouterr().err
    assert f"There is no command '{given}'" in error
    assert advice in error


def test_misspelt_option(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["toys", "--wrkers", "2", "x.root"]) == 2
    assert "--workers" in capsys.readouterr().err


@pytest.mark.parametrize("option", [["--workers", "0"], ["--workers", "two"], ["--seed", "-1"]])
def test_senseless_option(option: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["schema", *option]) == 2
    assert option[0] in capsys.readouterr().err


def test_version(capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["--version"]) == 0
    assert capsys.readouterr().out.startswith("semitau 0.")


@pytest.mark.parametrize("which", [[], ["--results"]])
def test_schema_is_json_and_goes_whole_into_a_file(
    which: list[str], tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    assert main(["schema", *which]) == 0
    printed = capsys.readouterr().out
    assert json.loads(printed)["type"] == "object"
    assert main(["schema", *which, "--output", str(tmp_path / "schema.json"), "--quiet"]) == 0
    assert (tmp_path / "schema.json").read_text() == printed
    assert os.listdir(tmp_path) == ["schema.json"]


def test_letters_that_the_terminal_cannot_show() -> None:
    """A result in a poorer encoding is better than none: the help has an ellipsis or dash, `rates` Greek letters."""
    study = Path(__file__).parents[2] / "configs" / "marlow_small.toml"
    command = [sys.executable, "-m", "semitau.study", "rates", str(study)]
    environment = os.environ | {"PYTHONIOENCODING": "ascii", "PYTHONUTF8": "0"}
    done = subprocess.run(command, env=environment, capture_output=True, check=False)
    assert done.returncode == 0, done.stderr
    assert b"?" in done.stdout
