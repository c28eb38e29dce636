"""Event files read back with uproot: the events of the templates, whole or not at all. Nothing here is statistical."""

from __future__ import annotations

import json
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import uproot
import vector
from semitau.core.errors import InputError, RunError
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.event_files import generate

from .marlow_study import study


def small() -> StudyConfig:
    tables = study().model_dump(by_alias=True, exclude_none=True)
    modes = [mode | {"events": 1000} for mode in tables["mode"]]
    backgrounds = [background | {"events": 500} for background in tables["background"]]
    return study(mode=modes, background=backgrounds)


@cache
def written(folder: Path, format: str = "ttree") -> tuple[dict[str, int], dict[str, dict[str, np.ndarray]], Any]:
    path = folder / f"{format}.root"
    entries = generate(small(), path, format, workers=2)
    with uproot.open(path) as file:
        trees = {name: _columns(file[name]) for name in ("truth", "candidates")}
        return entries, trees, json.loads(str(file["meta"]))


def _columns(tree: Any) -> dict[str, np.ndarray]:
    arrays = tree.arrays()
    return {name: np.asarray(arrays[name]) for name in arrays.fields}


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("events")


def test_events_are_those_of_the_templates(folder: Path) -> None:
    """Filled into histograms by numpy, the selected candidates give the nominal templates and their variances."""
    entries, trees, meta = written(folder)
    candidates = trees["candidates"]
    assert entries == {name: len(columns["event"]) for name, columns in trees.items()}
    templates = build_templates(small(), workers=1).templates
    for (name, component), template in templates.templates.items():
        category = next(c for c in small().categories if c.name == name)
        code = meta["categories"].index(f"{category.charm} {category.lepton}")
        chosen = (candidates["component"] == meta["components"].index(component)) & (candidates["category"] == code)
        chosen &= candidates["selected"] == 1
        edges = [np.array(axis) for axis in category.axes.values()]
        sample = np.stack([candidates[axis][chosen] for axis in category.axes], axis=-1)
        filled, _ = np.histogramdd(sample, edges, weights=candidates["weight"][chosen])
        assert filled.sum() == pytest.approx(template.nominal.sum(), rel=1e-12)
        # Written as float32, an event on an edge may change its bin; none of these does.
        np.testing.assert_allclose(filled, template.nominal, rtol=1e-9)
        squares, _ = np.histogramdd(sample, edges, weights=candidates["weight"][chosen] ** 2)
        np.testing.assert_allclose(squares, template.variance, rtol=1e-9)


def test_truth_holds_the_decays(folder: Path) -> None:
    """Momenta of a light decay leave a massless neutrino; q² is that of the four-momenta (vector)."""
    _, trees, meta = written(folder)
    truth = trees["truth"]
    channel = meta["channels"].index("B0 -> D*- mu, D*- -> D0 pi-")
    mine = truth["channel"] == channel
    assert mine.sum() > 100
    d, soft, lepton = (
        vector.array({axis: truth[f"{name}_{axis}"][mine].astype(float) for axis in ("px", "py", "pz", "E")})
        for name in ("D", "soft", "lepton")
    )
    parent = vector.obj(px=0.0, py=0.0, pz=0.0, E=5.27972)
    np.testing.assert_allclose((parent - d - soft).mass2, truth["q2"][mine], atol=1e-4)
    np.testing.assert_allclose((parent - d - soft - lepton).mass2, 0.0, atol=1e-4)
    np.testing.assert_array_equal(np.sort(truth["event"][mine]), np.arange(mine.sum()))
    assert not truth["tau_E"][mine].any()


def test_candidates_know_their_decay(folder: Path) -> None:
    """Same channel and number in both trees; the tagged q2 is the true one but for the resolution."""
    _, trees, meta = written(folder)
    channel = meta["channels"].index("B+ -> D0 mu")
    truth, seen = ({k: v[tree["channel"] == channel] for k, v in tree.items()} for tree in trees.values())
    at = np.searchsorted(truth["event"], seen["event"])
    np.testing.assert_array_equal(truth["event"][at], seen["event"])
    good = seen["tag_wrong"] == 0
    assert np.corrcoef(truth["q2"][at][good], seen["q2"][good])[0, 1] > 0.95
    background = trees["candidates"]["channel"] == -1
    assert np.isnan(trees["candidates"]["q2"][background]).all()


def test_both_formats_hold_the_same(folder: Path) -> None:
    for name, columns in written(folder)[1].items():
        other = written(folder, "rntuple")[1][name]
        assert columns.keys() == other.keys()
        for column, values in columns.items():
            np.testing.assert_array_equal(values, other[column], err_msg=f"{name}.{column}")


def test_refuses_what_it_does_not_know(tmp_path: Path) -> None:
    with pytest.raises(
        InputError, match=r"format: no such format of event files \(got 'csv', allowed ttree, rntuple\)"
    ):
        generate(small(), tmp_path / "x.root", "csv")
    with pytest.raises(InputError, match="compression: no such compression"):
        generate(small(), tmp_path / "x.root", compression="none")
    assert not list(tmp_path.iterdir())


def test_failure_leaves_nothing_half_written(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """An interrupt in the middle: the old file stays, the new one vanishes."""
    target = tmp_path / "events.root"
    target.write_bytes(b"old")

    def interrupted(what: str, done: int, total: int | None) -> None:
        if done > 1000:
            raise KeyboardInterrupt

    with pytest.raises(KeyboardInterrupt):
        generate(small(), target, workers=2, report=interrupted)
    assert target.read_bytes() == b"old"
    assert list(tmp_path.iterdir()) == [target]


def test_no_place_to_write(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("")
    with pytest.raises(RunError, match="cannot write"):
        generate(small(), tmp_path / "file" / "events.root")
