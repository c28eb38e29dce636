"""Backgrounds by shape against closed forms, quadrature, and files that ROOT wrote.

Statistical tests draw with a fixed seed, which SEMITAU_TEST_SEED replaces. Each compares a p-value with CHANCE, so each
fails by chance once in 10^5 seeds; there are about thirty.
"""

from __future__ import annotations

import math
import os
from collections.abc import Callable
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import uproot
from numpy.typing import NDArray
from pydantic import TypeAdapter
from scipy import integrate, special, stats
from semitau.core.errors import InputError
from semitau.core.streams import stream_key, uniforms
from semitau.gen.shapes.copula import correlated_uniforms, normal_distribution
from semitau.gen.shapes.density import table
from semitau.gen.shapes.quantile_table import from_sorted, rows
from semitau.gen.shapes.sampler import ShapeSampler
from semitau.gen.study_file.laws import Law
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from skhep_testdata import data_path

from .small_study import TEXT

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
CHANCE = 1e-5
KEY = stream_key(SEED, "test_shapes")
Floats = NDArray[np.float64]
Cdf = Callable[[Floats], Floats]


def law(**keys: Any) -> Any:
    return TypeAdapter(Law).validate_python(keys)


# ── Laws ────────────────────────────────────────────────────────────────────────────────────────────────────────────


def truncated(distribution: Any, low: float, high: float) -> Cdf:
    """Distribution function of a scipy distribution cut to a range."""
    below, inside = distribution.cdf(low), distribution.cdf(high) - distribution.cdf(low)
    return lambda x: (distribution.cdf(x) - below) / inside


def mixture(fraction: float, core: Any, wide: Any, low: float, high: float) -> Cdf:
    def cdf(x: Floats) -> Floats:
        return (1 - fraction) * core.cdf(x) + fraction * wide.cdf(x)

    below, above = cdf(np.array(low)), cdf(np.array(high))
    return lambda x: (cdf(x) - below) / (above - below)


def end_point(power: float, curvature: float, end: float, low: float) -> Cdf:
    """With y = 1 - x²/end² the law x y^power exp(-curvature y) dx is that of a gamma distribution in y."""
    gamma = stats.gamma(power + 1, scale=1 / curvature)
    highest = 1 - (low / end) ** 2
    return lambda x: 1 - gamma.cdf(1 - (x / end) ** 2) / gamma.cdf(highest)


