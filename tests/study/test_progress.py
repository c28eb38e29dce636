"""Progress: bars on a terminal, few lines elsewhere, nothing when quiet."""

from __future__ import annotations

import io

import pytest
from rich.console import Console
from semitau.study.terminal.progress import bars, sparse_lines
from semitau.study.terminal.terminal import Terminal


def test_sparse_lines_say_when_it_is_done_and_how_long_it_takes() -> None:
    out = io.StringIO()
    now = [0.0]
    with sparse_lines(Console(file=out, width=100), clock=lambda: now[0]) as report:
        for done in range(1, 101):
            now[0] += 0.5
            report("templates", done, 100)
        report("templates", 100, 100)
    lines = out.getvalue().splitlines()
    assert len(lines) == 5
    # The first step is reported at 0.5 s, the 41st 20 s later: 59 more take 29.5 s at this pace.
    assert lines[1] == "templates: 41 %, about 30 s left"
    assert lines[-1] == "templates: done in 50 s"


def test_unknown_total_is_counted() -> None:
    out = io.StringIO()
    now = [0.0]
    with sparse_lines(Console(file=out, width=100), clock=lambda: now[0]) as report:
        for done in range(3):
            report("toys", done, None)
            now[0] += 11
    assert out.getvalue().splitlines() == ["toys: 1 done", "toys: 2 done"]


def test_bars_draw_on_a_terminal() -> None:
    out = io.StringIO()
    with bars(Console(file=out, width=100, force_terminal=True)) as report:
        report("templates", 3, 10)
        report("templates", 10, 10)
    assert "templates" in out.getvalue()
    assert "10/10" in out.getvalue()


def test_quiet_says_nothing(capsys: pytest.CaptureFixture[str]) -> None:
    terminal = Terminal(quiet=True)
    with terminal.progress() as report:
        report("templates", 10, 10)
    terminal.show("text")
    assert capsys.readouterr() == ("", "")


def test_json_has_standard_output_for_itself(capsys: pytest.CaptureFixture[str]) -> None:
    terminal = Terminal(as_json=True)
    with terminal.progress() as report:
        report("templates", 10, 10)
    terminal.show("text")
    terminal.result({"a": 1.5})
    captured = capsys.readouterr()
    assert captured.out == '{\n  "a": 1.5\n}\n'
    assert "templates: done" in captured.err
