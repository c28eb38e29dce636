"""The template file: exact round trip, a committed sample, and a reader that trusts nothing."""

from __future__ import annotations

import errno
import json
import os
import re
import sys
from collections.abc import Callable
from pathlib import Path
from types import ModuleType
from typing import Any

import boost_histogram as bh
import numpy as np
import pytest
import uproot
from hypothesis import HealthCheck, given, settings
from semitau.core import template_meta
from semitau.core.errors import InputError, RunError
from semitau.core.template_file import SHOWN_PROBLEMS, read_data, read_templates, write_templates
from semitau.core.templates import Template, TemplateSet

from .sample_templates import EL, MM2, Q2, assert_same, sample, template_sets

REFERENCE = Path(__file__).parents[1] / "reference"
DOCUMENT = Path(__file__).parents[2] / "docs" / "template_file.md"


@settings(
    deadline=None, max_examples=60, suppress_health_check=[HealthCheck.function_scoped_fixture, HealthCheck.too_slow]
)
@given(templates=template_sets())
def test_round_trip_is_exact(tmp_path: Path, templates: TemplateSet) -> None:
    write_templates(templates, tmp_path / "t.root")
    assert_same(read_templates(tmp_path / "t.root"), templates)
    assert [path.name for path in tmp_path.iterdir()] == ["t.root"]


def test_stored_sample_of_version_1_reads_as_ever() -> None:
    """A contract: this file was written on 2026-12-01 by the first version 1.0, and its contents never change."""
    assert_same(read_templates(REFERENCE / "template_file_1.0.root"), sample())


def test_layout_is_as_documented(tmp_path: Path) -> None:
    """Seen by uproot and boost-histogram alone, the file is what docs/template_file.md says."""
    write_templates(sample(), tmp_path / "t.root")
    with uproot.open(tmp_path / "t.root") as file:
        classes = file.classnames(recursive=True, cycle=False)
        assert classes["meta"] == "TObjString"
        assert classes["one/signal/nominal"] == "TH1D"
        assert classes["two/light/plus/tag"] == "TH2D"
        assert classes["three/light/minus/rho2"] == "TH3D"
        assert classes["two/data"] == "TH2D"
        assert "one/light/nominal" not in classes
        assert "one/data" not in classes
        meta = json.loads(file["meta"])
        stored = file["three/light/nominal"].to_boost()
        plus = file["three/light/plus/tag"].to_boost()
    assert (meta["format"], meta["version"]) == ("semitau templates", "1.0")
    assert meta["categories"][1]["observables"][1] == {
        "name": "el",
        "label": "E",
        "unit": "GeV",
        "edges": [0.2, 1.0, 2.5],
    }
    assert meta["components"][0]["scales_with"] == ["R_D", "yield_light"]
    assert meta["parameters"][0]["injected"] == 0.299
    template = sample().templates["three", "light"]
    assert stored.storage_type is bh.storage.Weight
    assert np.array_equal(stored.values(), template.nominal)
    assert np.array_equal(stored.variances(), template.variance)
    assert np.array_equal(plus.values(), template.plus["tag"])
    assert stored.values(flow=True).sum() == pytest.approx(template.nominal.sum()), "flow bins are not empty"
    for axis, observable in zip(stored.axes, (MM2, EL, Q2), strict=True):
        assert axis.edges.tolist() == list(observable.edges)


def documented_blocks() -> list[str]:
    return re.findall(r"^```python\n(.*?)^```", DOCUMENT.read_text(), flags=re.M | re.S)


def test_the_documents_example_makes_a_template_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.chdir(tmp_path)
    making, _ = documented_blocks()
    module = ModuleType("documented_example")
    exec(making, module.__dict__)
    templates = read_templates("templates.root")
    light, tau = module.light, module.tau
    assert templates.templates["Dst_mu", "Dst_light"].nominal.sum() == pytest.approx(
        0.1 * np.sum((light > -1) & (light < 9))
    )
    assert templates.templates["Dst_mu", "Dst_tau"].variance.sum() == pytest.approx(4e-4 * np.sum(tau < 9))
    assert "fit.read_templates" in documented_blocks()[1]


# ---- files of other programs ----


