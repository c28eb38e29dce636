"""The report of a study that has run, drawn again, and read as people would."""

from __future__ import annotations

import re
import shutil
from html import unescape
from pathlib import Path

import pytest
from semitau.study.command_line import main
from semitau.study.results import read_results


@pytest.fixture(scope="module")
def html(finished: Path) -> str:
    return (finished / "report.html").read_text()


def seen(html: str) -> str:
    """What a reader sees as text: no style, no pictures, no code."""
    for hidden in ("style", "svg", "pre", "code"):
        html = re.sub(rf"<{hidden}[ >].*?</{hidden}>", " ", html, flags=re.S)
    return unescape(re.sub(r"<[^>]*>", " ", html))


def test_numbers_have_true_minus_signs(html: str) -> None:
    text = seen(html)
    assert "−" in text
    # Names and dates (BCL-2021, 2026-12-01) have hyphens between letters or digits; numbers begin after a gap.
    assert re.findall(r"(?:^|[\s(±=])-\d[^\s]*|\d[eE][-+]\d+", text) == []


def test_what_went_in_is_the_study(html: str, finished: Path) -> None:
    results = read_results(finished / "results.json")
    assert results.inputs is not None
    names = "D_tau Dst_tau D_light Dst_light Dss_light Dss_tau continuum combinatorial misidentified"
    assert [part.name for part in results.inputs.components] == names.split()
    assert {part.name for part in results.inputs.categories} == {category.name for category in results.categories}
    assert [part.set for part in results.inputs.form_factors] == ["BCL-2021", "CLN-2021", "IW-1998"]
    acting = {part.name: part.acts_on for part in results.inputs.variations}
    assert set(acting) == {n.name for n in results.nuisances if not n.name.startswith("yield_")}
    # A parameter of B -> D* moves D* alone; the misidentification moves the hadrons taken for leptons alone.
    assert acting["Dst_R0"] == ("B → D* τ ν", "B → D* ℓ ν")
    assert acting["hadrons_as_mu"] == ("misidentified lepton",)
    numbers = {part.key: (part.value, part.unit) for part in results.inputs.numbers}
    # As configs/marlow_small.toml writes them: "22 MeV", "17 deg" is 17 pi / 180, 700e6.
    assert numbers["detector.tag.momentum_resolution"] == ("0.022", "GeV")
    assert numbers["detector.tracks.polar_acceptance"] == ("0.296705972839, 2.61799387799", "rad")
    assert numbers["experiment.b_pairs"] == ("700000000", "")
    assert numbers["detector.lepton_id.mu"][0].startswith("0.1 at 0.5 GeV; 0.5 at 0.7 GeV")
    for words in ("What went in", "detector.tag.momentum_resolution", "q2 ≥ 4 GeV²"):
        assert words in seen(html)


def test_it_is_drawn_again_from_the_results_alone(finished: Path, tmp_path: Path) -> None:
    folder = tmp_path / "copy"
    folder.mkdir()
    shutil.copy(finished / "results.json", folder)
    assert main(["report", str(folder), "--quiet"]) == 0
    assert (folder / "report.html").read_bytes() == (finished / "report.html").read_bytes()
    drawn = {file.name: file.read_bytes() for file in (folder / "pictures").iterdir()}
    assert drawn == {file.name: file.read_bytes() for file in (finished / "pictures").iterdir()}