CLOSED_FORMS: dict[str, tuple[dict[str, Any], Cdf]] = {
    "exponential": ({"law": "exponential", "scale": 0.7, "range": (-1, 4)}, truncated(stats.expon(-1, 0.7), -1, 4)),
    "exponential, rising steeply": (
        {"law": "exponential", "scale": -0.02, "range": (-1, 4)},
        lambda x: stats.expon(0, 0.02).sf(4 - x),
    ),
    "gaussian": ({"law": "gaussian", "mean": 0.1, "sigma": 0.02, "range": (-2, 9)}, stats.norm(0.1, 0.02).cdf),
    "gaussian, one side": (
        {"law": "gaussian", "mean": 0.1, "sigma": 0.5, "range": (0, 0.7)},
        truncated(stats.norm(0.1, 0.5), 0, 0.7),
    ),
    "gaussian, tail": (
        {"law": "gaussian", "mean": -1, "sigma": 0.1, "range": (-0.2, 9)},
        stats.truncnorm(8, 100, loc=-1, scale=0.1).cdf,
    ),
    "double gaussian": (
        {
            "law": "double_gaussian",
            "mean": 0,
            "sigma": 0.1,
            "wide_mean": 0.5,
            "wide_sigma": 1.5,
            "wide_fraction": 0.3,
            "range": (-1, 2),
        },
        mixture(0.3, stats.norm(0, 0.1), stats.norm(0.5, 1.5), -1, 2),
    ),
    "power": ({"law": "power", "exponent": 2.5, "range": (0, 3)}, stats.powerlaw(3.5, 0, 3).cdf),
    "power, singular": ({"law": "power", "exponent": -0.9, "range": (0, 3)}, stats.powerlaw(0.1, 0, 3).cdf),
    "power, falling": (
        {"law": "power", "exponent": -3, "origin": -1, "range": (1, 9)},
        # Pareto of x + 1 from 2 with index 2
        truncated(stats.pareto(2, -1, 2), 1, 9),
    ),
    "power, logarithmic": (
        {"law": "power", "exponent": -1, "range": (0.01, 3)},
        stats.loguniform(0.01, 3).cdf,
    ),
    "threshold": (
        {"law": "threshold", "threshold": 0.135, "power": 0.5, "scale": 0.05, "range": (0.1, 5)},
        truncated(stats.gamma(1.5, 0.135, 0.05), 0.1, 5),
    ),
    "end point": (
        {"law": "end_point", "end": 2, "power": 0.5, "curvature": 3, "range": (0, 2)},
        end_point(0.5, 3, 2, 0),
    ),
    "end point, cut": (
        {"law": "end_point", "end": 2, "power": 1.3, "curvature": 0.7, "range": (1, 2.5)},
        end_point(1.3, 0.7, 2, 1),
    ),
    "phase space": (
        {"law": "phase_space", "rise": 0.5, "fall": 2, "range": (1, 3)},
        stats.beta(1.5, 3, 1, 2).cdf,
    ),
    "uniform": ({"law": "uniform", "range": (1, 3)}, stats.uniform(1, 2).cdf),
    "polynomial": ({"law": "polynomial", "coefficients": (1, 0, 3), "range": (0, 2)}, lambda x: (x + x**3) / 10),
    "polynomial that touches zero": (
        {"law": "polynomial", "coefficients": (1, -2, 1), "range": (0, 2)},
        lambda x: 0.5 + 0.5 * (x - 1) ** 3,
    ),
}


@pytest.mark.parametrize("name", CLOSED_FORMS)
def test_quantiles(name: str) -> None:
    """F(quantile(u)) = u. No chance in it: the table is as good as its quadrature, 1e-6 at worst."""
    keys, cdf = CLOSED_FORMS[name]
    u = np.concatenate([np.linspace(0.0, 1.0, 100_001), 10.0 ** np.arange(-12, -5)])
    x = table(law(**keys))(u)
    assert x.min() >= keys["range"][0]
    assert x.max() <= keys["range"][1]
    assert np.abs(cdf(x) - u).max() < 1e-6
    order = np.argsort(u)
    assert (np.diff(x[order]) >= 0).all()


@pytest.mark.parametrize("name", CLOSED_FORMS)
def test_sampled_laws(name: str) -> None:
    """Kolmogorov and Smirnov's test of 200 000 draws."""
    keys, cdf = CLOSED_FORMS[name]
    x = table(law(**keys))(uniforms(KEY, 0, 200_000, 128))
    assert stats.kstest(x, cdf).pvalue > CHANCE


def test_law_times_rate() -> None:
    """A law times a factor that is given as a logarithm: uniform times x is the triangle, F = x²/4 on [0, 2]."""
    x = table(law(law="uniform", range=(0, 2)), np.log)(np.linspace(0, 1, 1001))
    np.testing.assert_allclose(x**2 / 4, np.linspace(0, 1, 1001), atol=1e-9)


def test_rows_in_proportion() -> None:
    """Row k comes up in proportion to its weight (χ² test); rows of weight zero never."""
    weights = np.array([0.0, 3.0, 1.0, 0.0, 0.0, 6.0, 0.0])
    counts = np.bincount(rows(weights)(uniforms(KEY, 0, 100_000, 160)), minlength=7)
    assert (counts[weights == 0] == 0).all()
    kept = weights > 0
    assert stats.chisquare(counts[kept], 100_000 * weights[kept] / 10).pvalue > CHANCE


