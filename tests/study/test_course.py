"""Progress over all steps of a study: what is left follows from what is expected and from what was measured."""

from __future__ import annotations

import io
import re
from typing import Any

import pytest
from rich.console import Console
from semitau.study.graph.course import WHOLE, Course
from semitau.study.graph.features import FEATURES
from semitau.study.results import Results
from semitau.study.terminal.progress import bars, sparse_lines


class Watched:
    """A course with a clock set by hand, and the last report on the whole."""

    def __init__(self, steps: dict[str, float]) -> None:
        self.now = 0.0
        self.told: list[tuple[str, int, int | None]] = []
        self.course = Course(steps, lambda *words: self.told.append(words), lambda: self.now)

    @property
    def left(self) -> int:
        _, done, total = [words for words in self.told if words[0] == WHOLE][-1]
        assert total is not None
        return total - done


def test_what_is_expected_counts_until_something_is_known() -> None:
    watched = Watched({"templates": 60.0, "toys": 30.0, "pictures": 10.0})
    with watched.course.step("templates") as report:
        watched.now = 1.0
        assert report is not None
        report("templates", 0, 1000)
        assert watched.left == 100


def test_a_step_at_work_goes_by_its_own_pace() -> None:
    """A tenth after 20 s: 180 s more, whatever was expected, and what comes later."""
    watched = Watched({"templates": 60.0, "toys": 30.0})
    with watched.course.step("templates") as report:
        assert report is not None
        report("templates", 0, 1000)
        watched.now = 20.0
        report("templates", 100, 1000)
        assert watched.left == 180 + 30


def test_what_was_there_already_is_no_pace() -> None:
    """Half of it was stored: the tenth done since took 20 s, so the 400 left take 80 s."""
    watched = Watched({"templates": 60.0})
    with watched.course.step("templates") as report:
        assert report is not None
        report("templates", 500, 1000)
        watched.now = 20.0
        report("templates", 600, 1000)
        assert watched.left == 80


def test_each_phase_of_a_step_has_its_own_pace() -> None:
    watched = Watched({"bias": 60.0})
    with watched.course.step("bias") as report:
        assert report is not None
        report("alternatives", 0, 10)
        watched.now = 40.0
        report("alternatives", 10, 10)
        report("bias matrix", 0, 1000)
        watched.now = 50.0
        report("bias matrix", 100, 1000)
        assert watched.left == 90


def test_later_steps_are_scaled_by_how_those_before_have_gone() -> None:
    """(1 + 29) s expected, (1 + 59) s taken: everything else takes twice as long as expected."""
    watched = Watched({"templates": 29.0, "toys": 30.0, "pictures": 10.0})
    with watched.course.step("templates"):
        watched.now = 59.0
    with watched.course.step("toys") as report:
        assert report is not None
        watched.now = 60.0
        report("toys", 0, 10)
        assert watched.left == 80


def test_steps_that_nobody_foresaw_and_an_end() -> None:
    watched = Watched({})
    with watched.course.step("pictures"):
        watched.now = 3.0
    watched.course.end()
    assert watched.told[-1] == (WHOLE, 3, 3)


def test_every_feature_is_a_field_of_the_results_and_a_step_once() -> None:
    names = [feature.name for feature in FEATURES]
    assert len(set(names)) == len(names)
    assert set(names) <= set(Results.model_fields)


def test_nobody_listens() -> None:
    course = Course({"toys": 1.0}, None)
    with course.step("toys") as report:
        assert report is None
    course.end()


def test_an_error_goes_through() -> None:
    watched = Watched({"toys": 1.0})
    with pytest.raises(ValueError, match="x"), watched.course.step("toys"):
        raise ValueError("x")


def lines(tell: Any) -> list[str]:
    out, now = io.StringIO(), [0.0]
    with sparse_lines(Console(file=out, width=100), clock=lambda: now[0]) as report:
        tell(report, now)
    return out.getvalue().splitlines()


def test_lines_are_about_the_whole_study() -> None:
    def tell(report: Any, now: list[float]) -> None:
        for second in range(1, 26):
            now[0] = float(second)
            report("toys", second, 100)
            report(WHOLE, second, 100)
        report("toys", 100, 100)
        report(WHOLE, 26, 26)

    assert lines(tell) == [
        "whole study: 11 %, about 1 min 29 s left (now: toys)",
        "whole study: 21 %, about 1 min 19 s left (now: toys)",
        "toys: done in 24 s",
        "whole study: done in 24 s",
    ]


def test_the_bar_of_the_whole_study_tells_share_and_time() -> None:
    out = io.StringIO()
    with bars(Console(file=out, width=100, force_terminal=True)) as report:
        report(WHOLE, 30, 120)
    assert "25 %" in out.getvalue()
    assert "01:30" in out.getvalue()


BACK = ((30, 100), (76, 100), (73, 100), (50, 100), (80, 100))
"""Reports on the whole whose share falls, as when a step turns out slower than expected."""


def test_the_share_of_the_whole_study_never_falls_in_lines() -> None:
    def tell(report: Any, now: list[float]) -> None:
        report(WHOLE, 0, 100)
        for done, total in BACK:
            now[0] += 11.0
            report(WHOLE, done, total)

    assert [line.split(" left")[0].removeprefix("whole study: ") for line in lines(tell)] == [
        "30 %, about 1 min 10 s",
        "76 %, about 24 s",
        "76 %, about 27 s",
        "76 %, about 50 s",
        "80 %, about 20 s",
    ]


def test_the_share_of_the_whole_study_never_falls_in_the_bar() -> None:
    shown = []
    for end in range(1, len(BACK) + 1):
        out = io.StringIO()
        with bars(Console(file=out, width=100, force_terminal=True)) as report:
            for done, total in BACK[:end]:
                report(WHOLE, done, total)
        plain = re.sub(r"\x1b\[[0-9;?]*[A-Za-z]", "", out.getvalue())
        shown.append((re.findall(r"(\d+) %", plain)[-1], re.findall(r"left (\d\d:\d\d)", plain)[-1]))
    assert shown == [("30", "01:10"), ("76", "00:24"), ("76", "00:27"), ("76", "00:50"), ("80", "00:20")]
