"""A whole study: what it makes, what it takes as it is, and what it makes again."""

from __future__ import annotations

import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import uproot
from semitau.core.template_file import read_templates
from semitau.study.command_line import main
from semitau.study.results import Results, read_results
from semitau.study.run import study_run
from semitau.study.run.opening import open_study
from semitau.study.run.study_folder import named_files, study_key

WriteStudy = Callable[..., Path]


@pytest.fixture
def no_pictures(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(study_run, "draw_pictures", lambda results, folder, report, again: ())


def without_timing(results: Results) -> dict[str, Any]:
    return results.model_dump(exclude={"timing"})


def test_everything_is_there(finished: Path) -> None:
    names = {path.name for path in finished.iterdir()}
    assert names == {"study.toml", "templates.root", "results.json", "toys.root", "pictures", "report.html", "store"}
    drawn = {kind: {path.stem for path in (finished / "pictures").glob(f"*.{kind}")} for kind in ("png", "svg")}
    assert drawn["png"] == drawn["svg"]
    assert {"budget", "nuisances", "toy_pulls", "linearity", "correlations", "reach"} <= drawn["svg"]
    assert {"design_cuts", "design_binnings", "design_axes"} <= drawn["svg"]
    assert sum(name.startswith(("signal_", "projection_")) for name in drawn["svg"]) == 16
    results = read_results(finished / "results.json")
    assert [ratio.name for ratio in results.ratios] == ["R_D", "R_Dst"]
    assert results.fit.valid
    assert {step.name for step in results.cut_flow[0].steps} >= {"candidate", "inside the axes"}
    assert results.study.text == (finished / "study.toml").read_text()


def test_numbers_agree_with_each_other(finished: Path) -> None:
    results = read_results(finished / "results.json")
    for ratio, budget in zip(results.ratios, results.budget, strict=True):
        assert ratio.pull == pytest.approx((ratio.value - ratio.injected) / ratio.error)
        parts = (ratio.statistical or 0, ratio.template_statistics or 0, ratio.systematic or 0)
        assert sum(part**2 for part in parts) == pytest.approx(ratio.error**2, rel=1e-6)
        assert sum(row.error**2 for row in budget.rows) == pytest.approx(budget.total**2, rel=1e-6)
    matrix = np.array(results.fit.correlation)
    assert matrix == pytest.approx(matrix.T)
    assert np.linalg.eigvalsh(matrix).min() > 0
    total = sum(sum(p.data) for p in results.projections if p.observable == "el" and not p.region)
    assert total == results.data.events
    selected = sum(part.steps[-1].events for part in results.cut_flow)
    assert sum(part.purity for part in results.cut_flow) == pytest.approx(1)
    templates = read_templates(finished / "templates.root")
    expected = sum(template.nominal.sum() for template in templates.templates.values())
    assert selected == pytest.approx(expected, rel=1e-9)


def test_projections_of_one_category_hold_the_same_events(finished: Path) -> None:
    results = read_results(finished / "results.json")
    for category in results.categories:
        for enhanced in (False, True):
            shown = [p for p in results.projections if p.category == category.name and bool(p.region) == enhanced]
            assert len({sum(p.data) for p in shown}) == 1
            fitted = [sum(sum(c.counts) for c in p.components) for p in shown]
            assert fitted[0] == pytest.approx(fitted[1])


def test_toys_are_stored_one_by_one(finished: Path) -> None:
    results = read_results(finished / "results.json")
    with uproot.open(finished / "toys.root") as file:
        toys, linearity = file["toys"].arrays(library="np"), file["linearity"].arrays(library="np")
    assert results.toys is not None
    good = toys["status"] == 0
    assert len(good) == results.toys.number
    assert (~good).sum() == results.toys.failures
    pulls = ((toys["R_D"] - toys["R_D_injected"]) / toys["R_D_error"])[good]
    assert pulls.mean() == pytest.approx(results.toys.ratios[0].pull_mean)
    assert pulls.std(ddof=1) == pytest.approx(results.toys.ratios[0].pull_width)
    assert sorted(set(linearity["factor"])) == [0.8, 1.0, 1.2, 1.4]
    assert set(linearity["R_D_injected"] / linearity["factor"]).pop() == pytest.approx(results.ratios[0].injected)


@pytest.mark.usefixtures("no_pictures")
def test_same_study_same_results_whatever_the_workers(mini: WriteStudy, finished: Path) -> None:
    """`finished` was made with two workers: one gives the same to the last bit."""
    run = study_run.run_study(mini(), workers=1)
    assert not run.reused
    assert without_timing(run.results) == without_timing(read_results(finished / "results.json"))


@pytest.mark.usefixtures("no_pictures")
def test_what_is_there_is_taken_as_it_is(mini: WriteStudy, finished: Path, capsys: pytest.CaptureFixture[str]) -> None:
    study = mini()
    shutil.copytree(finished, "out")
    before = {path: path.stat().st_mtime_ns for path in Path("out").rglob("*")}
    assert main(["study", str(study)]) == 0
    assert "are in out already" in capsys.readouterr().out
    assert {path: path.stat().st_mtime_ns for path in Path("out").rglob("*")} == before


@pytest.mark.usefixtures("no_pictures")
@pytest.mark.parametrize("damaged", ["results.json", "templates.root"])
def test_what_was_cut_short_is_made_again(damaged: str, mini: WriteStudy, finished: Path) -> None:
    study = mini()
    shutil.copytree(finished, "out")
    for name in {damaged, "results.json"}:
        file = Path("out", name)
        file.write_bytes(file.read_bytes()[: file.stat().st_size // 2])
    run = study_run.run_study(study)
    assert not run.reused
    assert {stage.stage for stage in run.results.timing.stages if stage.reused} >= {"templates", "toys", "linearity"}
    assert without_timing(run.results) == without_timing(read_results(finished / "results.json"))
    assert read_templates(Path("out/templates.root")).provenance["cut_flow"]


@pytest.mark.usefixtures("no_pictures")
def test_a_changed_study_makes_its_folder_anew(mini: WriteStudy, finished: Path) -> None:
    shutil.copytree(finished, Path(mini().parent, "out"))
    run = study_run.run_study(mini({"e_res = { max = 0.8 }": "e_res = { max = 0.7 }"}))
    assert not run.reused
    assert run.results.data.events < read_results(finished / "results.json").data.events
    assert Path("out/study.toml").read_text() == run.results.study.text


def test_the_key_knows_what_results_depend_on(mini: WriteStudy) -> None:
    study = open_study(mini())
    assert study_key(study) == study_key(open_study(mini()))
    assert study_key(open_study(mini(), seed=1)) != study_key(study)
    Path("data.root").write_bytes(b"one")
    data = mini({'data = "pseudo"': 'data = { file = "data.root" }'})
    first = study_key(open_study(data))
    Path("data.root").write_bytes(b"two")
    assert study_key(open_study(data)) != first


def test_named_files_are_found_wherever_they_stand() -> None:
    document = {"a": {"file": "x.root"}, "b": [{"c": [{"file": "y.root"}, {"file": None}]}], "file": "z.root"}
    assert list(named_files(document)) == ["x.root", "y.root", "z.root"]


def test_report_command_draws_from_results_alone(results: Results, tmp_path: Path) -> None:
    few = results.model_copy(update={"projections": (), "linearity": ()})
    (tmp_path / "results.json").write_text(few.text())
    contents = []
    for _ in range(2):
        assert main(["report", str(tmp_path), "--quiet"]) == 0
        contents.append({path.name: path.read_bytes() for path in tmp_path.rglob("*") if path.is_file()})
    assert set(contents[0]) >= {"report.html", "budget.svg", "toy_pulls.png", "correlations.svg"}
    assert contents[0] == contents[1]


@pytest.mark.usefixtures("no_pictures")
def test_json_is_results_json(mini: WriteStudy, finished: Path, capsys: pytest.CaptureFixture[str]) -> None:
    study = mini()
    shutil.copytree(finished, "out")
    assert main(["study", str(study), "--json", "--quiet"]) == 0
    captured = capsys.readouterr()
    assert json.loads(captured.out) == json.loads((finished / "results.json").read_text())
    assert captured.err == ""


@pytest.mark.usefixtures("no_pictures")
def test_data_from_a_file(mini: WriteStudy, finished: Path) -> None:
    """The stored pseudo-data given as a file: the same fit."""
    shutil.copy(finished / "templates.root", mini().parent / "data.root")
    run = study_run.run_study(mini({'data = "pseudo"': 'data = { file = "data.root" }'}))
    stored = read_results(finished / "results.json")
    assert run.results.data.kind == "file"
    assert run.results.data.events == stored.data.events
    assert run.results.ratios == stored.ratios


@pytest.mark.usefixtures("no_pictures")
def test_expected_events_return_what_was_injected(mini: WriteStudy) -> None:
    run = study_run.run_study(mini({'data = "pseudo"': 'data = "expected"'}))
    for ratio in run.results.ratios:
        assert ratio.value == pytest.approx(ratio.injected, rel=1e-6)