def test_sorted_values_are_joined_by_straight_lines() -> None:
    """As numpy.quantile does by default."""
    values = np.sort(np.random.default_rng(SEED).normal(size=50).round(1))  # with ties
    u = np.linspace(0, 1, 997)[:-1]
    np.testing.assert_allclose(from_sorted(values)(u), np.quantile(values, u), atol=1e-12)
    np.testing.assert_array_equal(from_sorted(values[:1])(u), values[0])
    # with weights 1, 1, 3 the two gaps hold 1 and 2 parts of the whole
    weighted = from_sorted(np.array([0.0, 1.0, 2.0]), np.array([1.0, 1.0, 3.0]))
    np.testing.assert_allclose(weighted(np.array([1 / 6, 1 / 3, 2 / 3])), [0.5, 1.0, 1.5], atol=1e-12)


# ── Copula ──────────────────────────────────────────────────────────────────────────────────────────────────────────


def test_normal_distribution() -> None:
    z = np.linspace(-12, 12, 4001)
    got = np.array([normal_distribution(value) for value in z])
    np.testing.assert_allclose(got, special.ndtr(z), atol=2e-11)
    assert (np.diff(got) >= 0).all()


@pytest.mark.parametrize("rho", [-0.9, -0.3, 0.0, 0.5, 0.95])
def test_rank_correlation(rho: float) -> None:
    """Spearman's coefficient of a Gaussian copula is 6/π asin(ρ/2); Kendall's tau 2/π asin ρ (Nelsen, ch. 5).

    Orthant probability 1/4 + asin ρ / 2π: Sheppard, Phil. Trans. A 192 (1899) 101.
    """
    n = 400_000
    u, v = correlated_uniforms(KEY, 0, n, [128, 130], np.array([[1, rho], [rho, 1]]))
    sigmas = stats.norm.isf(CHANCE / 2)
    # variance of Spearman's estimate is at most (1 + ρ²/2)/n near independence and falls towards |ρ| = 1
    assert stats.spearmanr(u, v).statistic == pytest.approx(6 / math.pi * math.asin(rho / 2), abs=1.3 * sigmas / n**0.5)
    both = 0.25 + math.asin(rho) / (2 * math.pi)
    assert stats.binomtest(int(np.sum((u < 0.5) & (v < 0.5))), n, both).pvalue > CHANCE
    assert stats.kstest(u, "uniform").pvalue > CHANCE
    assert stats.kstest(v, "uniform").pvalue > CHANCE
    # the normal numbers behind have variance 1; its estimate has a standard deviation of √(2/n)
    assert special.ndtri(v).var() == pytest.approx(1.0, abs=sigmas * (2 / n) ** 0.5)


def test_three_correlated(tmp_path: Path) -> None:
    """Normal scores of the observables have the correlation of the study file."""
    text = TEXT.replace("mm2.el = -0.5", "mm2.el = -0.5\nel.p_lepton = 0.7\nmm2.p_lepton = -0.2")
    study = study_of(tmp_path, text.replace("misidentified = true\n", ""))
    drawn = ShapeSampler(study.backgrounds[0], study).draw("D0_e", KEY, 0, 100_000)
    scores = [
        special.ndtri(stats.uniform(-1, 10).cdf(drawn["mm2"])),
        special.ndtri(truncated(stats.norm(1, 0.4), 0.2, 2.5)(drawn["el"])),
        special.ndtri(truncated(stats.expon(0.3, 0.5), 0.3, 3)(drawn["p_lepton"])),
    ]
    wanted = np.array([[1, -0.5, -0.2], [-0.5, 1, 0.7], [-0.2, 0.7, 1]])
    # standard deviation of a correlation coefficient: (1 - ρ²)/√n; at most 1/√n
    assert np.abs(np.corrcoef(scores) - wanted).max() < stats.norm.isf(CHANCE / 6) / 100_000**0.5


