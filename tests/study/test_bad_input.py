"""Bad input, as users give it: one clear message, the right exit status, no traceback, nothing whole is lost."""

from __future__ import annotations

import errno
import json
import os
import re
import resource
import shutil
import signal
import subprocess
import sys
import time
from collections.abc import Callable
from pathlib import Path

import boost_histogram as bh
import numpy as np
import pytest
import uproot
from semitau.core import whole_files
from semitau.core.templates import TemplateSet
from semitau.study.command_line import main
from semitau.study.results import Results
from semitau.study.run import study_run

WriteStudy = Callable[..., Path]
Capture = pytest.CaptureFixture[str]


def told(status: int, arguments: list[str], capsys: Capture) -> str:
    """Run the command, check its status and that there is no traceback; returns what stands on stderr."""
    assert main(arguments) == status
    captured = capsys.readouterr()
    assert "Traceback" not in captured.err
    assert "fault of its own" not in captured.err
    return captured.err


def contents(folder: Path) -> dict[str, bytes]:
    return {str(path.relative_to(folder)): path.read_bytes() for path in folder.rglob("*") if path.is_file()}


STUDY_MISTAKES = {
    "unknown key": ({"energy_spread": "energy_sprad"}, "energy_sprad", "energy_spread"),
    "unknown value": ({'law = "threshold"': 'law = "treshold"'}, "treshold", "threshold"),
    "wrong type": ({"b_pairs = 700e6": 'b_pairs = "many"'}, "b_pairs", "many"),
    "wrong unit": ({'noise_mean = "120 MeV"': 'noise_mean = "120 ps"'}, "noise_mean", "120 ps"),
    "edges not increasing": ({"[0.2, 0.9, 1.5, 2.6]": "[0.2, 1.5, 0.9, 2.6]"}, "edges must increase", "0.9"),
    "limits the wrong way round": ({"q2 = { min = 4.0 }": "q2 = { min = 4.0, max = 3.0 }"}, "q2", "4"),
    "not TOML": ({"[experiment]": "[experiment"}, "mini.toml:12", "TOML"),
    "no seed": ({"seed = 20261201\n": ""}, "seed", "study"),
}


@pytest.mark.parametrize("mistake", STUDY_MISTAKES)
@pytest.mark.parametrize("command", ["check", "study", "build", "rates", "generate"])
def test_mistakes_in_a_study_file(mistake: str, command: str, mini: WriteStudy, capsys: Capture) -> None:
    changes, *words = STUDY_MISTAKES[mistake]
    study = mini(changes)
    error = told(2, [command, str(study)], capsys)
    for word in words:
        assert word in error
    assert re.search(r"mini\.toml(:\d+)*: ", error), error
    assert os.listdir() == ["mini.toml"], "something was made from a bad study"


def test_all_problems_are_told_at_once(mini: WriteStudy, capsys: Capture) -> None:
    study = mini({"energy_spread": "energy_sprad", 'noise_mean = "120 MeV"': 'noise_mean = "120 ps"'})
    lines = told(2, ["check", str(study)], capsys).splitlines()
    assert len(lines) == 2
    assert all(re.match(r"semitau: .*mini\.toml:\d+: ", line) for line in lines)


def test_a_cut_that_removes_everything(mini: WriteStudy, capsys: Capture) -> None:
    study = mini({'p_lepton = { min = "300 MeV" }': "p_lepton = { min = 9.0 }"}, questions=False)
    error = told(2, ["build", str(study)], capsys)
    assert "cut on p_lepton" in error
    assert "Loosen" in error
    assert not Path("out/templates.root").exists()


def test_a_component_with_no_events(mini: WriteStudy, capsys: Capture) -> None:
    study = mini({'reconstructed = { D0 = 0.13, "D+" = 0.11 }': 'reconstructed = { D0 = 0.0, "D+" = 0.0 }'})
    assert "no events" in told(2, ["study", str(study)], capsys)


@pytest.mark.parametrize("command", ["study", "check", "build", "rates", "generate"])
def test_missing_study_file(command: str, tmp_path: Path, capsys: Capture) -> None:
    error = told(2, [command, str(tmp_path / "nothing.toml")], capsys)
    assert "nothing.toml" in error
    assert "no such file" in error.lower()


