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
from semitau.study.reach.axis import chosen_axis
from semitau.study.reach.part import Reach

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
    assert Reach.model_validate(said).unit == "times the data"
    for told, amount in zip(said["amounts"], found.amounts, strict=True):
        assert told["factor"] == amount.factor
        for error in told["errors"]:
            split = amount.budgets[error["ratio"]]
            assert error["total"] == pytest.approx(split.total)
            assert error["statistical"] == pytest.approx(split.rows["statistical"])
            assert error["template_statistics"] == pytest.approx(split.rows["template statistics"])
            assert error["systematic"] == pytest.approx(split.systematic)
            assert sorted(error["sources"].values()) == pytest.approx(sorted(split.rows.values()))
        for deviation in told["deviations"]:
            seen = amount.deviations[deviation["name"]]
            assert deviation["sigmas"] == pytest.approx(seen.sigmas)
            assert deviation["evidence"] == pytest.approx(seen.chance(3.0))
            assert deviation["discovery"] == pytest.approx(seen.chance(5.0))
    for told in said["needed"]:
        assert [told["evidence"], told["discovery"]] == list(found.needed[told["name"]].values())
    for told in said["walls"]:
        assert told["factor"] == found.walls[told["ratio"]][0]
    assert [part["name"] for part in said["needed"]] == ["R_D", "R_Dst", "together"]
    assert [(part["true"], part["value"], part["error"]) for part in said["ratios"]] == [
        (0.34, 0.298, 0.004), (pytest.approx(found.amounts[0].budgets["R_Dst"].value), 0.24, 0.0),
    ]  # fmt: skip
    assert sorted(path.name for path in tmp_path.iterdir()) == ["reach.png", "reach.svg"]


def test_words(template_file: Path, capsys: Capture) -> None:
    assert main(["reach", str(template_file), *AGAINST, "--pairs", "7e8", "--factors", "0.01,0.1,1,10,1000"]) == 0
    text = capsys.readouterr().out
    assert re.search(r"R\(D\): .*(limited by|from) ", text)
    assert re.search(r"R\(D\) and R\(D\*\) together: 3\s*σ (with|not even)", text)
    assert "7\u00a0×\u00a010⁶" in text
    assert "7\u00a0×\u00a010¹¹" in text
    assert main(["reach", str(template_file)]) == 0
    text = capsys.readouterr().out
    assert "×0.1" in text
    assert "σ" not in text


def test_pairs_come_from_the_study(templates: TemplateSet) -> None:
    assert chosen_axis(templates, None, None).told(10.0) == "10 times the data"
    assert chosen_axis(templates, 5e6, None).told(10.0) == "5\u00a0×\u00a010⁷ B pairs (×10)"
    study = TemplateSet(
        templates.categories, templates.components, templates.parameters, templates.nuisances, templates.templates,
        provenance={"study": "[experiment]\nb_pairs = 700e6\n"},
    )  # fmt: skip
    assert chosen_axis(study, None, None).of(2.0) == 1400e6
    assert chosen_axis(study, 1e6, None).of(2.0) == 2e6
    assert chosen_axis(study, None, 711.0).told(10.0) == "7110 fb⁻¹ (×10)"
    assert chosen_axis(study, None, 711.0).shown(0.01) == "7.11"


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
        (["--luminosity", "0"], "--luminosity"),
        (["--pairs", "7e8", "--luminosity", "711"], "--luminosity: pairs and luminosity are two axes"),
        (["--true", "R_D=-0.3"], "--true: must be positive (got R_D=-0.3)"),
    ],
)
def test_bad_input(arguments: list[str], words: str, template_file: Path, capsys: Capture) -> None:
    assert main(["reach", str(template_file), *arguments]) == 2
    error = capsys.readouterr().err
    assert words in error
    assert "Traceback" not in error


def test_generated_events_grow(template_file: Path, capsys: Capture) -> None:
    told = {}
    for growing in ([], ["--growing"]):
        assert main(["reach", str(template_file), "--factors", "1,100", "--json", "--quiet", *growing]) == 0
        told[bool(growing)] = json.loads(capsys.readouterr().out)
    assert told[True]["generated"] == "grows"
    first, last = ([amount["errors"][0] for amount in told[g]["amounts"]] for g in (False, True))
    assert first[0] == last[0]
    assert last[1]["template_statistics"] < 0.5 * first[1]["template_statistics"]


def test_missing_templates(tmp_path: Path, capsys: Capture) -> None:
    assert main(["reach", str(tmp_path / "none.root")]) == 2
    assert "no such file" in capsys.readouterr().err