# ── Samplers ────────────────────────────────────────────────────────────────────────────────────────────────────────

PLAIN = 'mm2 = { law = "uniform", range = [-1.0, 9.0] }'


def study_of(folder: Path, text: str) -> StudyConfig:
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return read_study(path)


def sampler(folder: Path, mm2: str, more: str = "") -> ShapeSampler:
    """The background of the small study without correlation, with another law for mm2."""
    text = TEXT.replace(PLAIN, f"mm2 = {mm2}\n{more}").replace("[background.correlation]\nmm2.el = -0.5\n", "")
    study = study_of(folder, text)
    return ShapeSampler(study.backgrounds[0], study)


def test_events_do_not_depend_on_chunks(tmp_path: Path) -> None:
    study = study_of(tmp_path, TEXT)
    shapes = ShapeSampler(study.backgrounds[0], study)
    assert shapes.categories == ("D0_e", "D0_mu")
    whole = shapes.draw("D0_mu", KEY, 0, 2000)
    for first, n in ((0, 1), (1, 255), (256, 300), (1999, 1)):
        part = shapes.draw("D0_mu", KEY, first, n)
        for name, values in part.items():
            np.testing.assert_array_equal(values, whole[name][first : first + n])
    other = shapes.draw("D0_mu", stream_key(SEED, "other"), 0, 2000)
    assert not np.any(other["mm2"] == whole["mm2"])


def test_another_observable_leaves_the_others(tmp_path: Path) -> None:
    one = sampler(tmp_path, '{ law = "uniform", range = [-1, 9] }').draw("D0_e", KEY, 0, 500)
    more = 'q2 = { law = "uniform", range = [0, 12] }'
    two = sampler(tmp_path, '{ law = "uniform", range = [-1, 9] }', more).draw("D0_e", KEY, 0, 500)
    assert set(two) == {*one, "q2"}
    for name, values in one.items():
        np.testing.assert_array_equal(values, two[name])


def test_laws_of_a_category_and_of_a_hadron(tmp_path: Path) -> None:
    text = TEXT.replace(
        "[background.correlation]",
        '[background.shape_in.D0]\nmm2 = { law = "uniform", range = [2, 3] }\n'
        '[background.shape_in.D0_mu]\nmm2 = { law = "uniform", range = [4, 5] }\n[background.correlation]',
    ).replace("D0_mu = 40.5 }", "D0_mu = 40.5, Dstp_e = 3, Dstp_mu = 0 }")
    study = study_of(tmp_path, text)
    background = study.backgrounds[0]
    assert background.events_in == {"D0_e": 334, "D0_mu": 333, "Dstp_e": 333}
    shapes = ShapeSampler(background, study)
    for category, low, high in (("D0_e", 2, 3), ("D0_mu", 4, 5), ("Dstp_e", -1, 9)):
        mm2 = shapes.draw(category, KEY, 0, 1000)["mm2"]
        assert low <= mm2.min() < low + 0.1 * (high - low)
        assert high - 0.1 * (high - low) < mm2.max() <= high
    with pytest.raises(KeyError):
        shapes.draw("Dstp_mu", KEY, 0, 1)


@pytest.mark.parametrize("lepton", ["e", "mu"])
def test_misidentified_leptons_follow_the_rate(tmp_path: Path, lepton: str) -> None:
    """p_lepton is drawn from law times misidentification rate: χ² of 40 bins against quadrature."""
    study = study_of(tmp_path, TEXT)
    p = ShapeSampler(study.backgrounds[0], study).draw(f"D0_{lepton}", KEY, 0, 200_000)["p_lepton"]
    identification = study.detector.lepton_id
    curve = identification.hadron_as_e if lepton == "e" else identification.hadron_as_mu
    edges = np.linspace(0.3, 3.0, 41)

    def density(x: float) -> float:
        return float(math.exp(-x / 0.5) * np.interp(x, curve.momentum, curve.value))

    contents = np.array([integrate.quad(density, a, b, points=[0.5, 1.0, 2.0])[0] for a, b in pairwise(edges)])
    counts = np.histogram(p, edges)[0]
    assert stats.chisquare(counts, contents / contents.sum() * counts.sum()).pvalue > CHANCE


