"""Commands with --at and --free: they say what the fit package says, and give nothing away."""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import pytest
from semitau.core.quadratic import templates_at
from semitau.core.template_file import write_templates
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.study.command_line import main
from semitau.study.parts.coefficient_fits import refuse_hidden
from semitau.study.parts.reweighting_parts import reweighting_line, reweighting_parts, reweighting_warnings

from ..core.weighted_events import World

Capture = pytest.CaptureFixture[str]


def world() -> TemplateSet:
    return World(events=4000).template_set()


@pytest.fixture(scope="module")
def file(tmp_path_factory: pytest.TempPathFactory) -> Path:
    path = tmp_path_factory.mktemp("quadratic") / "t.root"
    write_templates(world(), path)
    return path


def document(arguments: list[str], capsys: Capture) -> Any:
    assert main([*arguments, "--json", "--quiet"]) == 0
    return json.loads(capsys.readouterr().out)


def test_at_a_point(file: Path, capsys: Capture) -> None:
    """The ratio that goes with the point is injected, and comes back from the expected events."""
    (ratio,) = document(["extract", str(file), "--expected", "--at", "SR=0.4", "--at", "T=-0.1"], capsys)["ratios"]
    moved = templates_at(world(), {"SR": 0.4, "T": -0.1})
    assert ratio["injected"] == pytest.approx(moved.parameters[0].injected, rel=1e-12)
    assert ratio["value"] == pytest.approx(ratio["injected"], rel=1e-8)
    model = Model(moved)
    assert ratio["error"] == pytest.approx(maximise(model, model.expected_data()).error("R_D"), rel=1e-8)


def test_a_free_coefficient(file: Path, capsys: Capture) -> None:
    """Expected events of a point: the coefficient and the ratio that follows it come back."""
    said = document(["extract", str(file), "--expected", "--at", "SR=0.4", "--free", "SR"], capsys)
    found = {ratio["name"]: ratio for ratio in said["ratios"]}
    assert found["SR"]["value"] == pytest.approx(0.4, abs=1e-6)
    injected = templates_at(world(), {"SR": 0.4}).parameters[0].injected
    assert found["R_D"]["value"] == pytest.approx(injected, rel=1e-6)
    assert found["R_D"]["error"] > 0
    assert main(["extract", str(file), "--expected", "--free", "SR", "--quiet"]) == 0


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        (["--at", "SL=0.1"], "the templates are no functions of this coefficient (allowed SR, T)"),
        (["--at", "SR=9"], "coefficient SR: not a value for this coefficient (got 9.0, allowed ±4 at most)"),
        (["--at", "SR"], "--at: not a parameter and its value (got 'SR'"),
        (["--at", "SR=x"], "--at: not a parameter and its value (got 'SR=x'"),
        (["--free", "SL"], "the templates are no functions of this coefficient (allowed SR, T)"),
        (["--free", "T", "--likelihood", "exact"], "no coefficients can be fitted with a factor"),
    ],
)
def test_senseless_options(file: Path, arguments: list[str], message: str, capsys: Capture) -> None:
    assert main(["extract", str(file), *arguments]) == 2
    assert message in " ".join(capsys.readouterr().err.split())


def test_no_linearity_of_ratios_that_follow(file: Path, capsys: Capture) -> None:
    assert main(["toys", str(file), "--free", "SR", "--number", "2", "--factors", "0.8,1.2"]) == 2
    assert "ratios that follow coefficients have no multiples" in " ".join(capsys.readouterr().err.split())


def test_hidden_ratios_are_not_given_away() -> None:
    with pytest.raises(Exception, match="the coefficients would give hidden ratios away"):
        refuse_hidden(Model(world(), coefficients=("SR",)), object())
    refuse_hidden(Model(world()), object())
    refuse_hidden(Model(world(), coefficients=("SR",)), None)


def test_effective_events_are_reported() -> None:
    """Σw and Σw² of every event at half the limits of both coefficients."""
    made = World(events=4000)
    parts = {part.source: part for part in reweighting_parts((), made.template_set())}
    for source, points in (("SR", [(2.0, -0.05), (-2.0, -0.05)]), ("T", [(0.1, 0.5), (0.1, -0.5)])):
        shares = [made.weights(point).sum() ** 2 / (made.weights(point) ** 2).sum() / 4000 for point in points]
        assert parts[source].share == pytest.approx(min(shares), rel=1e-9)
    assert list(reweighting_warnings(tuple(parts.values()))) == []
    assert "Fewest effective events" in str(reweighting_line(tuple(parts.values())))
    made = World((0.0, 0.0), events=4000)
    made.parts[2, 0] = 3000.0
    told = list(reweighting_warnings(reweighting_parts((), made.template_set())))
    assert any("has the weight of" in line and "generate more events" in line for line in told)
