"""`semitau average`: what it tells agrees with the fit package, and every mistake is told with its line."""

from __future__ import annotations

import json
import re
import tomllib
from collections.abc import Iterator
from pathlib import Path
from typing import Any, get_args

import numpy as np
import pytest
from pydantic import BaseModel
from semitau.core.errors import InputError
from semitau.fit.averages.combination import average
from semitau.fit.averages.compatibility import Prediction, tension
from semitau.fit.averages.measurements import Measured, Measurement
from semitau.study.averages.measurement_file import read_average
from semitau.study.averages.part import AverageResults
from semitau.study.averages.planned_errors import planned_errors
from semitau.study.averages.run import averaged
from semitau.study.averages.tables import AverageTables
from semitau.study.command_line import main
from semitau.study.results import Results, Toys

ROOT = Path(__file__).parents[2]
EXAMPLE = (ROOT / "configs" / "average.toml").read_text()
SMALL = """[average]
name = "Two"
output = "out"

[[source]]
name = "x"

[[measurement]]
name = "a"
R_D = { value = 0.35, statistical = 0.04, systematic = 0.03 }
R_Dst = { value = 0.28, statistical = 0.02, systematic = { up = 0.02, down = 0.01 } }
statistical_correlation = -0.4
systematic_correlation = 0.2
sources.x = { R_D = 0.01, R_Dst = 0.005 }

[[measurement]]
name = "b"
R_Dst = { value = 0.31, statistical = 0.03, systematic = 0.01 }
sources.x = { R_Dst = 0.008 }

[prediction]
R_D = { value = 0.299, error = 0.003 }
R_Dst = { value = 0.254, error = 0.005 }
"""
ONE_RATIO = re.sub(r"^R_D = .*\n", "", SMALL, flags=re.M).replace("R_D = 0.01, ", "")
BY_HAND = (
    Measurement(
        "a", {"R_D": Measured(0.35, 0.04, 0.03), "R_Dst": Measured(0.28, 0.02, (0.02, 0.01))}, -0.4, 0.2,
        {"x": {"R_D": 0.01, "R_Dst": 0.005}},
    ),
    Measurement("b", {"R_Dst": Measured(0.31, 0.03, 0.01)}, sources={"x": {"R_Dst": 0.008}}),
)  # fmt: skip


def write(folder: Path, text: str) -> Path:
    path = folder / "average.toml"
    path.write_text(text, encoding="utf-8")
    return path


def complaint(folder: Path, text: str) -> list[str]:
    with pytest.raises(InputError) as caught:
        read_average(write(folder, text))
    return [str(problem).replace(f"{folder}/", "") for problem in caught.value.problems]