# ── ROOT files ──────────────────────────────────────────────────────────────────────────────────────────────────────


def test_histogram_written_by_root(tmp_path: Path) -> None:
    """`one` of uproot-histograms.root (scikit-hep-testdata, written by ROOT): 10 bins from -3 to 3; χ² of draws, and
    within each bin evenly (KS)."""
    file = data_path("uproot-histograms.root")
    with uproot.open(file) as directory:
        contents, edges = directory["one"].to_numpy()
    mm2 = sampler(tmp_path, f'{{ law = "histogram", file = "{file}", name = "one" }}').draw("D0_e", KEY, 0, 100_000)[
        "mm2"
    ]
    counts = np.histogram(mm2, edges)[0]
    assert counts.sum() == 100_000
    filled = contents > 0
    assert (counts[~filled] == 0).all()
    assert stats.chisquare(counts[filled], 1e5 * contents[filled] / contents.sum()).pvalue > CHANCE
    inside = (mm2 - edges[0]) / np.diff(edges)[0] % 1.0
    assert stats.kstest(inside, "uniform").pvalue > CHANCE


def test_histogram_cut_to_a_range(tmp_path: Path) -> None:
    """Bins at the cut count in proportion: from [0, 1, 2] with contents 1 and 3, the range 0.5 to 2 keeps 0.5 and 3."""
    with uproot.recreate(tmp_path / "h.root") as file:
        file["h"] = (np.array([1.0, 3.0]), np.array([0.0, 1.0, 2.0]))
    mm2 = sampler(tmp_path, '{ law = "histogram", file = "h.root", name = "h", range = [0.5, 7] }').draw(
        "D0_e", KEY, 0, 50_000
    )["mm2"]
    assert mm2.min() >= 0.5
    assert stats.binomtest(int((mm2 < 1).sum()), 50_000, 0.5 / 3.5).pvalue > CHANCE


ZMUMU = data_path("uproot-Zmumu.root")  # scikit-hep-testdata, written by ROOT: 2304 entries


def test_columns_of_one_tree_come_from_the_same_entry(tmp_path: Path) -> None:
    with uproot.open(ZMUMU) as file:
        read = file["events"].arrays(["px1", "E1"], library="np")
    pairs = set(zip(read["px1"], read["E1"], strict=True))
    column = f'{{ law = "column", file = "{ZMUMU}", tree = "events", branch = "%s" }}'
    drawn = sampler(tmp_path, (column % "px1") + "#", "q2 = " + column % "E1")
    events = drawn.draw("D0_e", KEY, 0, 50_000)
    assert set(zip(events["mm2"], events["q2"], strict=True)) <= pairs
    assert len(np.unique(events["mm2"])) > 0.99 * len(np.unique(read["px1"]))
    # drawn with replacement, each entry alike: counts of entries are multinomial
    counts = np.unique(events["mm2"] + 1e3 * events["q2"], return_counts=True)[1]
    copies = np.unique(read["px1"] + 1e3 * read["E1"], return_counts=True)[1]
    assert stats.chisquare(counts, copies / copies.sum() * 50_000).pvalue > CHANCE


def test_columns_keep_to_their_ranges(tmp_path: Path) -> None:
    """An entry is left out if any of its columns lies outside."""
    column = f'{{ law = "column", file = "{ZMUMU}", tree = "events", branch = "%s", range = [%s] }}'
    drawn = sampler(tmp_path, (column % ("px1", "0, 9")) + "#", "q2 = " + column % ("E1", "20, 60"))
    events = drawn.draw("D0_e", KEY, 0, 5_000)
    assert 0 <= events["mm2"].min() < events["mm2"].max() < 9
    assert 20 <= events["q2"].min() < events["q2"].max() < 60


