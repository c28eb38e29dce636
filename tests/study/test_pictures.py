"""Pictures: what they show agrees with the numbers, and the same numbers give the same bytes."""

from __future__ import annotations

import xml.etree.ElementTree as ElementTree
from pathlib import Path

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import poisson
from semitau.core.errors import RunError
from semitau.study.pictures import draw_pictures
from semitau.study.pictures.correlations import MOST, shown_parameters
from semitau.study.pictures.projections import poisson_interval
from semitau.study.pictures.sheet import Picture
from semitau.study.pictures.style import RATIO_HUES, component_colours
from semitau.study.results import Results


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return tmp_path_factory.mktemp("pictures")


@pytest.fixture(scope="module")
def few(results: Results) -> Results:
    """One category is enough here."""
    keep = results.categories[:1]
    shown = tuple(p for p in results.projections if p.category == keep[0].name)
    return results.model_copy(update={"categories": keep, "projections": shown})


@pytest.fixture(scope="module")
def pictures(few: Results, folder: Path) -> tuple[Picture, ...]:
    return draw_pictures(few, folder)


def test_all_are_there_in_both_formats(pictures: tuple[Picture, ...], folder: Path) -> None:
    names = ["budget", "toy_pulls", "linearity", "signal_D0_e", "projection_D0_e", "correlations"]
    assert [picture.name for picture in pictures] == names
    for name in names:
        ElementTree.fromstring((folder / f"{name}.svg").read_text())
        assert (folder / f"{name}.png").read_bytes().startswith(b"\x89PNG")
    assert sorted(path.name for path in folder.iterdir()) == sorted(
        f"{n}.{kind}" for n in names for kind in ("png", "svg")
    )


def test_same_results_same_bytes(pictures: tuple[Picture, ...], few: Results, folder: Path, tmp_path: Path) -> None:
    draw_pictures(few, tmp_path)
    for picture in pictures:
        for kind in ("svg", "png"):
            file = f"{picture.name}.{kind}"
            assert (tmp_path / file).read_bytes() == (folder / file).read_bytes(), file


def test_only_what_changed_is_drawn_again(few: Results, tmp_path: Path) -> None:
    """Another value in the budget touches the budget's picture alone; damaged files are drawn again, and so are all if
    the user says so."""
    draw_pictures(few, tmp_path)
    first = {path.name: path.stat().st_mtime_ns for path in tmp_path.iterdir()}

    def drawn(results: Results, again: bool = False) -> set[str]:
        before = {path.name: path.stat().st_mtime_ns for path in tmp_path.iterdir()}
        draw_pictures(results, tmp_path, again=again)
        return {path.stem for path in tmp_path.iterdir() if before.get(path.name) != path.stat().st_mtime_ns}

    assert drawn(few) == set()
    row = few.budget[0].rows[0]
    rows = (row.model_copy(update={"error": 1.01 * row.error}), *few.budget[0].rows[1:])
    other = few.model_copy(update={"budget": (few.budget[0].model_copy(update={"rows": rows}), *few.budget[1:])})
    assert drawn(other) == {"budget"}
    assert drawn(few) == {"budget"}
    whole = (tmp_path / "linearity.svg").read_bytes()
    (tmp_path / "linearity.svg").write_bytes(whole[: len(whole) // 2])
    (tmp_path / "toy_pulls.png").unlink()
    assert drawn(few) == {"linearity", "toy_pulls"}
    assert (tmp_path / "linearity.svg").read_bytes() == whole
    assert drawn(few, again=True) == {Path(name).stem for name in first}


def test_a_study_without_toys_has_fewer_pictures(few: Results, tmp_path: Path) -> None:
    bare = few.model_copy(update={"toys": None, "linearity": (), "budget": (), "projections": ()})
    assert [picture.name for picture in draw_pictures(bare, tmp_path)] == ["correlations"]


def test_a_folder_that_may_not_be_written(few: Results, tmp_path: Path) -> None:
    (tmp_path / "pictures").write_text("a file, not a folder")
    with pytest.raises(RunError, match="cannot write"):
        draw_pictures(few, tmp_path / "pictures")
    assert (tmp_path / "pictures").read_text() == "a file, not a folder"


@pytest.mark.parametrize("count", [0, 1, 3, 10, 250])
def test_error_bars_are_central_poisson_intervals(count: int) -> None:
    """Definition (Garwood, Biometrika 28 (1936) 437): at each end the count has a tail probability of 15.87 %."""
    below, above = poisson_interval(np.array([float(count)]))
    tail = 0.15865525393145707
    upper = brentq(lambda mean: poisson.cdf(count, mean) - tail, 1e-9, count + 20 * (count + 1) ** 0.5)
    assert count + above[0] == pytest.approx(upper, rel=1e-9)
    if count:
        lower = brentq(lambda mean: poisson.sf(count - 1, mean) - tail, 1e-9, count + 1)
        assert count - below[0] == pytest.approx(lower, rel=1e-9)
    else:
        assert below[0] == 0


def test_colours_tell_what_belongs_together(results: Results) -> None:
    colours = component_colours(results.components, ["R_D", "R_Dst"])
    assert colours["D_tau"], colours["Dst_tau"] == RATIO_HUES[:2]
    assert len(set(colours.values())) == len(results.components)


def test_colours_last_for_many_components(results: Results) -> None:
    background = results.components[0]
    many = [background.model_copy(update={"name": f"b{i}"}) for i in range(20)]
    assert len(component_colours(many, [])) == 20


def luminance(colour: str) -> float:
    """Relative luminance of an sRGB colour, WCAG 2.1 (contrast of at least 3 is its rule for graphics)."""
    channels = [int(colour[i : i + 2], 16) / 255 for i in (1, 3, 5)]
    linear = [c / 12.92 if c <= 0.04045 else ((c + 0.055) / 1.055) ** 2.4 for c in channels]
    return 0.2126 * linear[0] + 0.7152 * linear[1] + 0.0722 * linear[2]


def test_signals_stand_out_from_paper() -> None:
    for colour in RATIO_HUES[:2]:
        assert 1.05 / (luminance(colour) + 0.05) > 3


def test_only_the_least_correlated_parameters_are_left_out(results: Results) -> None:
    parameter = results.fit.parameters[-1]
    extra = [parameter.model_copy(update={"name": f"n{i}"}) for i in range(40)]
    size = len(results.fit.parameters) + 40
    matrix = np.eye(size)
    matrix[0, size - 1] = matrix[size - 1, 0] = 0.9
    fit = results.fit.model_copy(
        update={"parameters": (*results.fit.parameters, *extra), "correlation": tuple(map(tuple, matrix.tolist()))}
    )
    shown = shown_parameters(fit)
    assert len(shown) == MOST
    assert shown[:2] == [0, 1]
    assert size - 1 in shown