def write_file(path: Path, change: Callable[[dict[str, Any]], None] | None = None, **objects: Any) -> Path:
    """A template file with equal bins, by uproot alone, changed as asked; objects that are None are left out."""
    meta = {
        "format": "semitau templates",
        "version": "1.0",
        "categories": [
            {
                "name": "a",
                "label": "",
                "observables": [{"name": "x", "label": "", "unit": "", "edges": [0.0, 0.1, 0.2, 0.3]}],
            }
        ],
        "components": [{"name": "s", "label": "", "role": "signal", "scales_with": ["R"]}],
        "parameters": [{"name": "R", "label": "", "kind": "ratio", "injected": 0.3, "constraint": None}],
        "nuisances": [{"name": "n", "label": "", "group": "", "constraint": "unit Gaussian"}],
    }
    if change:
        change(meta)
    content = {"meta": json.dumps(meta), "a/s/nominal": weighted([1, 2, 3]), "a/s/plus/n": plain([1, 2, 4])}
    content |= {"a/s/minus/n": plain([1, 2, 2])}
    content |= {name.replace("__", "/"): thing for name, thing in objects.items()}
    with uproot.recreate(path) as file:
        for name, thing in content.items():
            if thing is not None:
                file[name] = thing
    return path


def weighted(contents: list[float], variances: list[float] | None = None) -> bh.Histogram:
    histogram = bh.Histogram(bh.axis.Regular(3, 0.0, 0.3), storage=bh.storage.Weight())
    histogram.view()[...] = np.stack([contents, contents if variances is None else variances], axis=-1)
    return histogram


def plain(contents: list[float], high: float = 0.3, flow: float = 0.0) -> bh.Histogram:
    histogram = bh.Histogram(bh.axis.Regular(len(contents), 0.0, high), storage=bh.storage.Double())
    histogram.view()[...] = contents
    histogram.view(flow=True)[-1] = flow
    return histogram


def test_equal_bins_of_another_program(tmp_path: Path) -> None:
    """Their inner edges are computed and differ in the last digit: 0.1 + 0.2 != 0.3. The description's are kept."""
    path = write_file(tmp_path / "t.root", a__data=plain([4, 0, 1]))
    templates = read_templates(path)
    assert templates.categories[0].observables[0].edges == (0.0, 0.1, 0.2, 0.3)
    assert templates.templates["a", "s"].plus["n"].tolist() == [1, 2, 4]
    assert templates.data["a"].tolist() == [4, 0, 1]


def test_overflow_of_templates_is_left_out(tmp_path: Path) -> None:
    path = write_file(tmp_path / "t.root", a__s__plus__n=plain([1, 2, 4], flow=9.0))
    assert read_templates(path).templates["a", "s"].plus["n"].sum() == 7


TWO_AXES = bh.Histogram(bh.axis.Regular(3, 0.0, 0.3), bh.axis.Regular(3, 0.0, 0.3), storage=bh.storage.Weight())


