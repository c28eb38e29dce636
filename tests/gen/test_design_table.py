"""[design]: what it must say, and what is said of mistakes."""

from __future__ import annotations

from pathlib import Path

import pytest
from semitau.core.errors import InputError
from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.reader import read_study

from tests.gen.small_study import TEXT


def read(tmp_path: Path, text: str) -> DesignSection:
    path = tmp_path / "study.toml"
    path.write_text(text)
    design = read_study(path).design
    assert design is not None
    return design


def test_sound(tmp_path: Path) -> None:
    design = read(
        tmp_path,
        TEXT + '[design]\nevents = 1e5\n[design.cuts]\np_lepton = { min = ["200 MeV", 0.5], steps = 4 }\n'
        "q2 = { min = [3.0, 6.0], by_category = true }\n[design.axes]\nq2 = { min = 3.0, max = 12.0, bins = 9 }\n",
    )
    assert design.cuts["p_lepton"].min == (0.2, 0.5)
    assert design.cuts["q2"].by_category
    assert len(design.axes["q2"].edges) == 10
    assert design.events == 100_000


@pytest.mark.parametrize(
    ("lines", "message"),
    [
        ("[design]\nminimize = 'mean'", r'minimize: unknown key .*Did you mean "minimise"'),
        ("[design.cuts]\np_lepton = { steps = 4 }", "scans nothing"),
        ("[design.cuts]\np_lepton = { min = [0.5, 0.3] }", r"min is no range \(got 0.5 to 0.3"),
        ("[design.cuts]\nq2 = { min = [3.0, 6.0], max = [5.0, 9.0] }", "could remove everything"),
        ("[design.cuts]\np_leptn = { min = [0.2, 0.5] }", r'is no observable .*Did you mean "p_lepton"'),
        ("[design.cuts]\ne_res = { max = [0.5, 1.5] }", r"scans a cut that the study does not make.*e_res a max"),
        ("[design.cuts]\nq2 = { min = [4.5, 6.0] }", "leaves out the cut of the study in D0_e"),
        ("[design.cuts]\ndelta_m = { min = [0.13, 0.14] }", "it decides which candidates are a D"),
        ("[design.axes]\ndelta_m = [0.13, 0.15, 0.16]", "cannot be an axis of all candidates"),
        ("[design.axes]\nq2 = [5.0, 4.0]", "edges must increase"),
        ("[design]\npoints = 0", "points"),
        ("[design]\nmost_axes = 4", "most_axes"),
        ("[fit]\napart = ['R0']\n[design]", "does not know shapes and rates apart"),
        (
            "[quadratic]\ncoefficients = ['SR']\n[fit]\ncoefficients = ['SR']\n[design]",
            "does not know templates that follow coefficients",
        ),
    ],
)
def test_mistakes(tmp_path: Path, lines: str, message: str) -> None:
    with pytest.raises(InputError, match=message):
        read(tmp_path, f"{TEXT}{lines}\n")


def test_categories_that_begin_apart(tmp_path: Path) -> None:
    text = TEXT.replace(
        '[[category]]\ncharm = ["D*+"]\n',
        '[[category]]\ncharm = ["D*+"]\nselection = { q2 = { min = 5.0 } }\n',
    )
    scan = "[design.cuts]\nq2 = { min = [3.0, 6.0] }\n"
    with pytest.raises(InputError, match=r"begins at different values in different categories.*by_category = true"):
        read(tmp_path, text + scan)
    assert read(tmp_path, text + scan.replace(" }", ", by_category = true }")).cuts["q2"].by_category


def test_imports_are_refused(tmp_path: Path) -> None:
    (tmp_path / "other.root").write_bytes(b"")
    imported = (
        '[[import.component]]\ncomponent = "other"\nfile = "other.root"\nhistogram = "{category}/x"\nyield = "free"\n'
    )
    with pytest.raises(InputError, match="cannot cut and bin imported components anew"):
        read(tmp_path, f"{TEXT}{imported}[design]\n")