P_LEPTON = 'p_lepton = { law = "exponential", scale = 0.5, range = [0.3, 3.0] }'


@pytest.mark.parametrize("source", ["column", "histogram"])
def test_misidentified_leptons_from_a_file(tmp_path: Path, source: str) -> None:
    """Entries and bins count by the rate at their momentum, here 0.2, 0.3 and 0.5 at the centres of three bins; within
    a bin the straight line of the rate has the mean of its centre."""
    with uproot.recreate(tmp_path / "p.root") as file:
        file["h"] = (np.array([2.0, 1.0, 1.0]), np.array([0.5, 1.5, 2.5, 3.5]))
        file.mktree("t", {"p": "float64"})
        file["t"].extend({"p": np.array([1.0, 1.0, 2.0, 3.0])})
    keys = 'name = "h"' if source == "histogram" else 'tree = "t", branch = "p"'
    text = TEXT.replace(P_LEPTON, f'p_lepton = {{ law = "{source}", file = "p.root", {keys} }}')
    rate = "hadron_as_mu = { momentum = [0.5, 1.5, 2.5, 3.5], value = [0.15, 0.25, 0.35, 0.65] }"
    study = study_of(tmp_path, text.replace("[selection]", f"[detector.lepton_id]\n{rate}\n[selection]"))
    p = ShapeSampler(study.backgrounds[0], study).draw("D0_mu", KEY, 0, 50_000)["p_lepton"]
    counts = np.histogram(p, [0.5, 1.5, 2.5, 3.5])[0]
    assert stats.chisquare(counts, 50_000 * np.array([0.4, 0.3, 0.5]) / 1.2).pvalue > CHANCE


@pytest.mark.parametrize("kind", ["TTree", "RNTuple"])
def test_smooth_column(tmp_path: Path, kind: str) -> None:
    values = np.random.default_rng(SEED).normal(3, 1, 300)
    with uproot.recreate(tmp_path / "t.root") as file:
        if kind == "TTree":
            file.mktree("t", {"x": "float64"})
            file["t"].extend({"x": values})
        else:
            file["t"] = {"x": values}
    keys = 'file = "t.root", tree = "t", branch = "x", smooth = true'
    mm2 = sampler(tmp_path, f'{{ law = "column", {keys} }}').draw("D0_e", KEY, 0, 1000)["mm2"]
    np.testing.assert_allclose(mm2, np.quantile(values, uniforms(KEY, 0, 1000, 128)), atol=1e-12)


def test_smooth_column_does_not_share_its_tree(tmp_path: Path) -> None:
    column = f'{{ law = "column", file = "{ZMUMU}", tree = "events", branch = "px1" }}'
    with pytest.raises(InputError, match="would lose its correlation with q2, which comes from the same tree"):
        sampler(tmp_path, column.replace(" }", ", smooth = true }"), "q2 = " + column)


