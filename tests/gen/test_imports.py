"""Templates and data from ROOT files of other simulations: merged by hand with numpy, and every way to be wrong."""

from __future__ import annotations

from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import uproot
from semitau.core.errors import InputError
from semitau.core.templates import Category, Component, Observable, ScaleParameter, Template, TemplateSet
from semitau.gen.study_file.imports import Imports
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.imported import imported_data, poisson_of_imports, with_imports

MARLOW = (Path(__file__).parents[2] / "configs" / "marlow_small.toml").read_text()
FINE = np.linspace(-2.0, 10.0, 25)
EDGES = (-2.0, 0.0, 1.5, 4.0, 9.0)
CATEGORY = Category("D0_e", "D⁰ e", (Observable("mm2", "missing mass squared", "GeV²", EDGES),))


def own() -> TemplateSet:
    return TemplateSet(
        categories=(CATEGORY,),
        components=(Component("signal", "signal", "signal", ("R_D",)),),
        parameters=(ScaleParameter("R_D", "R(D)", "ratio", 0.3),),
        nuisances=(),
        templates={("D0_e", "signal"): Template(np.full(4, 10.0), np.ones(4))},
    )


class Beside:
    """As much of a study as an import looks at."""

    def __init__(self, folder: Path, document: dict[str, Any]) -> None:
        self.folder, self.imports = folder, Imports.model_validate(document)

    def beside(self, file: str) -> Path:
        return self.folder / file


def study(folder: Path, **component: Any) -> StudyConfig:
    given = {"component": "other", "file": "sim.root", "histogram": "{category}/mm2", "flow": "drop", **component}
    if "tree" in component:
        del given["histogram"]
    return Beside(folder, {"component": [given]})  # type: ignore[return-value]


def weighted_histogram(seed: int = 1, edges: np.ndarray = FINE) -> tuple[Any, np.ndarray, np.ndarray]:
    """A histogram with squared weights, flow included, as ROOT itself keeps it."""
    rng = np.random.default_rng(seed)
    values, weights = rng.normal(2.0, 3.0, 4000), rng.uniform(0.5, 1.5, 4000)
    everywhere = np.concatenate([[-np.inf], edges, [np.inf]])
    place = np.searchsorted(edges, values, side="right")
    contents, squares = (np.bincount(place, w, edges.size + 1) for w in (weights, weights**2))
    assert everywhere.size - 1 == contents.size
    return written(contents, squares, edges, 4000.0), contents, squares


def written(contents: np.ndarray, squares: np.ndarray | None, edges: np.ndarray, entries: float) -> Any:
    axis = uproot.writing.identify.to_TAxis("xaxis", "", edges.size - 1, edges[0], edges[-1], fXbins=edges)
    return uproot.writing.identify.to_TH1x(
        "mm2", "", contents, entries, float(contents.sum()), float((contents if squares is None else squares).sum()),
        0.0, 0.0, np.zeros(0) if squares is None else squares, axis,
    )  # fmt: skip


@pytest.fixture
def folder(tmp_path: Path) -> Path:
    histogram, contents, _ = weighted_histogram()
    up, _, _ = weighted_histogram(2)
    with uproot.recreate(tmp_path / "sim.root") as file:
        file["D0_e/mm2"] = histogram
        file["D0_e/mm2_up"] = up
        file["D0_e/data"] = written(np.round(contents), None, FINE, float(np.round(contents).sum()))
        rng = np.random.default_rng(3)
        columns = {"m2": rng.normal(2, 3, 500), "w": rng.uniform(0, 2, 500), "w_up": rng.uniform(0, 2, 500)}
        file["events"] = columns
    return tmp_path


@pytest.mark.parametrize("flow", ["drop", "merge"])
def test_histogram_is_rebinned_with_its_flow(folder: Path, flow: str) -> None:
    """Against sums over slices by hand."""
    _, contents, squares = weighted_histogram()
    template = with_imports(study(folder, flow=flow, scale=0.5), own()).templates["D0_e", "other"]
    starts = [int(np.flatnonzero(np.isclose(FINE, edge))[0]) + 1 for edge in EDGES]
    for array, factor, found in ((contents, 0.5, template.nominal), (squares, 0.25, template.variance)):
        expected = np.array([array[a:b].sum() for a, b in pairwise(starts)])
        if flow == "merge":
            expected[0] += array[: starts[0]].sum()
            expected[-1] += array[starts[-1] :].sum()
        np.testing.assert_allclose(found, factor * expected)


def test_tree_is_filled(folder: Path) -> None:
    """Against numpy.histogram."""
    with uproot.open(folder / "sim.root") as file:
        read = file["events"].arrays(library="np")
    sides = [{"name": "shape", "plus": "w_up", "mirror": True}]
    found = with_imports(study(folder, tree="events", columns={"mm2": "m2"}, weight="w", variations=sides), own())
    template = found.templates["D0_e", "other"]
    nominal, _ = np.histogram(read["m2"], EDGES, weights=read["w"])
    squares, _ = np.histogram(read["m2"], EDGES, weights=read["w"] ** 2)
    up, _ = np.histogram(read["m2"], EDGES, weights=read["w_up"])
    np.testing.assert_allclose(template.nominal, nominal)
    np.testing.assert_allclose(template.variance, squares)
    np.testing.assert_allclose(template.plus["shape"], up)
    np.testing.assert_allclose(template.minus["shape"], 2 * nominal - up)
    assert found.nuisances[0].group == "imported"


