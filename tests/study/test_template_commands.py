"""Commands on a template file from anybody: they say what the fit package says."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
import uproot
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.uncertainty.decomposition import budget
from semitau.study.command_line import main

Capture = pytest.CaptureFixture[str]


def document(arguments: list[str], capsys: Capture) -> Any:
    assert main([*arguments, "--json", "--quiet"]) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    return json.loads(captured.out)


def test_extract_is_the_fit(template_file: Path, templates: TemplateSet, capsys: Capture) -> None:
    model = Model(templates)
    fitted = maximise(model, model.data(templates))
    said = document(["extract", str(template_file)], capsys)
    assert said["data"]["kind"] == "file"
    for ratio in said["ratios"]:
        assert ratio["value"] == pytest.approx(fitted.value(ratio["name"]), rel=1e-9)
        assert ratio["error"] == pytest.approx(fitted.error(ratio["name"]), rel=1e-9)
    parameters = [parameter["name"] for parameter in said["fit"]["parameters"]]
    assert parameters == list(fitted.names)
    assert said["fit"]["correlation"][0][1] == pytest.approx(fitted.correlation(*parameters[:2]))


def test_expected_events_return_what_the_templates_were_made_with(template_file: Path, capsys: Capture) -> None:
    for ratio in document(["extract", str(template_file), "--expected"], capsys)["ratios"]:
        assert ratio["value"] == pytest.approx(ratio["injected"], rel=1e-6)


def test_held_parameters_and_exact_templates(template_file: Path, templates: TemplateSet, capsys: Capture) -> None:
    held = document(["extract", str(template_file), "--fix", "R_D=0.31", "--fix", "soft_pion=0"], capsys)
    assert [ratio["name"] for ratio in held["ratios"]] == ["R_Dst"]
    assert not {"R_D", "soft_pion"} & {parameter["name"] for parameter in held["fit"]["parameters"]}
    exact = document(["extract", str(template_file), "--exact-templates"], capsys)
    assert exact["ratios"][0]["template_statistics"] == 0


def test_budget_adds_up(template_file: Path, templates: TemplateSet, capsys: Capture) -> None:
    model = Model(templates)
    split = budget(model, maximise(model, model.data(templates)))
    said = document(["budget", str(template_file)], capsys)
    for part in said["budget"]:
        assert sum(row["error"] ** 2 for row in part["rows"]) == pytest.approx(part["total"] ** 2)
        assert {row["source"]: row["error"] for row in part["rows"]} == pytest.approx(dict(split[part["ratio"]].rows))
        assert said["parameters"][part["ratio"]] == pytest.approx(dict(split[part["ratio"]].sources))


def test_toys_are_the_same_for_any_number_of_workers(template_file: Path, tmp_path: Path, capsys: Capture) -> None:
    arguments = ["toys", str(template_file), "--number", "70", "--factors", "0.9,1.1", "--seed", "5"]
    one = document([*arguments, "--workers", "1"], capsys)
    two = document([*arguments, "--workers", "2", "--output", str(tmp_path / "toys.root")], capsys)
    assert one == two
    assert one["seed"] == 5
    assert [len(line["points"]) for line in one["linearity"]] == [2, 2]
    assert one["verdict"]["status"] == "undecided", "70 toys can exclude no small bias"
    with uproot.open(tmp_path / "toys.root") as file:
        assert file["toys"].num_entries == 70
        assert file["linearity"].num_entries == 140
    other = document([*arguments[:-1], "6"], capsys)
    assert other["toys"] != one["toys"]


@pytest.mark.parametrize("factors", ["1", "a,b", "0.9,,x"])
def test_senseless_factors(factors: str, template_file: Path, capsys: Capture) -> None:
    assert main(["toys", str(template_file), "--factors", factors]) == 2
    assert "--factors" in capsys.readouterr().err


def test_profile_crosses_one_at_its_interval(template_file: Path, tmp_path: Path, capsys: Capture) -> None:
    arguments = ["profile", str(template_file), "--points", "13", "--output", str(tmp_path)]
    said = document(arguments, capsys)
    for curve in said["curves"]:
        assert curve["low"] < curve["value"] < curve["high"]
        inside = [
            h < 1 for p, h in zip(curve["points"], curve["heights"], strict=True) if curve["low"] < p < curve["high"]
        ]
        assert all(inside)
        assert len(inside) >= 3
    assert said["region"]["parameters"] == ["R_D", "R_Dst"]
    # Two parameters at 39.3, 68.3, 95.4, 99.7 %: quantiles of χ² with two degrees of freedom, -2 ln(1 - p).
    assert sorted(said["region"]["levels"].values()) == pytest.approx([1.0, 2.2957, 6.1801, 11.829], abs=2e-3)
    assert {path.name for path in tmp_path.iterdir()} == {"likelihood.svg", "likelihood.png"}


def test_intervals_of_every_kind(template_file: Path, capsys: Capture) -> None:
    said = document(["interval", str(template_file), "--toys", "400", "--precision", "0.3"], capsys)
    for ratio in said["intervals"]:
        kinds = ratio["intervals"]
        assert set(kinds) == {"curvature", "likelihood", "likelihood_two", "toys", "corrected"}
        for kind, ends in kinds.items():
            assert ends["low"] < ratio["value"] < ends["high"], kind
            width = 2.0 if kind == "likelihood_two" else 1.0
            # Many events: all agree, within the toys' errors.
            slack = 0.15 if kind != "toys" else 0.15 + 4 * ends["low_error"] / ratio["error"]
            assert ends["high"] - ratio["value"] == pytest.approx(width * ratio["error"], rel=slack), kind
    assert main(["interval", str(template_file), "--toys", "20", "--precision", "0.001"]) == 2
    assert "too few toys for the asked precision" in capsys.readouterr().err


def test_counts_of_a_file_are_whole(template_file: Path, tmp_path: Path, capsys: Capture) -> None:
    from semitau.core.template_file import read_templates, write_templates

    templates = read_templates(template_file)
    half = {name: counts + 0.5 * (name == "D0_e") for name, counts in templates.data.items()}
    write_templates(templates.with_data(half), tmp_path / "half.root")
    assert main(["extract", str(tmp_path / "half.root")]) == 2
    said = capsys.readouterr().err
    assert "category D0_e, bin [0, 0] and" in said
    assert "the count is not whole" in said


def test_tables_are_for_people(template_file: Path, capsys: Capture) -> None:
    for command, word in (("extract", "Goodness of fit"), ("budget", "finite data"), ("profile", "made with")):
        assert main([command, str(template_file)]) == 0
        out = capsys.readouterr().out
        assert word in out
        assert "R(D*)" in out
        assert "\x1b" not in out, "colours in a pipe"
