"""What options and study files say of the fit's parameters is what the model does."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from semitau.core.errors import InputError
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.likelihood.constraints import Correlated, Uniform
from semitau.gen.study_file.reader import read_study
from semitau.study.command_line import main
from semitau.study.run.study_model import study_model
from semitau.study.terminal.fit_choices import FitChoices

Capture = pytest.CaptureFixture[str]
SMALL = Path(__file__).parents[2] / "configs" / "marlow_small.toml"


def test_options_make_the_model(templates: TemplateSet) -> None:
    first, second = [p.name for p in templates.parameters if p.kind == "yield"][:2]
    model = FitChoices(
        fix=("soft_pion=0.5",),
        likelihood="exact",
        constrain=(f"{first}=log-normal:0.1", "R_D=uniform:0:2"),
        bound=("R_Dst=0:",),
        follow=(f"{second}=1.1 * {first}",),
    ).model(templates)
    assert model.likelihood == "exact"
    by_name = {parameter.name: parameter for parameter in model.parameters}
    assert by_name["soft_pion"].fixed == 0.5
    assert (by_name[first].law, by_name[first].constraint) == ("log-normal", 0.1)
    assert by_name["R_D"].bounds == (0.0, 2.0)
    assert by_name["R_Dst"].bounds == (0.0, float("inf"))
    assert by_name[second].function == f"1.1 * {first}"
    assert model.injected[model.index(second)] == pytest.approx(1.1)
    parts = FitChoices(apart=("soft_pion",)).model(templates)
    assert {"soft_pion_shape", "soft_pion_rate"} <= set(parts.names)


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--constrain", "R_D=normal:0.1"], "not a constraint"),
        (["--constrain", "R_D=gaussian:x"], "not a number"),
        (["--constrain", "R_D"], "not a parameter and its value"),
        (["--bound", "R_D=1"], "not a range"),
        (["--bound", "R_D=0.5:0.1"], "lower end must be below"),
        (["--follow", "R_Dst=R_D +"], "not a formula"),
        (["--follow", "R_Dst=R_K"], "no such parameter"),
        (["--apart", "R_K"], "no such nuisance"),
        (["--mirror", "soft_pion=up"], "no side of a variation"),
        (["--likelihood", "heavy"], "'heavy' is not one of"),
    ],
)
def test_bad_options(template_file: Path, capsys: Capture, arguments: list[str], message: str) -> None:
    assert main(["extract", str(template_file), *arguments]) == 2
    error = capsys.readouterr().err
    assert message in " ".join(error.split())
    assert "Traceback" not in error


def test_tied_ratio_on_the_command_line(template_file: Path, capsys: Capture) -> None:
    assert main(["extract", str(template_file), "--follow", "R_Dst=0.85 * R_D", "--json", "--quiet"]) == 0
    said: Any = json.loads(capsys.readouterr().out)
    values = {ratio["name"]: ratio for ratio in said["ratios"]}
    assert values["R_Dst"]["value"] == pytest.approx(0.85 * values["R_D"]["value"])
    assert values["R_Dst"]["error"] == pytest.approx(0.85 * values["R_D"]["error"])


def study_with(tmp_path: Path, text: str) -> Path:
    path = tmp_path / "study.toml"
    whole = SMALL.read_text(encoding="utf-8")
    path.write_text(whole + "\n" + text, encoding="utf-8")
    return path


FIT = """
[fit.constraints]
R_D = { uniform = [0.0, 2.0] }
tag_resolution = "free"
[fit.bounds]
R_Dst = { min = 0.1 }
"""


def test_study_file_makes_the_model(templates: TemplateSet, tmp_path: Path) -> None:
    first, second, *_ = [p.name for p in templates.parameters if p.kind == "yield"]
    text = FIT + (
        f'[fit.functions]\n{second} = "1.1 * {first}"\n'
        f"[fit.fixed]\n{first} = 1.05\n"
    )  # fmt: skip
    study = read_study(study_with(tmp_path, text))
    model = study_model(study, templates)
    same = Model(
        templates,
        constraints={"R_D": Uniform(0.0, 2.0), "tag_resolution": None},
        bounds={"R_Dst": (0.1, None)},
        functions={second: f"1.1 * {first}"},
        fixed={first: 1.05},
    )
    assert model.parameters == same.parameters


def test_correlated_block_of_a_study_file(templates: TemplateSet, tmp_path: Path) -> None:
    first, *_ = [p.name for p in templates.parameters if p.kind == "yield"]
    block = (
        f'[[fit.correlated]]\nparameters = ["{first}", "tag_resolution"]\nerrors = [0.1, 1.0]\n'
        "correlations = [[1.0, 0.5], [0.5, 1.0]]\n"
    )
    model = study_model(read_study(study_with(tmp_path, block)), templates)
    same = Model(templates, correlated=[Correlated((first, "tag_resolution"), [[0.01, 0.05], [0.05, 1.0]])])
    assert model.parameters == same.parameters
    assert model.precision(model.injected) == pytest.approx(same.precision(same.injected))


@pytest.mark.parametrize(
    ("text", "message"),
    [
        ("[fit.constraints]\nR_D = { gaussian = -0.1 }", "fit.constraints.R_D"),
        ('[fit.constraints]\nR_D = "fre"', "is no constraint"),
        ("[fit.constraints]\nR_D = { gaussian = 0.1, log_normal = 0.1 }", "is no constraint"),
        ("[fit.constraints]\nR_D = { uniform = [1.0, 0.0] }", "must increase"),
        ("[fit.bounds]\nR_D = { min = 1.0, max = 0.0 }", "wrong order"),
        ("[fit.bounds]\nR_D = {}", "bounds nothing"),
        ('[[fit.correlated]]\nparameters = ["a", "b"]\nerrors = [1.0]\ncorrelations = [[1.0]]', "as many errors"),
        (
            '[[fit.correlated]]\nparameters = ["a", "b"]\nerrors = [1.0, 1.0]\ncorrelations = [[1.0, 2.0], [2.0, 1.0]]',
            "no matrix of correlations",
        ),
    ],
)
def test_bad_study_files(tmp_path: Path, text: str, message: str) -> None:
    with pytest.raises(InputError) as caught:
        read_study(study_with(tmp_path, text))
    assert any(message in str(problem) for problem in caught.value.problems)


def test_names_that_no_parameter_has(tmp_path: Path) -> None:
    with pytest.raises(InputError, match="names no parameter of the fit"):
        read_study(study_with(tmp_path, '[fit.functions]\nR_K = "R_D"\n'))
