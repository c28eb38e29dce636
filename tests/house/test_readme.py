"""The README is executed: its commands exist, its Python block prints what it says, as those of docs/python.md do."""

from __future__ import annotations

import re
import subprocess
import sys
from pathlib import Path

import pytest

ROOT = Path(__file__).parents[2]
README = (ROOT / "README.md").read_text()


def blocks(language: str) -> list[str]:
    return re.findall(rf"^```{language}\n(.*?)^```", README, flags=re.M | re.S)


def test_two_commands() -> None:
    assert "make run" in README
    assert "make test" in README
    targets = set(re.findall(r"^([\w-]+):", (ROOT / "Makefile").read_text(), flags=re.M))
    named = set(re.findall(r"^make ([\w-]+)", "\n".join(blocks("sh")), flags=re.M))
    assert named, "the README shows no make command"
    assert named <= targets


def test_commands_exist() -> None:
    named = set(re.findall(r"^(?:\.venv/bin/)?semitau (\w+)", "\n".join(blocks("sh")), flags=re.M))
    assert named, "the README shows no semitau command"
    shown = subprocess.run(
        [sys.executable, "-m", "semitau.study", "--help"], capture_output=True, text=True, check=True
    )
    for name in named:
        assert re.search(rf"^\s+{name}\b", shown.stdout, flags=re.M), f"semitau {name} is not a command"


def test_files_exist() -> None:
    for path in re.findall(r"\b(?:configs|docs|benchmarks)/[\w./]+\w", README):
        assert (ROOT / path).exists(), f"README names {path}"
    for target in re.findall(r"\]\(([^)#:]+)\)", README):
        assert (ROOT / target).exists(), f"README links to {target}"


@pytest.mark.parametrize("number", range(len(blocks("python"))))
def test_python_blocks_print_what_they_say(number: int) -> None:
    code = blocks("python")[number]
    expected = re.findall(r"# prints: (.*)$", code, flags=re.M)
    assert expected, "a Python block of the README must state its output in '# prints:' comments"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.splitlines() == expected


def test_the_python_page_prints_what_it_says(tmp_path: Path) -> None:
    """All blocks of docs/python.md as one session, in an empty folder."""
    code = "\n".join(re.findall(r"^```python\n(.*?)^```", (ROOT / "docs" / "python.md").read_text(), flags=re.M | re.S))
    done = subprocess.run([sys.executable, "-c", code], cwd=tmp_path, capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    assert done.stdout.splitlines() == re.findall(r"# prints: (.*)$", code, flags=re.M)