@pytest.mark.parametrize(
    ("objects", "message"),
    [
        ({"meta": None}, r"not a template file: it holds no 'meta'\. Make one with 'semitau build'"),
        ({"meta": plain([1.0])}, "'meta' is not a string"),
        ({"meta": "{"}, "meta: not JSON"),
        ({"meta": "[1]"}, r"meta: not the description of a template file \(got format list"),
        ({"meta": "[" * 100_000}, "meta: not JSON"),
        ({"a__s__nominal": weighted([1, np.nan, 3])}, r"a/s/nominal bin \[1\]: contents not finite \(got nan\)"),
        ({"a__s__nominal": weighted([1, 2, 3], [1, -2, 3])}, r"a/s: variance bin \[1\]: negative variance \(got -2\)"),
        ({"a__s__nominal": weighted([1, 2, 3], [1, np.inf, 3])}, r"nominal bin \[1\]: squared weights not finite"),
        ({"a__s__nominal": plain([1, 2, 3])}, r"a/s/nominal: no squared weights\. Call Sumw2\(\)"),
        ({"a__s__nominal": None}, r"a/s: variations without a nominal histogram\. Add a/s/nominal"),
        ({"a__s__nominal": "text"}, r"a/s/nominal: not a plain histogram \(got TObjString, allowed TH1, TH2 or TH3"),
        ({"a__s__nominal": TWO_AXES}, r"a/s/nominal: wrong number of axes \(got 2, allowed 1\)"),
        ({"a__s__minus__n": None}, r"a/s: minus/n: one side of a variation is missing\. Add it beside plus/n"),
        (
            {"a__s__plus__n": plain([1, 2, 3], high=0.4)},
            r"plus/n: edges of x differ .*allowed \[0, 0.1, 0.2, 0.3\]\)\. Fill",
        ),
        ({"a__s__plus__n": plain([1, 2])}, r"a/s/plus/n: edges of x differ .*got \[0, 0.15, 0.3\]"),
        ({"a__s__plus__n": plain([1, -np.inf, 2])}, r"a/s/plus/n bin \[1\]: contents not finite \(got -inf\)"),
        ({"a__s__plus__m": plain([1, 2, 3])}, r"a/s/plus/m: unknown nuisance \(got 'm', allowed n\)"),
        ({"a__s__up__n": plain([1, 2, 3])}, r"a/s/up/n: unknown object \(got TH1D, allowed nominal, plus/<nuisance>"),
        ({"a__tau__nominal": weighted([1, 2, 3])}, r"a/tau/nominal: unknown component \(got 'tau', allowed s\)"),
        ({"b__s__nominal": weighted([1, 2, 3])}, r"b/s/nominal: unknown category \(got 'b', allowed a\)"),
        (
            {"a__data": plain([1, 2, 3], flow=2.0)},
            r"a/data: data outside the axes \(got 2 events in underflow and overf",
        ),
        ({"a__data": plain([1, -2, 3])}, r"a/data bin \[1\]: negative count \(got -2\)"),
        ({"a__data": plain([1, np.nan, 3])}, r"a/data bin \[1\]: contents not finite"),
    ],
)
def test_what_the_reader_refuses(tmp_path: Path, objects: dict[str, Any], message: str) -> None:
    path = write_file(tmp_path / "t.root", **objects)
    with pytest.raises(InputError, match=message) as caught:
        read_templates(path)
    assert all(problem.where.startswith(str(path)) for problem in caught.value.problems)


def put(place: str, value: Any) -> Callable[[dict[str, Any]], None]:
    """A change of the description: put("components.0.role", "x"); the value None takes the key away."""

    def change(meta: Any) -> None:
        *way, last = place.split(".")
        for step in way:
            meta = meta[int(step) if step.isdigit() else step]
        if value is None:
            del meta[last]
        else:
            meta[last] = value

    return change


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (
            put("version", "2.0"),
            r"meta: unknown version of the template file \(got '2.0', allowed 1.x\)\. Read it with",
        ),
        (put("version", 1), r"unknown version of the template file \(got 1, "),
        (put("version", None), "unknown version of the template file"),
        (put("format", "histograms"), r"not the description of a template file \(got format 'histograms'"),
        (put("components", None), r"meta\.components: field required"),
        (put("components.0.role", None), r"meta\.components\[0\]\.role: field required"),
        (put("components.0.role", 7), r"meta\.components\[0\]\.role: input should be a valid string \(got 7\)"),
        (put("components.0.role", "main"), r"meta: component s: unknown role \(got 'main', allowed signal"),
        (put("components.0.scales_with", ["Q"]), r"component s: unknown parameter \(got 'Q', allowed R\)"),
        (put("components.0.name", "../s"), r"not a name for a component \(got '../s'"),
        (put("categories.0.observables.0.edges", [0, 2, 1]), r"observable x: edges must increase \(got 2 before 1\)"),
        (put("categories.0.observables.0.edges", "01"), r"observables\[0\]\.edges: input should be a valid array"),
        (put("categories.0.observables.0.edges", [0, float("nan")]), r"edges\[1\]: input should be a finite number"),
        (put("parameters.0.injected", -1), r"parameter R: injected value must be positive and finite \(got -1"),
        (
            put("nuisances.0.constraint", "flat"),
            r"nuisances\[0\]\.constraint: input should be 'unit Gaussian' \(got 'flat'",
        ),
    ],
)
def test_what_the_description_must_hold(tmp_path: Path, change: Callable[[Any], None], message: str) -> None:
    path = write_file(tmp_path / "t.root", change)
    with pytest.raises(InputError, match=message) as caught:
        read_templates(path)
    assert all(problem.where.startswith(str(path)) for problem in caught.value.problems)


