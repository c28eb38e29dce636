"""Histograms that ROOT itself wrote (package scikit-hep-testdata) are read as they are, and junk is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
import skhep_testdata
import uproot
from semitau.core.errors import InputError
from semitau.core.root_files import open_root, root_histogram

# Each with a histogram that ROOT filled; the reference is ROOT's own bookkeeping beside the bins.
ROOT_WROTE = [
    ("uproot-hepdata-example.root", "hpx"),
    ("uproot-hepdata-example.root", "hpxpy"),
    ("uproot-histograms.root", "one"),
    ("uproot-histograms.root", "three"),
    ("uproot-issue66.root", "E_{dep} in keV - final response"),
]


@pytest.mark.parametrize(("file", "name"), ROOT_WROTE)
def test_bins_agree_with_roots_own_sums(file: str, name: str) -> None:
    path = skhep_testdata.data_path(file)
    histogram = root_histogram(path, name)
    with uproot.open(path) as directory:
        stored = directory[name]
        entries, inside, moment = (stored.member(member) for member in ("fEntries", "fTsumw", "fTsumwx"))
        width = stored.axis(0).width if hasattr(stored.axis(0), "width") else np.diff(histogram.edges[0]).max()
    assert histogram.contents.sum() == pytest.approx(inside, rel=1e-6)  # bins may be float32
    assert histogram.contents.sum() + histogram.outside == pytest.approx(entries, rel=1e-6)
    centres = (histogram.edges[0][1:] + histogram.edges[0][:-1]) / 2
    along_x = histogram.contents.reshape(len(centres), -1).sum(axis=1)
    # ROOT sums the unbinned x: each is at most half a bin from its centre.
    assert abs((along_x * centres).sum() - moment) <= width / 2 * max(inside, 1)


def test_two_axes_keep_their_order() -> None:
    """ROOT runs through x fastest, numpy through the last axis: compared with uproot's own conversion."""
    path = skhep_testdata.data_path("uproot-hepdata-example.root")
    histogram = root_histogram(path, "hpxpy")
    with uproot.open(path) as directory:
        contents, x, y = directory["hpxpy"].to_numpy()
    assert np.array_equal(histogram.contents, contents)
    assert np.array_equal(histogram.edges[0], x)
    assert np.array_equal(histogram.edges[1], y)
    assert np.array_equal(histogram.variances, contents), "without squared weights the contents stand for them"
    assert not histogram.weighted


def test_squared_weights_that_root_kept() -> None:
    path = skhep_testdata.data_path("uproot-issue33.root")
    histogram = root_histogram(path, "cutflow")
    with uproot.open(path) as directory:
        squares = np.asarray(directory["cutflow"].member("fSumw2"))
    assert histogram.weighted
    assert np.array_equal(histogram.variances, squares[1:-1])


@pytest.mark.parametrize("shape", [(4,), (4, 3), (4, 3, 2)])
def test_squared_weights_follow_their_bins(tmp_path: Path, shape: tuple[int, ...]) -> None:
    import boost_histogram as bh

    axes = [bh.axis.Regular(bins, 0, bins) for bins in shape]
    filled = bh.Histogram(*axes, storage=bh.storage.Weight())
    random = np.random.default_rng(1)
    points = [random.uniform(0, bins, 500) for bins in shape]
    weights = random.exponential(size=500)
    filled.fill(*points, weight=weights)
    with uproot.recreate(tmp_path / "h.root") as file:
        file["h"] = filled
    histogram = root_histogram(tmp_path / "h.root", "h")
    ranges = [(0, bins) for bins in shape]
    expected, _ = np.histogramdd(np.stack(points, axis=-1), shape, ranges, weights=weights)
    squares, _ = np.histogramdd(np.stack(points, axis=-1), shape, ranges, weights=weights**2)
    np.testing.assert_allclose(histogram.contents, expected, rtol=1e-12)
    np.testing.assert_allclose(histogram.variances, squares, rtol=1e-12)


def test_not_a_histogram() -> None:
    path = skhep_testdata.data_path("uproot-hepdata-example.root")
    with pytest.raises(InputError, match=r"hprof: not a plain histogram \(got TProfile, allowed TH1, TH2 or TH3"):
        root_histogram(path, "hprof")
    with pytest.raises(InputError, match=r"no such object in the file \(got 'hpxy'\)\. Did you mean 'hpxpy'\?"):
        root_histogram(path, "hpxy")
    with pytest.raises(InputError, match=r"no such object .*The file holds: one, two, three"):
        root_histogram(skhep_testdata.data_path("uproot-histograms.root"), "energy spectrum")


def test_a_file_of_trees_is_no_template_file() -> None:
    from semitau.core.template_file import read_templates

    with pytest.raises(InputError, match="not a template file: it holds no 'meta'"):
        read_templates(skhep_testdata.data_path("uproot-Zmumu.root"))


def test_truncated_foreign_file(tmp_path: Path) -> None:
    whole = Path(skhep_testdata.data_path("uproot-hepdata-example.root")).read_bytes()
    for kept in (5, 100, 1000, 100_000, len(whole) - 1):
        (tmp_path / "t.root").write_bytes(whole[:kept])
        with pytest.raises(InputError, match="the ROOT file is truncated"):
            root_histogram(tmp_path / "t.root", "hpx")


def test_whatever_the_body_meets_in_the_file_is_input(tmp_path: Path) -> None:
    def read() -> None:
        with open_root(skhep_testdata.data_path("uproot-histograms.root")) as directory:
            directory["none"]

    with pytest.raises(InputError, match="truncated, damaged, or of a kind that cannot be read"):
        read()


def test_something_that_is_no_path() -> None:
    with pytest.raises(InputError, match=r"not a path \(got int"), open_root(3):  # type: ignore[arg-type]
        pass
