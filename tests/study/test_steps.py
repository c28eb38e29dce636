"""A study as a graph of steps: what is made again after a change, and what is left when a run is killed."""

from __future__ import annotations

import os
import shutil
import signal
import subprocess
import sys
import textwrap
from collections.abc import Callable, Mapping
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from semitau.core.template_file import read_templates
from semitau.study.command_line import main
from semitau.study.graph.store import Store
from semitau.study.results import Results, read_results
from semitau.study.run import study_run

from .conftest import mini_text

WriteStudy = Callable[..., Path]
SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))


def plain_text() -> str:
    """The quick study without what it asks beyond fit and toys."""
    return mini_text(questions=False)


@pytest.fixture
def mini(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> WriteStudy:
    """As everywhere, without what goes beyond fit and toys."""
    monkeypatch.chdir(tmp_path)

    def write(changes: Mapping[str, str] | None = None) -> Path:
        text = plain_text()
        for old, new in (changes or {}).items():
            assert text.count(old) == 1, old
            text = text.replace(old, new)
        (tmp_path / "mini.toml").write_text(text)
        return tmp_path / "mini.toml"

    return write


@pytest.fixture(scope="module")
def finished(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Folder of a run to the end, not to be changed."""
    folder = tmp_path_factory.mktemp("finished")
    (folder / "mini.toml").write_text(plain_text())
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(study_run, "draw_pictures", lambda results, folder, report, again: ())
        study_run.run_study(folder / "mini.toml", output=folder / "out", workers=2)
    return folder / "out"


@pytest.fixture(autouse=True)
def no_pictures(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(study_run, "draw_pictures", lambda results, folder, report, again: ())


@pytest.fixture
def begun(mini: WriteStudy, finished: Path) -> WriteStudy:
    """As `mini`; the study has run before."""
    shutil.copytree(finished, mini().parent / "out")
    return mini


def bits(results: Results) -> dict[str, Any]:
    """All that was found, but for times and the text of the study file."""
    return results.model_dump(exclude={"timing", "study"})


def made_anew(study: Path) -> Results:
    """Results of the same study without anything that was stored."""
    return study_run.run_study(study, output=Path("anew"), workers=1).results


def stored(kind: str) -> set[str]:
    return {path.name for path in Path("out/store").glob(f"{kind}-*")}


def reused(results: Results) -> list[str]:
    return [stage.stage for stage in results.timing.stages if stage.reused]


def test_one_component_changed(begun: WriteStudy) -> None:
    """More events of one component: only its templates are made again, and toys, which are drawn from templates."""
    before = stored("component")
    study = begun({"events = 18000": "events = 18256"})
    run = study_run.run_study(study, workers=1)
    after = stored("component")
    assert len(after - before) == 1
    assert len(before - after) == 1  # what nobody needs any more is removed
    assert reused(run.results) == []
    assert bits(run.results) == bits(made_anew(study))


def test_more_toys(begun: WriteStudy) -> None:
    components, toys = stored("component"), stored("toys")
    first = read_results(Path("out/results.json"))
    assert first.toys is not None
    study = begun({"number = 60": "number = 90"})
    results = study_run.run_study(study, workers=2).results
    assert stored("component") == components
    assert stored("toys") == toys
    assert reused(results) == ["templates", "linearity"]
    assert results.toys is not None
    assert results.toys.number == 90
    assert results.ratios == first.ratios
    assert bits(results) == bits(made_anew(study))
    fewer = study_run.run_study(begun(), workers=1).results
    assert reused(fewer) == ["templates", "toys", "linearity"]
    assert bits(fewer) == bits(first)


def test_a_label_changed(begun: WriteStudy) -> None:
    before = stored("component") | stored("toys")
    study = begun({'label = "continuum"': 'label = "the continuum"'})
    results = study_run.run_study(study).results
    assert stored("component") | stored("toys") == before
    assert reused(results) == ["templates", "toys", "linearity"]
    assert "the continuum" in {component.label for component in results.components}
    assert {c.label for c in read_templates(Path("out/templates.root")).components} >= {"the continuum"}


@pytest.mark.parametrize(
    ("change", "anew"),
    [
        ({'lepton = "mu"\nrelative = 0.02': 'lepton = "mu"\nrelative = 0.021'}, 0),  # constant factors
        ({'particle = "charged"\nrelative = 0.04': 'particle = "charged"\nrelative = 0.05'}, 4),  # weights: D*, D**
    ],
)
def test_a_variation_changed(begun: WriteStudy, change: dict[str, str], anew: int) -> None:
    before = stored("component")
    study = begun(change)
    results = study_run.run_study(study).results
    assert len(stored("component") - before) == anew
    assert bits(results) == bits(made_anew(study))


def test_a_changed_cut_makes_all_again(begun: WriteStudy) -> None:
    before = stored("component")
    study = begun({"e_res = { max = 0.8 }": "e_res = { max = 0.7 }"})
    results = study_run.run_study(study).results
    assert not stored("component") & before
    assert reused(results) == []


def test_a_store_of_another_version(begun: WriteStudy, capsys: pytest.CaptureFixture[str]) -> None:
    first = read_results(Path("out/results.json"))
    Path("out/results.json").unlink()
    Path("out/store/store.json").write_text('{"format": "semitau store", "version": 9}')
    assert main(["study", str(begun())]) == 0
    words = " ".join(capsys.readouterr().out.split())
    assert (
        "The store in out/store was written by another version (9; this one has 1): its contents are made again."
        in words
    )
    again = read_results(Path("out/results.json"))
    assert reused(again) == []
    assert bits(again) == bits(first)


def test_damaged_files_of_the_store_are_made_again(begun: WriteStudy) -> None:
    first = read_results(Path("out/results.json"))
    Path("out/results.json").unlink()
    damaged = sorted(path for path in Path("out/store").iterdir() if "-" in path.name)
    for number, path in enumerate(damaged):
        path.write_bytes(path.read_bytes()[: number * 7])
    run = study_run.run_study(begun())
    assert len(run.notes) == len(damaged)
    assert all("is damaged: it is made again." in note for note in run.notes)
    assert bits(run.results) == bits(first)
    assert not Store(Path("out/store")).notes


def test_again_makes_everything_anew(begun: WriteStudy) -> None:
    first = read_results(Path("out/results.json"))
    run = study_run.run_study(begun(), again=True)
    assert reused(run.results) == []
    assert bits(run.results) == bits(first)


def test_build_takes_what_a_study_has_made(begun: WriteStudy, capsys: pytest.CaptureFixture[str]) -> None:
    study = str(begun())
    assert main(["build", study]) == 0
    assert "all events were there already" in " ".join(capsys.readouterr().out.split())
    assert main(["build", study, "--output", "other.root"]) == 0
    assert "all events were there already" in " ".join(capsys.readouterr().out.split())
    one, other = read_templates(Path("out/templates.root")), read_templates(Path("other.root"))
    for key, template in one.templates.items():
        np.testing.assert_array_equal(template.nominal, other.templates[key].nominal)


def test_check_says_what_is_there(begun: WriteStudy, capsys: pytest.CaptureFixture[str]) -> None:
    def rows(study: Path) -> dict[str, str]:
        assert main(["check", str(study)]) == 0
        lines = capsys.readouterr().out.split("Step ")[1].splitlines()
        return {line.split()[0]: " ".join(line.split()[1:]) for line in lines if line.strip()}

    there = rows(begun())
    assert [there[name] for name in ("templates", "pseudo-data", "toys", "linearity")] == ["all"] * 4
    more = rows(begun({"number = 60": "number = 90"}))
    assert more["toys"].startswith("67 % the rest")
    assert more["templates"] == more["linearity"] == "all"
    none = rows(begun({"e_res = { max = 0.8 }": "e_res = { max = 0.7 }"}))
    assert none["templates"].startswith("all ")  # in the column of what will be made, with its time


# --- killed, and two at once ----------------------------------------------------------------------------------------

RUN = """
    import sys
    from semitau.study.graph import store
    from semitau.study.run import study_run
    store.LEAST_PAUSE, store.SHARE_OF_TIME = 0.01, 1.0
    study_run.draw_pictures = lambda results, folder, report, again: ()
    print("ready", flush=True)
    study_run.run_study(sys.argv[1], workers=int(sys.argv[2]))
"""


def start(study: Path, workers: int) -> subprocess.Popen[str]:
    command = [sys.executable, "-c", textwrap.dedent(RUN), str(study), str(workers)]
    process = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    assert process.stdout is not None
    assert process.stdout.readline() == "ready\n"  # from here on it works
    return process


def test_killed_at_any_moment_nothing_is_lost_or_half_written(mini: WriteStudy, finished: Path) -> None:
    """SIGKILL at random moments, until a run gets through; each gets further than the one before, or as far."""
    study, random = mini(), np.random.default_rng(SEED)
    kills, pause = 0, 1.0
    while True:
        process = start(study, 1 + kills % 2)
        try:
            process.wait(pause * random.uniform(0.5, 1.5))
        except subprocess.TimeoutExpired:
            process.send_signal(signal.SIGKILL)
        _, errors = process.communicate()
        if process.returncode == 0:
            break
        assert process.returncode == -signal.SIGKILL, errors
        kills += 1
        pause *= 1.5
        assert kills < 20
        expect_whole(Path("out"))
    assert kills >= 1
    found = read_results(Path("out/results.json"))
    assert bits(found) == bits(read_results(finished / "results.json"))
    assert not list(Path("out").rglob("*.part"))


def expect_whole(folder: Path) -> None:
    """Every file that has its name is whole."""
    store = Store(folder / "store")
    for path in (folder / "store").glob("*-*.npz"):
        if not path.name.endswith(".part"):
            with np.load(path) as arrays:
                assert all(arrays[name] is not None for name in arrays.files if name != "header.json")
    assert not store.notes
    if (folder / "templates.root").exists():
        read_templates(folder / "templates.root")
    if (folder / "results.json").exists():
        read_results(folder / "results.json")


def test_two_runs_at_once(mini: WriteStudy, finished: Path) -> None:
    study = mini()
    both = [start(study, 1), start(study, 2)]
    for process in both:
        _, errors = process.communicate()
        assert process.returncode == 0, errors
    assert bits(read_results(Path("out/results.json"))) == bits(read_results(finished / "results.json"))
    assert not list(Path("out").rglob("*.part"))
    expect_whole(Path("out"))
    run = study_run.run_study(study)
    assert run.reused