def test_a_higher_minor_version_and_unknown_keys_are_read(tmp_path: Path) -> None:
    def change(meta: dict[str, Any]) -> None:
        meta |= {"version": "1.7", "novelty": {"a": 1}}
        meta["components"][0]["colour"] = "red"

    assert read_templates(write_file(tmp_path / "t.root", change)).components[0].name == "s"


def test_all_problems_at_once(tmp_path: Path) -> None:
    wrong = {
        "a__s__plus__n": plain([1, 2, np.nan]),
        "a__s__plus__m": plain([1, 2, 3]),
        "a__data": plain([-1, 0.5, 2], flow=1),
    }
    with pytest.raises(InputError) as caught:
        read_templates(write_file(tmp_path / "t.root", **wrong))
    assert len(caught.value.problems) == 4


def test_a_flood_of_problems_is_cut(tmp_path: Path) -> None:
    extra = {f"b{number}__s__nominal": weighted([1, 2, 3]) for number in range(SHOWN_PROBLEMS + 5)}
    with pytest.raises(InputError) as caught:
        read_templates(write_file(tmp_path / "t.root", **extra))
    assert len(caught.value.problems) == SHOWN_PROBLEMS + 1
    assert str(caught.value).endswith("and 5 more problems of this file")


def test_missing_file_folder_and_text(tmp_path: Path) -> None:
    (tmp_path / "text.root").write_text("R(D) = 0.3\n")
    (tmp_path / "empty.root").write_bytes(b"")
    for name, message in {
        "none.root": r"none\.root: cannot be read: no such file or directory",
        "": "cannot be read: is a directory",
        "text.root": r"text\.root: not a ROOT file\. Give a file that ROOT, uproot or semitau wrote",
        "empty.root": r"empty\.root: not a ROOT file",
    }.items():
        with pytest.raises(InputError, match=message):
            read_templates(tmp_path / name)


@pytest.mark.parametrize("kept", [0.999, 0.9, 0.5, 0.1, 0.01, 0.001])
def test_truncated(tmp_path: Path, kept: float) -> None:
    path = tmp_path / "t.root"
    write_templates(sample(), path)
    whole = path.read_bytes()
    path.write_bytes(whole[: max(int(len(whole) * kept), 4)])
    with pytest.raises(InputError, match="the ROOT file is truncated"):
        read_templates(path)


def test_damaged_anywhere_never_a_traceback(tmp_path: Path) -> None:
    """300 files with three random bytes changed: read as before or with other numbers, or refused as input."""
    path = tmp_path / "t.root"
    write_templates(sample(), path)
    whole = path.read_bytes()
    random = np.random.default_rng(int(os.environ.get("SEMITAU_TEST_SEED", "1")))
    refused = 0
    for _ in range(300):
        damaged = bytearray(whole)
        for place in random.integers(len(whole), size=3):
            damaged[place] = random.integers(256)
        path.write_bytes(damaged)
        try:
            read_templates(path)
        except InputError:
            refused += 1
    assert refused > 100


def test_a_colon_in_the_name(tmp_path: Path) -> None:
    write_templates(sample(), tmp_path / "a:b.root")
    assert_same(read_templates(tmp_path / "a:b.root"), sample())


# ---- writing ----


def test_disk_full_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write_templates(sample(), tmp_path / "t.root")

    def refuse(descriptor: int) -> None:
        raise OSError(errno.ENOSPC, os.strerror(errno.ENOSPC))

    monkeypatch.setattr(os, "fsync", refuse)
    with pytest.raises(RunError, match=r"t\.root: cannot write: no space left on device\. Free some space"):
        write_templates(sample().with_data({}), tmp_path / "t.root")
    assert_same(read_templates(tmp_path / "t.root"), sample())
    assert [path.name for path in tmp_path.iterdir()] == ["t.root"]


def test_ctrl_c_leaves_the_old_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    write_templates(sample(), tmp_path / "t.root")

    def interrupt(*_: object) -> None:
        raise KeyboardInterrupt

    for name in ("fsync", "replace"):
        with monkeypatch.context() as patch:
            patch.setattr(os, name, interrupt)
            with pytest.raises(KeyboardInterrupt):
                write_templates(sample().with_data({}), tmp_path / "t.root")
        assert_same(read_templates(tmp_path / "t.root"), sample())
        assert [path.name for path in tmp_path.iterdir()] == ["t.root"]


