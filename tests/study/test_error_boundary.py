"""Whatever goes wrong: one message on stderr, the right status, no traceback unless a developer asks for one."""

from __future__ import annotations

import errno
import os
import signal
import subprocess
import sys
import time
from pathlib import Path

import pytest
from semitau.core.errors import InputError, Problem, RunError
from semitau.study.error_boundary import DEVELOPER, exit_status


def raising(error: BaseException) -> object:
    raise error


@pytest.mark.parametrize(
    ("error", "status", "words"),
    [
        (
            InputError(Problem("edges must increase", where="a.toml:3: edges")),
            2,
            "a.toml:3: edges: edges must increase",
        ),
        (RunError(Problem("the fit failed", remedy="Merge bins.")), 1, "the fit failed. Merge bins."),
        (KeyboardInterrupt(), 1, "stopped on request"),
        (OSError(errno.ENOSPC, "No space left on device", "out/x"), 1, "out/x: no space left on device"),
        (PermissionError(errno.EACCES, "Permission denied", "out/x"), 1, "out/x: permission denied"),
        (MemoryError(), 1, "the memory is full"),
        (ZeroDivisionError("division by zero"), 1, "stopped by a fault of its own: ZeroDivisionError"),
    ],
)
def test_each_error_has_status_and_message(
    error: BaseException, status: int, words: str, capsys: pytest.CaptureFixture[str]
) -> None:
    assert exit_status(lambda: raising(error)) == status
    captured = capsys.readouterr()
    assert words in captured.err
    assert "Traceback" not in captured.err
    assert captured.out == ""


def test_every_problem_is_told(capsys: pytest.CaptureFixture[str]) -> None:
    exit_status(lambda: raising(InputError(Problem("first"), Problem("second"))))
    assert capsys.readouterr().err == "semitau: first\nsemitau: second\n"


def test_developers_see_the_traceback(monkeypatch: pytest.MonkeyPatch, capsys: pytest.CaptureFixture[str]) -> None:
    monkeypatch.setenv(DEVELOPER, "1")
    exit_status(lambda: raising(ZeroDivisionError("division by zero")))
    assert "Traceback" in capsys.readouterr().err


@pytest.mark.parametrize("stop", [signal.SIGINT, signal.SIGTERM])
def test_interrupted_writing_leaves_the_old_file(stop: signal.Signals, tmp_path: Path) -> None:
    target = tmp_path / "result.txt"
    target.write_text("old")
    code = f"""
import sys, time
from semitau.core.whole_files import whole_file
from semitau.study.error_boundary import exit_status
def work():
    with whole_file({str(target)!r}) as part:
        part.write_text("half")
        print("writing", flush=True)
        time.sleep(60)
sys.exit(exit_status(work))
"""
    process = subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "writing\n"
    time.sleep(0.05)
    process.send_signal(stop)
    _, error = process.communicate(timeout=20)
    assert process.returncode == 1
    assert "stopped on request" in error
    assert "Traceback" not in error
    assert target.read_text() == "old"
    assert os.listdir(tmp_path) == ["result.txt"]


def test_a_reader_that_goes_away_is_no_fault() -> None:
    code = """
import sys
from semitau.study.error_boundary import exit_status
sys.exit(exit_status(lambda: [print("line " * 20) for _ in range(20_000)]))
"""
    process = subprocess.Popen([sys.executable, "-c", code], stdout=subprocess.PIPE, stderr=subprocess.PIPE)
    assert process.stdout is not None
    assert process.stderr is not None
    process.stdout.readline()
    process.stdout.close()
    error = process.stderr.read()
    process.stderr.close()
    process.wait(timeout=20)
    assert error == b""