def document(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> Any:
    assert main([*arguments, "--json", "--quiet"]) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    return json.loads(captured.out)


@pytest.mark.parametrize("form", ["linear", "likelihood"])
def test_it_tells_what_the_fit_package_finds(form: Any, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    text = SMALL.replace('output = "out"', f'output = "{tmp_path}/out"\nform = "{form}"')
    said = document(["average", str(write(tmp_path, text))], capsys)
    found = average(BY_HAND, {"x": 1.0}, form)
    assert said["form"] == form
    for k, ratio in enumerate(said["ratios"]):
        assert ratio["value"] == pytest.approx(found.value(ratio["name"]))
        assert (ratio["up"], ratio["down"]) == pytest.approx((found.up[k], found.down[k]))
        assert ratio["statistical"] ** 2 + ratio["systematic"] ** 2 == pytest.approx(ratio["error"] ** 2)
    assert said["correlation"] == pytest.approx(found.correlation[0, 1])
    assert [entry["weights"]["R_D"] for entry in said["inputs"]] == pytest.approx(found.weights[0].tolist())
    away = tension(found, Prediction({"R_D": (0.299, 0.003), "R_Dst": (0.254, 0.005)}))
    assert away is not None
    assert said["tension"]["sigmas"] == pytest.approx(away.sigmas)
    stored = json.loads((tmp_path / "out" / "average.json").read_text())
    assert stored == said
    assert AverageResults.model_validate(stored).text() == (tmp_path / "out" / "average.json").read_text()


def test_tables(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    assert main(["average", str(write(tmp_path, EXAMPLE)), "--output", str(tmp_path / "out")]) == 0
    text = re.sub(r"[\u00a0\s]+", " ", capsys.readouterr().out)
    assert "All measurements are invented." in text
    results = AverageResults.model_validate_json((tmp_path / "out" / "average.json").read_text())
    first = results.ratios[0]
    assert f"R(D) {first.value:.3f} ± {first.error:.3f}" in text
    assert results.tension is not None
    assert f"together by {results.tension.sigmas:.2f} σ" in text
    assert [case.found_at for case in results.planned] == ["average", "prediction"]
    assert f"at the average {results.planned[0].ratios[0].value:.3f}" in text
    assert sorted(path.name for path in (tmp_path / "out").iterdir()) == ["average.json", "average.png", "average.svg"]


def test_pictures_are_the_same_each_time(tmp_path: Path) -> None:
    for folder in ("one", "two"):
        assert main(["average", str(write(tmp_path, SMALL)), "--output", str(tmp_path / folder), "--quiet"]) == 0
    for name in ("average.svg", "average.png", "average.json"):
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "two" / name).read_bytes()


@pytest.mark.parametrize(
    "text",
    [
        SMALL[: SMALL.index("[prediction]")],
        ONE_RATIO,
        SMALL.replace("R_Dst = { value = 0.254, error = 0.005 }\n", ""),
        SMALL[: SMALL.index("sources.x", SMALL.index('"b"'))].replace('name = "a"\nR_D', 'name = "a"\nR_D'),
    ],
    ids=["no prediction", "one ratio", "one predicted ratio", "cut short"],
)
def test_less_than_everything(text: str, tmp_path: Path) -> None:
    assert main(["average", str(write(tmp_path, text)), "--output", str(tmp_path / "out"), "--quiet"]) == 0


# ── Planned measurements ────────────────────────────────────────────────────────────────────────────────────────────


def test_planned_by_a_study(results: Results, tmp_path: Path) -> None:
    """Total errors and correlation are those of the study, scaled to the mean error of the toys; no value is used."""
    path = tmp_path / "results.json"
    path.write_text(results.text())
    found = planned_errors(path)
    alone = average([found])
    names = [parameter.name for parameter in results.fit.parameters]
    expected = results.fit.correlation[names.index("R_D")][names.index("R_Dst")]
    assert alone.correlation[0, 1] == pytest.approx(expected)
    assert results.toys is not None
    for ratio, toys in zip(results.ratios, results.toys.ratios, strict=True):
        assert alone.error(ratio.name) == pytest.approx(toys.mean_error)
        assert alone.value(ratio.name) == 0.0
        assert ratio.systematic is not None
        assert np.sqrt(alone.systematic[alone.ratios.index(ratio.name)] @ (np.array(alone.ratios) == ratio.name)) == (
            pytest.approx(ratio.systematic * toys.mean_error / ratio.error)
        )
    without: Toys | None = None
    path.write_text(results.model_copy(update={"toys": without}).text())
    assert average([planned_errors(path)]).error("R_D") == pytest.approx(results.ratios[0].error)


def test_what_if(results: Results, tmp_path: Path) -> None:
    (tmp_path / "results.json").write_text(results.text())
    given = read_average(write(tmp_path, SMALL + '[[planned]]\nname = "p"\nresults = "results.json"\n'))
    found = averaged(given).results
    at_average, at_prediction = found.planned
    assert (at_average.found_at, at_prediction.found_at) == ("average", "prediction")
    for before, after in zip(found.ratios, at_average.ratios, strict=True):
        assert after.value == pytest.approx(before.value, abs=0.2 * before.error)
        assert after.error < before.error
    assert found.tension is not None
    assert at_average.tension is not None
    assert at_prediction.tension is not None
    assert at_average.tension.sigmas > found.tension.sigmas > at_prediction.tension.sigmas


# ── Bad input ───────────────────────────────────────────────────────────────────────────────────────────────────────

PLANNED = '\n[[planned]]\nname = "p"\n'
MISTAKES = {
    "unknown key": (
        SMALL.replace("sources.x", "surces.x"),
        r"average.toml:14: measurement\[a\]\.surces: unknown key.*sources",
    ),
    "unknown table": (SMALL + "[predictions]\n", r"average.toml:\d+: predictions: unknown key.*prediction"),
    "no measurement": (SMALL[: SMALL.index("[[measurement]]")], "lacks the key measurement"),
    "without errors": (
        SMALL.replace(", statistical = 0.03, systematic = 0.01", ""),
        r"average.toml:18: measurement\[b\]\.R_Dst: has no error. Give its statistical",
    ),
    "negative error": (
        SMALL.replace("= 0.04,", "= -0.04,"),
        r"average.toml:10: measurement\[a\]\.R_D\.statistical: must be a st",
    ),
    "error as text": (
        SMALL.replace("= 0.04,", '= "4 %",'),
        r":10: measurement\[a\]\.R_D\.statistical: must be a number or a t",
    ),
    "one side": (
        SMALL.replace("{ up = 0.02, down = 0.01 }", "{ up = 0.02 }"),
        r":11: .*R_Dst\.systematic: lacks the key down",
    ),
    "no value": (SMALL.replace("value = 0.35, ", ""), r":10: measurement\[a\]\.R_D: lacks the key value"),
    "correlation": (SMALL.replace("= -0.4", "= -1.4"), r":12: .*statistical_correlation: must not be below -1"),
    "unknown form": (
        SMALL.replace('"out"', '"out"\nform = "linar"'),
        r':4: average.form: is not known here.*Did you mean "linear"',
    ),
    "source not listed": (
        SMALL.replace("sources.x = { R_Dst", "sources.y = { R_Dst"),
        r":19: .*sources\.y: is no listed source",
    ),
    "source too large": (
        SMALL.replace("R_Dst = 0.008", "R_Dst = 0.08"),
        r":19: .*sources: exceed the systematic error of R_Dst",
    ),
    "source of another ratio": (
        SMALL.replace("{ R_Dst = 0.008 }", "{ R_D = 0.008 }"),
        r":19: .*R_D: is not measured here",
    ),
    "impossible signs": (
        SMALL.replace("R_D = 0.01,", "R_D = -0.029,").replace("R_Dst = 0.005", "R_Dst = 0.014"),
        r":14: .*impossible correlation",
    ),
    "same name": (SMALL.replace('name = "b"', 'name = "a"'), r":17: .*name: is the name of another measurement"),
    "same source": (
        SMALL.replace("[[source]]", '[[source]]\nname = "x"\n[[source]]'),
        r"name: is the name of another source",
    ),
    "not positive definite": (
        ONE_RATIO.replace("statistical = 0.03, systematic = 0.01", "systematic = 0.008").replace(
            "statistical = 0.02, systematic = { up = 0.02, down = 0.01 }", "systematic = 0.005"
        ),
        r"not positive definite, foremost those of R_Dst of a and R_Dst of b \(got correlation 1.000",
    ),
    "prediction": (SMALL.replace("error = 0.003", "error = -0.003"), r":22: prediction.R_D.error: must not be below 0"),
    "planned without errors": (
        SMALL + PLANNED,
        r"planned\[p\]: has no errors \(allowed either results, or R_D and R_Dst",
    ),
    "planned twice": (
        SMALL + PLANNED + 'results = "r.json"\nR_D = { statistical = 0.1 }\n',
        "has errors from a study and its own",
    ),
    "planned by no study": (
        SMALL + PLANNED + 'results = "r.json"\n',
        r":27: planned\[p\]\.results: .*r.json: there is no such file",
    ),
    "planned beside a study": (
        SMALL + PLANNED + 'results = "r.json"\nstatistical_correlation = 0.1\n',
        "has correlations beside those of the study",
    ),
    "planned with no error": (SMALL + PLANNED + "R_D = {}\n", r":27: planned\[p\]\.R_D: has no error"),
    "planned nowhere": (
        ONE_RATIO + PLANNED + "R_D = { statistical = 0.1 }\n",
        r"planned\[p\]: has no value to be assumed for R_D. Add a prediction",
    ),
    "no TOML": (SMALL.replace("[average]", "[average"), r"average.toml:1:9: is no TOML"),
}


@pytest.mark.parametrize("case", MISTAKES)
def test_mistakes(case: str, tmp_path: Path) -> None:
    text, words = MISTAKES[case]
    told = complaint(tmp_path, text)
    assert re.search(words, "\n".join(told)), told


def test_all_problems_are_told_at_once(tmp_path: Path) -> None:
    text = (
        SMALL.replace("= -0.4", "= -1.4").replace("R_Dst = 0.008", "R_Dst = 0.08").replace("error = 0.003", "eror = 1")
    )
    places = [problem.split(" ")[0] for problem in complaint(tmp_path, text)]
    assert places == ["average.toml:12:", "average.toml:19:", "average.toml:22:"]


def test_nothing_is_written_for_bad_input(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    path = write(tmp_path, SMALL.replace("= -0.4", "= -1.4"))
    assert main(["average", str(path), "--output", str(tmp_path / "out")]) == 2
    assert "Traceback" not in capsys.readouterr().err
    assert not (tmp_path / "out").exists()
    assert main(["average", str(tmp_path / "nothing.toml")]) == 2
    assert "there is no such file" in capsys.readouterr().err
    (tmp_path / "file").write_text("")
    assert main(["average", str(write(tmp_path, SMALL)), "--output", str(tmp_path / "file")]) == 1
    assert "file" in capsys.readouterr().err


# ── Docs ────────────────────────────────────────────────────────────────────────────────────────────────────────────


def models(model: type[BaseModel]) -> Iterator[type[BaseModel]]:
    yield model
    for info in model.model_fields.values():
        for part in (info.annotation, *get_args(info.annotation)):
            if isinstance(part, type) and issubclass(part, BaseModel):
                yield from models(part)


@pytest.mark.parametrize("top", [AverageTables, AverageResults])
def test_docs_know_every_key(top: type[BaseModel]) -> None:
    text = (ROOT / "docs" / "average.md").read_text()
    for model in models(top):
        for name, info in model.model_fields.items():
            assert f"`{info.alias or name}`" in text, f"{model.__name__}.{name}"


def test_the_example_of_the_docs_is_sound(tmp_path: Path) -> None:
    text = (ROOT / "docs" / "average.md").read_text()
    block = text.split("```toml\n")[1].split("```")[0]
    assert tomllib.loads(block)["measurement"]
    averaged(read_average(write(tmp_path, block)))