@pytest.mark.parametrize("value", [float("nan"), {1, 2}, np.float64(1.0).reshape(1)])
def test_provenance_is_plain_json(tmp_path: Path, value: object) -> None:
    base = sample()
    parts = base.categories, base.components, base.parameters, base.nuisances, base.templates, base.data
    with pytest.raises(InputError, match="the provenance cannot be stored"):
        write_templates(TemplateSet(*parts, {"value": value}), tmp_path / "t.root")
    assert not list(tmp_path.iterdir())


def test_writer_and_reader_agree_on_the_version() -> None:
    assert template_meta.describe(sample()).startswith('{"format": "semitau templates", "version": "1.0"')


# ---- data files ----


def data_file(path: Path, **histograms: Any) -> Path:
    with uproot.recreate(path) as file:
        file["something_else"] = "ignored"
        for name, histogram in histograms.items():
            file[name.replace("__", "/")] = histogram
    return path


@pytest.fixture(scope="module")
def simple(tmp_path_factory: pytest.TempPathFactory) -> TemplateSet:
    return read_templates(write_file(tmp_path_factory.mktemp("simple") / "t.root"))


def test_data(tmp_path: Path, simple: TemplateSet) -> None:
    data = read_data(data_file(tmp_path / "d.root", a__data=plain([3, 0, 12]), b__data=plain([1])), simple)
    assert {name: counts.tolist() for name, counts in data.items()} == {"a": [3, 0, 12]}
    assert simple.with_data(data).data["a"].sum() == 15


def test_data_of_a_template_file(tmp_path: Path) -> None:
    full = sample().with_data({category.name: np.full(category.shape, 2.0) for category in sample().categories})
    write_templates(full, tmp_path / "t.root")
    assert_same(sample().with_data(read_data(tmp_path / "t.root", sample())), full)


@pytest.mark.parametrize(
    ("objects", "message"),
    [
        ({}, r"a/data: no data for this category\. The file holds: no histogram"),
        ({"b__data": plain([1.0])}, r"a/data: no data for this category\. The file holds: b/data"),
        ({"a__data": plain([1, 2.5, 0.5])}, r"a/data bin \[1\] and 1 more: not a whole number of events \(got 2.5\)"),
        ({"a__data": plain([1, 2, -1])}, r"a/data bin \[2\]: negative count \(got -1\)"),
        ({"a__data": plain([1, np.nan, 0])}, r"a/data bin \[1\]: contents not finite \(got nan\)"),
        ({"a__data": plain([1, 2, 3], flow=4)}, r"a/data: data outside the axes \(got 4 events .*Cut on the range"),
        ({"a__data": plain([1, 2, 3], high=0.6)}, r"a/data: edges of x differ from the description"),
        ({"a__data": TWO_AXES}, r"a/data: wrong number of axes \(got 2, allowed 1\)"),
    ],
)
def test_data_refused(tmp_path: Path, simple: TemplateSet, objects: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        read_data(data_file(tmp_path / "d.root", **objects), simple)


def test_an_expected_set_need_not_be_whole(tmp_path: Path, simple: TemplateSet) -> None:
    path = data_file(tmp_path / "d.root", a__data=plain([1, 2.5, 0.5]))
    assert read_data(path, simple, whole_counts=False)["a"].tolist() == [1, 2.5, 0.5]


def test_a_large_file_is_written_and_read_in_seconds(tmp_path: Path) -> None:
    """Not a benchmark: it only catches a cost that grows with the square of the number of histograms."""
    base = sample()
    numbers = np.ones((3, 2, 3))
    nuisances = tuple(type(base.nuisances[0])(f"n{i}", "", "") for i in range(100))
    sides = {nuisance.name: numbers for nuisance in nuisances}
    templates = {("three", name): Template(numbers, numbers, sides, sides) for name in ("signal", "light")}
    many = TemplateSet(base.categories, base.components, base.parameters, nuisances, templates)
    write_templates(many, tmp_path / "t.root")
    assert_same(read_templates(tmp_path / "t.root"), many)


if __name__ == "__main__":  # makes the stored sample; never again for this version
    write_templates(sample(), sys.argv[1])