BAD_TEMPLATES = {
    "missing": ("nothing.root", "no such file"),
    "truncated": ("half.root",),
    "not a ROOT file": ("text.root", "not a ROOT file"),
    "foreign": ("foreign.root", "meta"),
    "of another version": ("future.root", "version", "2.0"),
    "with NaN": ("nan.root", "D0_e/D_tau", "nan"),
    "with a negative variance": ("negative.root", "D0_e/D_tau", "negative variance"),
    "with one side of a variation": ("side.root", "tag_resolution"),
}
"""What is wrong with a template file -> its name, and words of the message."""


@pytest.fixture(scope="module")
def bad_templates(template_file: Path, tmp_path_factory: pytest.TempPathFactory) -> Path:
    """Folder with the files of BAD_TEMPLATES."""
    folder = tmp_path_factory.mktemp("bad")
    (folder / "half.root").write_bytes(template_file.read_bytes()[: template_file.stat().st_size // 2])
    (folder / "text.root").write_text("this is no ROOT file")
    with uproot.recreate(folder / "foreign.root") as file:
        file["h"] = np.histogram(np.arange(10.0))
    rewrite(template_file, folder / "future.root", lambda meta: meta | {"version": "2.0"})
    rewrite(template_file, folder / "nan.root", histograms={"D0_e/D_tau/nominal": spoilt(np.nan)})
    rewrite(template_file, folder / "negative.root", histograms={"D0_e/D_tau/nominal": spoilt(-1.0, variance=True)})
    rewrite(template_file, folder / "side.root", leave_out="D0_e/D_tau/minus/tag_resolution")
    return folder


@pytest.mark.parametrize("fault", BAD_TEMPLATES)
@pytest.mark.parametrize("command", ["extract", "toys", "profile", "budget"])
def test_bad_template_files(fault: str, command: str, bad_templates: Path, capsys: Capture) -> None:
    name, *words = BAD_TEMPLATES[fault]
    error = told(2, [command, str(bad_templates / name)], capsys)
    for word in (name, *words):
        assert word.lower() in error.lower()


@pytest.mark.parametrize("command", ["extract", "toys", "profile", "budget"])
def test_unknown_parameter(command: str, template_file: Path, capsys: Capture) -> None:
    error = told(2, [command, str(template_file), "--fix", "R_Dstar=0.3"], capsys)
    assert "'R_Dstar'" in error
    assert "Did you mean 'R_Dst'?" in error


def rewrite(
    source: Path,
    target: Path,
    change: Callable[[dict[str, object]], dict[str, object]] = lambda meta: meta,
    histograms: dict[str, Callable[[bh.Histogram], bh.Histogram]] | None = None,
    leave_out: str = "",
) -> None:
    """Copy a template file with another description, other histograms, or without one of them."""
    with uproot.open(source) as old, uproot.recreate(target) as new:
        new["meta"] = json.dumps(change(json.loads(str(old["meta"]))))
        for key, kind in old.classnames(cycle=False).items():
            if kind.startswith("TH") and key != leave_out:
                histogram = old[key].to_boost()
                new[key] = (histograms or {}).get(key, lambda same: same)(histogram)


def spoilt(value: float, variance: bool = False) -> Callable[[bh.Histogram], bh.Histogram]:
    """Puts a value into the first bin."""

    def spoil(histogram: bh.Histogram) -> bh.Histogram:
        view = histogram.view()
        (view.variance if variance else view.value)[0, 0] = value
        return histogram

    return spoil


def data_file(
    path: Path, templates: TemplateSet, change: Callable[[str, np.ndarray, list[np.ndarray]], object]
) -> Path:
    """A ROOT file with <category>/data of the right axes, changed by `change`(category, counts, edges)."""
    with uproot.recreate(path) as file:
        for category in templates.categories:
            edges = [np.array(observable.edges) for observable in category.observables]
            histogram = bh.Histogram(*(bh.axis.Variable(e) for e in edges), storage=bh.storage.Double())
            histogram.view()[...] = templates.data[category.name]
            changed = change(category.name, histogram, edges)
            if changed is not None:
                file[f"{category.name}/data"] = changed
    return path


class TestData:
    """What may be wrong with the data that are to be fitted."""

    def test_good_data_pass(self, template_file: Path, templates: TemplateSet, tmp_path: Path, capsys: Capture) -> None:
        path = data_file(tmp_path / "data.root", templates, lambda name, histogram, edges: histogram)
        assert told(0, ["extract", str(template_file), "--data", str(path), "--quiet"], capsys) == ""

    def test_outside_the_axes(
        self, template_file: Path, templates: TemplateSet, tmp_path: Path, capsys: Capture
    ) -> None:
        def overflowing(name: str, histogram: bh.Histogram, edges: list[np.ndarray]) -> bh.Histogram:
            histogram[bh.overflow, 0] = 3.0
            return histogram

        path = data_file(tmp_path / "data.root", templates, overflowing)
        error = told(2, ["extract", str(template_file), "--data", str(path)], capsys)
        assert "D0_e" in error
        assert "outside" in error

    def test_other_axes(self, template_file: Path, templates: TemplateSet, tmp_path: Path, capsys: Capture) -> None:
        def shifted(name: str, histogram: bh.Histogram, edges: list[np.ndarray]) -> bh.Histogram:
            other = bh.Histogram(*(bh.axis.Variable(e + 0.01) for e in edges), storage=bh.storage.Double())
            other.view()[...] = histogram.view()
            return other

        path = data_file(tmp_path / "data.root", templates, shifted)
        error = told(2, ["extract", str(template_file), "--data", str(path)], capsys)
        assert "D0_e" in error
        assert "edges" in error

    def test_a_category_is_missing(
        self, template_file: Path, templates: TemplateSet, tmp_path: Path, capsys: Capture
    ) -> None:
        path = data_file(
            tmp_path / "data.root", templates, lambda name, histogram, edges: None if name == "Dp_mu" else histogram
        )
        assert "Dp_mu" in told(2, ["extract", str(template_file), "--data", str(path)], capsys)

    def test_events_where_none_are_expected(
        self, template_file: Path, templates: TemplateSet, tmp_path: Path, capsys: Capture
    ) -> None:
        hollow = tmp_path / "hollow.root"

        def emptied(histogram: bh.Histogram) -> bh.Histogram:
            for contents in (histogram.values(), histogram.variances()):
                contents[0, 0] = 0
            return histogram

        with uproot.open(template_file) as file:
            keys = [key for key in file.keys(cycle=False) if key.startswith("D0_e/") and key.count("/") > 1]
        rewrite(template_file, hollow, histograms=dict.fromkeys(keys, emptied))
        path = data_file(tmp_path / "data.root", templates, lambda name, histogram, edges: put(histogram, 2.0))
        error = told(2, ["extract", str(hollow), "--data", str(path)], capsys)
        assert "events were seen where none are expected" in error
        assert "D0_e" in error
        assert "got 2" in error


def put(histogram: bh.Histogram, value: float) -> bh.Histogram:
    histogram.view()[0, 0] = value
    return histogram


class TestOutputFolder:
    """The folder that a study writes to."""

    def test_of_another_study(self, mini: WriteStudy, capsys: Capture) -> None:
        study = mini()
        Path("out").mkdir()
        Path("out/study.toml").write_text('[study]\nname = "Quayside, first look"\n')
        Path("out/results.json").write_text("precious")
        before = contents(Path("out"))
        error = told(2, ["study", str(study)], capsys)
        assert "belongs to another study" in error
        assert "Quayside, first look" in error
        assert "--output" in error
        assert contents(Path("out")) == before

    def test_with_other_things(self, mini: WriteStudy, capsys: Capture) -> None:
        study = mini()
        Path("out").mkdir()
        Path("out/thesis.tex").write_text("precious")
        error = told(2, ["study", str(study)], capsys)
        assert "thesis.tex" in error
        assert os.listdir("out") == ["thesis.tex"]

    def test_that_is_a_file(self, mini: WriteStudy, capsys: Capture) -> None:
        study = mini()
        Path("out").write_text("precious")
        assert "is a file" in told(2, ["study", str(study)], capsys)
        assert Path("out").read_text() == "precious"

    def test_without_write_permission(self, mini: WriteStudy, capsys: Capture) -> None:
        """The system refuses: a folder without permission, or (for the superuser) one where nobody may write."""
        study = mini()
        target = Path("closed")
        target.mkdir(mode=0o555)
        if os.access(target, os.W_OK):
            target = Path("/proc")
        error = told(1, ["build", str(study), "--output", str(target / "templates.root"), "--quiet"], capsys)
        assert "cannot write" in error
        assert str(target) in error

    @pytest.mark.usefixtures("no_toys")
    def test_disk_full(
        self, mini: WriteStudy, finished: Path, monkeypatch: pytest.MonkeyPatch, capsys: Capture
    ) -> None:
        study = mini({"e_res = { max = 0.8 }": "e_res = { max = 0.7 }"})
        shutil.copytree(finished, "out")
        before = contents(Path("out")) | {"study.toml": study.read_bytes()}
        real = os.replace

        def full(source: Path, target: Path) -> None:
            if Path(target).name != "study.toml":
                raise OSError(errno.ENOSPC, "No space left on device")
            real(source, target)

        monkeypatch.setattr(whole_files.os, "replace", full)
        error = told(1, ["study", str(study), "--quiet"], capsys)
        assert "no space left" in error
        assert f"{Path('out/store')}/component-" in error
        assert "Free some space" in error
        assert contents(Path("out")) == before

    def test_the_system_stops_the_writing(self, mini: WriteStudy) -> None:
        """A real limit on the size of files (20 kB) stands for a full disk: the write itself fails half way."""
        study = mini()
        done = subprocess.run(
            [sys.executable, "-m", "semitau.study", "build", str(study), "--quiet"],
            capture_output=True,
            text=True,
            preexec_fn=lambda: resource.setrlimit(resource.RLIMIT_FSIZE, (20_000, 20_000)),
        )
        assert done.returncode == 1, done.stderr
        assert ".npz: cannot write: file too large" in done.stderr
        assert "Traceback" not in done.stderr
        left = {path.name for path in Path("out").rglob("*") if path.is_file()}
        assert left >= {"study.toml"}
        assert not [name for name in left if name.endswith((".part", ".root"))]


@pytest.fixture
def no_toys(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(study_run, "study_toys", lambda *given: pytest.fail("it went on after the disk was full"))


@pytest.mark.parametrize("content", ["", '{"format": "semitau results", "ver', '{"format": "other"}'])
def test_report_of_a_damaged_folder(content: str, tmp_path: Path, capsys: Capture) -> None:
    (tmp_path / "results.json").write_text(content)
    (tmp_path / "report.html").write_text("old report")
    assert "results.json" in told(2, ["report", str(tmp_path)], capsys)
    assert (tmp_path / "report.html").read_text() == "old report"


def test_report_of_no_folder(tmp_path: Path, capsys: Capture) -> None:
    assert "no such file" in told(2, ["report", str(tmp_path / "nowhere")], capsys)


def test_ctrl_c_leaves_only_whole_files(mini: WriteStudy, finished: Path, results: Results) -> None:
    """Stopped in the middle of the templates: results of the last run are still there, nothing half-written is."""
    study = mini({"events = 24000": "events = 40000000"})
    shutil.copytree(finished, "out")
    before = contents(Path("out")) | {"study.toml": study.read_bytes()}
    process = subprocess.Popen(
        [sys.executable, "-m", "semitau.study", "study", str(study)],
        stdout=subprocess.PIPE,
        stderr=subprocess.PIPE,
        text=True,
    )
    deadline = time.monotonic() + 120
    while Path("out/study.toml").read_bytes() != study.read_bytes() and time.monotonic() < deadline:
        time.sleep(0.05)
    time.sleep(1.0)
    process.send_signal(signal.SIGINT)
    _, error = process.communicate(timeout=120)
    assert process.returncode == 1, error
    assert "stopped on request" in error
    assert "Traceback" not in error
    assert contents(Path("out")) == before


def test_a_fit_that_fails_says_why(template_file: Path, tmp_path: Path, capsys: Capture) -> None:
    """Two components with the same templates: the data cannot tell them apart."""
    twins = tmp_path / "twins.root"
    with uproot.open(template_file) as file:
        kinds = file.classnames(cycle=False)
        copies = {
            key: file[key.replace("D_tau", "Dst_tau")].to_boost()
            for key, kind in kinds.items()
            if kind.startswith("TH") and "/D_tau/" in key
        }
    known = {key: (lambda _, copy=copy: copy) for key, copy in copies.items()}
    rewrite(template_file, twins, change=without_yields, histograms=known)
    error = told(1, ["extract", str(twins)], capsys)
    assert error.startswith("semitau: ")
    assert "fit" in error
    # The reason comes with a next step.
    assert "fix or constrain" in error.lower()


def without_yields(meta: dict[str, object]) -> dict[str, object]:
    """The tau components scale with their ratios alone, so that nothing else tells one from the other."""
    components = [
        component | {"scales_with": component["scales_with"][:1]} if component["name"].endswith("tau") else component
        for component in meta["components"]  # type: ignore[attr-defined]
    ]
    return meta | {"components": components}
