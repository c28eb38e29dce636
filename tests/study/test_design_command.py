"""`semitau design`: what it prints and writes, and what it refuses."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import pytest
from semitau.study.command_line import main

Capture = pytest.CaptureFixture[str]
WriteStudy = Callable[..., Path]


def test_document_pictures_and_words(mini: WriteStudy, capsys: Capture, tmp_path: Path) -> None:
    """The JSON is the part of results.json; the same run twice gives the same; the words name the cuts."""
    path, folder = mini(), tmp_path / "made"
    assert main(["design", str(path), "--quiet", "--json", "--output", str(folder)]) == 0
    told: Any = json.loads(capsys.readouterr().out)
    assert told["proposed"]["merit"] <= told["start"]["merit"]
    assert {curve["cut"] for curve in told["curves"]} == {"e_res.max", "p_lepton.min"}
    assert (folder / "design.toml").read_text() == told["snippet"]
    names = {f"design_{name}.{kind}" for name in ("cuts", "binnings", "axes") for kind in ("svg", "png")}
    assert {file.name for file in folder.iterdir()} == names | {"design.toml"}
    assert main(["design", str(path), "--workers", "1"]) == 0
    text = capsys.readouterr().out
    assert "residual energy below" in text
    assert "onfirmed by independent events" in text
    assert told["snippet"].splitlines()[1] in text


def test_without_a_table_the_binning_alone_changes(mini: WriteStudy, capsys: Capture) -> None:
    path = mini()
    text = path.read_text()
    path.write_text(text[: text.index("[toys]")])
    assert main(["design", str(path), "--quiet", "--json"]) == 0
    told: Any = json.loads(capsys.readouterr().out)
    assert told["curves"] == []
    assert told["mergings"]


def test_ratios_that_cannot_be_told(mini: WriteStudy, capsys: Capture) -> None:
    """A ratio that is held is none to make small."""
    path = mini({"[fit]\n": "[fit]\nfixed = { R_D = 0.3 }\n"})
    text = path.read_text()
    # other tables name the ratio as well
    path.write_text(text[: text.index("[toys]")] + '[design]\nminimise = "R_D"\n')
    assert main(["design", str(path), "--quiet"]) == 2
    assert (
        'design.minimise: names no ratio that is fitted (got "R_D", allowed mean, area, R_Dst)'
        in capsys.readouterr().err
    )
