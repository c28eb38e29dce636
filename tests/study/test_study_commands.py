"""Commands on a study file that make no templates: check, rates, generate."""

from __future__ import annotations

import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import uproot
from semitau import gen
from semitau.core.template_file import read_templates
from semitau.study.command_line import main

WriteStudy = Callable[..., Path]
Capture = pytest.CaptureFixture[str]


def document(arguments: list[str], capsys: Capture) -> Any:
    assert main([*arguments, "--json", "--quiet"]) == 0
    captured = capsys.readouterr()
    assert captured.err == ""
    return json.loads(captured.out)


def test_check_says_what_will_be_made(mini: WriteStudy, finished: Path, capsys: Capture) -> None:
    said = document(["check", str(mini())], capsys)
    templates = read_templates(finished / "templates.root")
    assert [part["name"] for part in said["components"]] == [component.name for component in templates.components]
    assert said["bins"] == sum(int(np.prod(category.shape)) for category in templates.categories)
    assert sum(said["variations"].values()) == len(templates.nuisances)
    flow: Any = templates.provenance["cut_flow"]
    first = {part["component"]: part["steps"][0]["events"] for part in flow}
    for part in said["components"]:
        assert part["expected"] == pytest.approx(first[part["name"]], rel=1e-9)
    assert said["seconds"] > 0
    assert said["memory"] > 0
    assert not Path("out").exists(), "check makes nothing"


def test_check_in_words(mini: WriteStudy, capsys: Capture) -> None:
    assert main(["check", str(mini()), "--workers", "2"]) == 0
    out = capsys.readouterr().out
    assert "Marlow, small study is a good study file." in out
    assert "with 2 workers" in out
    assert "± 30 %" in out


def test_rates_are_those_of_gen(mini: WriteStudy, capsys: Capture) -> None:
    said = document(["rates", str(mini())], capsys)
    ratios = {(ratio["parent"], ratio["charm"]): ratio for ratio in said["ratios"]}
    # The world average's theory values, EPJC 81 (2021) 226 (remembered): R(D) 0.299(3), R(D*) 0.258(5).
    assert ratios["B+", "D0"]["value"] == pytest.approx(0.299, abs=4 * 0.003)
    assert ratios["B0", "D*-"]["value"] == pytest.approx(0.258, abs=4 * 0.005)
    assert ratios["B0", "D*-"]["value"] == pytest.approx(gen.ratio("B0", "D*-", "CLN-2021"))
    for mode in said["modes"]:
        assert mode["errors"]["branching_fraction"] > 0
    made_with = {(m["parent"], m["charm"], m["lepton"]): m["template_branching_fraction"] for m in said["modes"]}
    assert made_with["B0", "D*-", "mu"] == gen.observables(gen.Decay("B0", "D*-", "mu", "CLN-2021")).branching_fraction
    # B(B+ -> D1 l nu) B(D1 -> D*- pi+) = 0.00281 (Eur. Phys. J. C 81 (2021) 226, from memory) over 2/3 and over 0.67 of
    # D1 -> D* pi.
    assert made_with["B+", "D1(2420)0", "e"] == pytest.approx(0.00281 * 3 / 2 / 0.67, rel=0.002)


def test_rates_as_tables(mini: WriteStudy, capsys: Capture) -> None:
    assert main(["rates", str(mini())]) == 0
    out = capsys.readouterr().out
    assert "B0 → D*- tau ν" in out
    assert "BCL-2021" in out


def test_generated_weights_are_the_expected_events(mini: WriteStudy, finished: Path, capsys: Capture) -> None:
    """Selected candidates are those of the templates: the same events, so the same sums, to rounding."""
    said = document(["generate", str(mini()), "--workers", "2"], capsys)
    templates = read_templates(finished / "templates.root")
    expected = sum(float(template.nominal.sum()) for template in templates.templates.values())
    with uproot.open(said["events"]) as file:
        candidates = file["candidates"].arrays(["weight", "selected"], library="np")
        assert said["entries"]["candidates"] == len(candidates["weight"])
    assert candidates["weight"][candidates["selected"] == 1].sum() == pytest.approx(expected, rel=1e-9)


def test_a_share_keeps_the_expectation(mini: WriteStudy, capsys: Capture) -> None:
    """A tenth of the events: the sum of weights agrees within the statistical error (5 σ: fails once in 2 million)."""
    arguments = ["generate", str(mini()), "--format", "rntuple"]
    sums = []
    for share in ("1", "0.1"):
        said = document([*arguments, "--share", share, "--output", f"{share}.root"], capsys)
        with uproot.open(said["events"]) as file:
            found = file["candidates"].arrays(["weight", "selected"], library="np")
        weights = found["weight"][found["selected"] == 1]
        sums.append((weights.sum(), (weights**2).sum()))
    (whole, whole_variance), (part, part_variance) = sums
    assert abs(whole - part) < 5 * np.sqrt(whole_variance + part_variance)
    assert part_variance > 3 * whole_variance
