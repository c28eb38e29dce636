"""`semitau reach`: it says what the fit package finds, in words and numbers, and refuses what makes no sense."""

from __future__ import annotations

import json
import re
from pathlib import Path
from typing import Any

import pytest
from semitau.core.template_file import read_templates
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.uncertainty.prospects import reach
from semitau.study.command_line import main
from semitau.study.parts.reach_parts import axis_of

Capture = pytest.CaptureFixture[str]
AGAINST = ["--true", "R_D=0.34", "--against", "R_D=0.298:0.004", "--against", "R_Dst=0.24"]


def test_it_tells_what_the_fit_package_finds(template_file: Path, capsys: Capture, tmp_path: Path) -> None:
    arguments = ["reach", str(template_file), *AGAINST, "--factors", "0.5,2,50", "--fix", "soft_pion=0"]
    assert main([*arguments, "--json", "--quiet", "--output", str(tmp_path)]) == 0
    said: Any = json.loads(capsys.readouterr().out)
    found = reach(
        read_templates(template_file), [0.5, 2.0, 50.0], true={"R_D": 0.34},
        against={"R_D": (0.298, 0.004), "R_Dst": (0.24, 0.0)}, make=lambda t: Model(t, fixed={"soft_pion": 0.0}),
    )  # fmt: skip
    for told, amount in zip(said["amounts"], found.amounts, strict=True):
        assert told["factor"] == amount.factor
        for name, split in amount.budgets.items():
            assert told["errors"][name]["total"] == pytest.approx(split.total)
            assert told["errors"][name]["rows"] == pytest.approx(dict(split.rows))
        for name, seen in amount.deviations.items():
            assert told["deviations"][name]["sigmas"] == pytest.approx(seen.sigmas)
            assert told["deviations"][name]["chances"]["3"] == pytest.approx(seen.chance(3.0))
    assert set(said["needed"]) == {"R_D", "R_Dst", "together"}
    assert sorted(path.name for path in tmp_path.iterdir()) == ["reach.png", "reach.svg"]


def test_words(template_file: Path, capsys: Capture) -> None:
    assert main(["reach", str(template_file), *AGAINST, "--pairs", "7e8", "--factors", "0.01,0.1,1,10,1000"]) == 0
    text = capsys.readouterr().out
    assert re.search(r"R\(D\): .*(limited by|from) ", text)
    assert re.search(r"R\(D\) and R\(D\*\) together: 3\s*σ (with|not even)", text)
    assert "7e6" in text
    assert "7e11" in text
    assert main(["reach", str(template_file)]) == 0
    text = capsys.readouterr().out
    assert "×0.1" in text
    assert "σ" not in text


def test_pairs_come_from_the_study(templates: TemplateSet) -> None:
    assert axis_of(templates, None).pairs is None
    assert axis_of(templates, 5e6).told(10.0) == "5e7 B pairs (×10)"
    study = TemplateSet(
        templates.categories, templates.components, templates.parameters, templates.nuisances, templates.templates,
        provenance={"study": "[experiment]\nb_pairs = 700e6\n"},
    )  # fmt: skip
    assert axis_of(study, None).pairs == 700e6
    assert axis_of(study, 1e6).pairs == 1e6


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        (["--true", "R_D"], "--true: not a ratio and its value (got 'R_D', allowed NAME=VALUE"),
        (["--true", "R_D=0.3:0.1"], "--true: not a ratio"),
        (["--against", "R_D=nan"], "--against: not a ratio"),
        (["--against", "R_D=0.3:-0.1"], "--against: not a ratio"),
        (["--against", "R_X=0.3"], "is no fitted ratio (got R_X, allowed R_D, R_Dst)"),
        (["--against", "R_D=0.3", "--fix", "R_D=0.3"], "is no fitted ratio (got R_D, allowed R_Dst)"),
        (["--factors", "1"], "--factors: not a list"),
        (["--factors", ""], "at least two"),
        (["--factors", "0,1"], "must be positive"),
        (["--factors", "-1,1"], "must be positive"),
        (["--factors", "1,nan"], "must be positive"),
        (["--pairs", "0"], "--pairs"),
    ],
)
def test_bad_input(arguments: list[str], words: str, template_file: Path, capsys: Capture) -> None:
    assert main(["reach", str(template_file), *arguments]) == 2
    error = capsys.readouterr().err
    assert words in error
    assert "Traceback" not in error


def test_missing_templates(tmp_path: Path, capsys: Capture) -> None:
    assert main(["reach", str(tmp_path / "none.root")]) == 2
    assert "no such file" in capsys.readouterr().err