def write_bad_files(folder: Path) -> None:
    x = np.array([1.0, 2.0])
    with uproot.recreate(folder / "good.root") as file:
        file["h"] = (np.array([1.0, 3.0]), np.array([0.0, 1.0, 2.0]))
        file["zero"] = (np.zeros(2), np.array([0.0, 1.0, 2.0]))
        file["negative"] = (np.array([1.0, -3.0]), np.array([0.0, 1.0, 2.0]))
        file["nan"] = (np.array([1.0, np.nan]), np.array([0.0, 1.0, 2.0]))
        file["flat"] = (np.ones((2, 2)), np.array([0.0, 1.0, 2.0]), np.array([0.0, 1.0, 2.0]))
        file["word"] = "a text"
        file.mktree("t", {"x": "float64", "nan": "float64", "pair": ("float64", (2,))})
        file["t"].extend({"x": x, "nan": np.array([1.0, np.nan]), "pair": np.ones((2, 2))})
        file.mktree("empty", {"x": "float64"})
    whole = (folder / "good.root").read_bytes()
    (folder / "truncated.root").write_bytes(whole[: len(whole) // 2])
    (folder / "foreign.root").write_text("not ROOT at all")
    (folder / "nothing.root").write_bytes(b"")


@pytest.mark.parametrize(
    ("file", "law_keys", "message"),
    [
        ("truncated.root", 'law = "histogram", name = "h"', "truncated"),
        ("foreign.root", 'law = "histogram", name = "h"', "not a ROOT file"),
        ("nothing.root", 'law = "histogram", name = "h"', "not a ROOT file"),
        ("good.root", 'law = "histogram", name = "hh"', "no such object in the file"),
        ("good.root", 'law = "histogram", name = "word"', "not a plain histogram"),
        ("good.root", 'law = "histogram", name = "t"', "not a plain histogram"),
        ("good.root", 'law = "histogram", name = "flat"', "must have one axis (got 2 axes)"),
        ("good.root", 'law = "histogram", name = "zero"', "is empty within the range"),
        ("good.root", 'law = "histogram", name = "h", range = [5, 6]', "is empty within the range"),
        ("good.root", 'law = "histogram", name = "negative"', "has a negative bin (got -3 from 1 to 2)"),
        ("good.root", 'law = "histogram", name = "nan"', "contents not finite (got nan)"),
        ("truncated.root", 'law = "column", tree = "t", branch = "x"', "truncated"),
        ("foreign.root", 'law = "column", tree = "t", branch = "x"', "not a ROOT file"),
        ("good.root", 'law = "column", tree = "tt", branch = "x"', "no such object in the file"),
        ("good.root", 'law = "column", tree = "h", branch = "x"', "is no tree (got TH1D)"),
        ("good.root", 'law = "column", tree = "empty", branch = "x"', "has no entries"),
        ("good.root", 'law = "column", tree = "t", branch = "y"', "has no such branch (got y, allowed x, nan, pair)"),
        ("good.root", 'law = "column", tree = "t", branch = "pair"', "is not one number an entry"),
        ("good.root", 'law = "column", tree = "t", branch = "nan"', "is not finite (got nan in entry 1)"),
        ("good.root", 'law = "column", tree = "t", branch = "x", range = [5, 6]', "leaves nothing to draw"),
        (
            "good.root",
            'law = "column", tree = "t", branch = "x", smooth = true, range = [5, 6]',
            "leaves nothing to draw",
        ),
    ],
)
def test_bad_files(tmp_path: Path, file: str, law_keys: str, message: str) -> None:
    write_bad_files(tmp_path)
    line = TEXT[: TEXT.index(PLAIN)].count("\n") + 1
    with pytest.raises(InputError) as error:
        sampler(tmp_path, f'{{ file = "{file}", {law_keys} }}')
    text = str(error.value)
    assert text.startswith(f"{tmp_path}/study.toml:{line}: background[fakes].shape.mm2: ")
    assert message in text


def test_file_that_went_away(tmp_path: Path) -> None:
    write_bad_files(tmp_path)
    text = TEXT.replace(PLAIN, 'mm2 = { law = "histogram", file = "good.root", name = "h" }')
    study = study_of(tmp_path, text)
    (tmp_path / "good.root").unlink()
    with pytest.raises(InputError, match=r"background\[fakes\].shape.mm2: .*good.root: cannot be read: no such file"):
        ShapeSampler(study.backgrounds[0], study)


def test_rate_of_zero_everywhere(tmp_path: Path) -> None:
    text = TEXT.replace("[selection]", "[detector.lepton_id]\nhadron_as_e = 0\n[selection]")
    study = study_of(tmp_path, text)
    with pytest.raises(InputError, match=r"shape.p_lepton: leaves nothing to draw. Check its range and the misid"):
        ShapeSampler(study.backgrounds[0], study)