def test_it_joins_the_study(folder: Path) -> None:
    found = with_imports(study(folder, scales_with=["R_D"], **{"yield": {"uncertainty": 0.2}}), own())
    assert found.components[-1].scales_with == ("R_D", "yield_other")
    assert found.parameters[-1].constraint == 0.2
    assert found.templates["D0_e", "signal"].nominal.tolist() == [10.0] * 4
    drawn = poisson_of_imports(study(folder), found.templates, 1)["D0_e"]
    # Poisson: 5 σ in four bins.
    assert np.all(np.abs(drawn - found.templates["D0_e", "other"].nominal) < 5 * np.sqrt(drawn + 1))


def test_data(folder: Path) -> None:
    source = {"file": "sim.root", "histogram": "{category}/data", "flow": "drop"}
    counts = imported_data(Beside(folder, {"data": source}), own())["D0_e"]  # type: ignore[arg-type]
    assert np.all(counts == np.round(counts))
    with pytest.raises(InputError, match=r"the count is not whole.*counted, not weighted"):
        imported_data(Beside(folder, {"data": {**source, "histogram": "{category}/mm2"}}), own())  # type: ignore[arg-type]
    negative = np.array([0.0, 3.0, -1.0] + [2.0] * 23)
    with uproot.update(folder / "sim.root") as file:
        file["D0_e/minus"] = written(negative, None, FINE, 10.0)
    with pytest.raises(InputError, match="negative count"):
        imported_data(Beside(folder, {"data": {**source, "histogram": "{category}/minus"}}), own())  # type: ignore[arg-type]


def broken_histograms() -> dict[str, Any]:
    _, contents, squares = weighted_histogram()
    uneven = np.linspace(-2.0, 10.0, 24)
    negative = contents.copy()
    negative[4] = -3000.0
    many = squares.copy()
    many[4] = 9e6
    infinite = contents.copy()
    infinite[4] = np.nan
    return {
        "edges": written(contents[:-1], squares[:-1], uneven, 4000.0),
        "negative": written(negative, many, FINE, 4000.0),
        "nan": written(infinite, squares, FINE, 4000.0),
        "unsquared": written(contents, None, FINE, 4000.0),
        "twice": written(2.0 * contents, squares, FINE, 4000.0),
        "empty": written(np.zeros(26), np.zeros(26), FINE, 0.0),
    }


@pytest.mark.parametrize(
    ("name", "message"),
    [
        ("edges", r"its axis for mm2 has no edge where category D0_e has one .*with 0, 1.5"),
        ("negative", r'has a negative bin .*negative = "clear"'),
        ("nan", "contents not finite"),
        ("unsquared", "has weights but not their squares"),
        ("twice", r"more effective events than fillings: its weights count twice"),
        ("empty", "has no events within the axes"),
        ("nowhere", r"no such object in the file .*holds"),
    ],
)
def test_bad_histograms(tmp_path: Path, name: str, message: str) -> None:
    with uproot.recreate(tmp_path / "sim.root") as file:
        for key, histogram in broken_histograms().items():
            file[key] = histogram
    with pytest.raises(InputError, match=message) as caught:
        with_imports(study(tmp_path, histogram=name), own())
    assert "import of other" in str(caught.value)


def test_flow_is_not_lost_silently(folder: Path) -> None:
    with pytest.raises(InputError, match=r'has events outside the axes.*flow = "drop"'):
        with_imports(study(folder, flow="refuse"), own())


def test_unknown_parameters(folder: Path) -> None:
    with pytest.raises(InputError, match=r"no such parameter .*'R_X'"):
        with_imports(study(folder, scales_with=["R_X"]), own())


ENTRY = """
[[import.component]]
component = "cascade"
file = "sim.root"
histogram = "{category}/mm2"
"""


@pytest.mark.parametrize(
    ("entry", "message"),
    [
        (ENTRY.replace("cascade", "D_tau"), r"import.component.*: names a component that there is already"),
        (ENTRY + ENTRY.replace("cascade", "again"), r"is counted twice: cascade takes it"),
        (ENTRY + 'categories = ["nowhere"]', r"names no category"),
        (ENTRY + 'tree = "events"', r"has no source \(allowed one of histogram and tree"),
        (ENTRY + 'weight = "w"', r"names weights without a tree"),
        (ENTRY + 'variations = [{ name = "v", plus = "p" }]', r"wrong number of sides .*mirror = true"),
        (ENTRY.replace("sim.root", "gone.root"), r"there is no such file"),
        (ENTRY + "scale = 0", r"scale"),
    ],
)
def test_study_files_that_are_wrong(folder: Path, entry: str, message: str) -> None:
    (folder / "s.toml").write_text(MARLOW + entry)
    with pytest.raises(InputError, match=message):
        read_study(folder / "s.toml")


def test_data_without_a_source(folder: Path) -> None:
    (folder / "s.toml").write_text(MARLOW.replace('data = "pseudo"', 'data = "import"'))
    with pytest.raises(InputError, match=r"fit.data: needs \[import.data\]"):
        read_study(folder / "s.toml")
