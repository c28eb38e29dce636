"""From generation to fit: pseudo-data of events drawn with other couplings, fitted with quadratic templates made in the
Standard Model. Each pull beyond 4 has a chance of 6e-5; there are five. SEMITAU_TEST_SEED changes the seed.
"""

from __future__ import annotations

import os
import tomllib
from collections.abc import Callable
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from semitau import gen
from semitau.core.quadratic import templates_at, value_at
from semitau.core.template_file import read_templates
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.coefficients import deepest
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.component_plan import predicted_ratio
from semitau.gen.templates.pseudo_data import pseudo_data
from semitau.study.command_line import main
from semitau.study.results import read_results
from semitau.study.run.opening import open_study

from ..gen.marlow_study import TEXT
from ..gen.marlow_study import study as marlow

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
TRUTH = {"SR": 0.35, "T": -0.12}


def small(**changes: Any) -> StudyConfig:
    """No backgrounds, no variations, bins that all expect something, and data enough for Gaussian errors."""
    tables = tomllib.loads(TEXT)
    modes = [mode | {"events": 2 * mode["events"]} for mode in tables["mode"] if mode["component"] != "Dss_light"]
    experiment = tables["experiment"] | {"b_pairs": 5e9}
    axes = {"mm2": [-2.0, 0.3, 1.0, 2.0, 3.5, 9.0], "el": [0.2, 0.7, 2.5]}
    changes["category"] = [{"charm": ["D0", "D+", "D*0", "D*+"], "leptons": ["e", "mu"], "observables": axes}]
    return marlow(study__seed=SEED, mode=modes, background=[], variation=[], experiment=experiment, **changes)


@cache
def templates() -> TemplateSet:
    return build_templates(small(quadratic={"coefficients": ["SR", "T"]})).templates


@cache
def observed() -> dict[str, np.ndarray]:
    return pseudo_data(small(wilson=TRUTH))


def test_coefficients_come_back() -> None:
    model = Model(templates(), coefficients=("SR", "T"))
    result, _ = deepest(model, observed())
    assert result.valid, result.reasons
    assert result.goodness.p_value is not None
    assert result.goodness.p_value > 1e-5
    for name, truth in TRUTH.items():
        assert abs(result.value(name) - truth) < 4.0 * result.error(name), (name, result.value(name))
    made = small(wilson=TRUTH)
    for name in ("R_D", "R_Dst"):
        truth = predicted_ratio(made, name, ("B+", "B0"))
        assert abs(result.value(name) - truth) < 4.0 * result.error(name), (name, result.value(name))


def test_ratios_come_back_at_the_right_point() -> None:
    """With the coefficients at their true point the ratios do; with those of the Standard Model the fit is bad."""
    made = small(wilson=TRUTH)
    right = maximise(Model(templates_at(templates(), TRUTH)), observed())
    wrong = maximise(Model(templates()), observed())
    assert right.valid
    truth = predicted_ratio(made, "R_Dst", ("B+", "B0"))
    assert abs(right.value("R_Dst") - truth) < 4.0 * right.error("R_Dst")
    assert wrong.minus_log_likelihood > right.minus_log_likelihood + 5.0


def test_a_study_floats_them(mini: Callable[..., Path]) -> None:
    """`[fit] coefficients`: parameters with errors in the results, ratios that follow them, toys of both; no linearity.

    The fit of the study is that of a model made by hand from its templates."""
    path = mini(
        {"[fit]\n": '[quadratic]\ncoefficients = ["SR", "T"]\n\n[fit]\ncoefficients = ["SR"]\n'}, questions=False
    )
    assert main(["study", str(path), "--quiet", "--workers", "2"]) == 0
    results = read_results(Path("out") / "results.json")
    found = {ratio.name: ratio for ratio in results.ratios}
    assert list(found) == ["R_D", "R_Dst", "SR"]
    assert {p.name: p.kind for p in results.fit.parameters}["SR"] == "coefficient"
    templates = read_templates(Path("out") / "templates.root")
    model = Model(templates, coefficients=("SR",))
    fitted, _ = deepest(model, templates.data)
    assert found["SR"].value == fitted.value("SR")
    assert found["SR"].error == fitted.error("SR") > 0
    form = {(a, b): piece for a, b, piece in next(p for p in templates.parameters if p.name == "R_D").rate}
    assert found["R_D"].value == pytest.approx(value_at(form, {"SR": found["SR"].value, "T": 0.0}), rel=1e-9)
    assert results.toys is not None
    assert {ratio.ratio for ratio in results.toys.ratios} == {"R_D", "R_Dst", "SR"}
    assert results.linearity == ()
    assert any("Linearity is left out" in warning for warning in results.warnings)
    report = (Path("out") / "report.html").read_text(encoding="utf-8")
    assert "Re C_SR" in report


DIRECTIONS = """[[variation]]
name = "D_first"
label = "D form factors, first direction"
kind = "form_factor_direction"
set = "D"
direction = 1

[[variation]]
name = "D_second"
label = "D form factors, second direction"
kind = "form_factor_direction"
set = "D"
direction = 2
"""
FLOATED = """[[quadratic.form_factors]]
name = "D_ff"
set = "D"
order = "variance"
keep = 1.0
at_most = 2
"""


def test_a_study_floats_form_factors(mini: Callable[..., Path]) -> None:
    """The directions of D as coefficients, and as variations with two sides: ratios are free in both, nuisances in
    every table, and the errors agree, since one standard deviation is little. `--at` injects ratios of another set."""
    chosen = {"[fit]\n": '[fit]\ncoefficients = ["D_ff_1", "D_ff_2"]\n', 'data = "pseudo"': 'data = "expected"'}
    path = mini({DIRECTIONS: FLOATED, **chosen}, questions=False)
    assert main(["study", str(path), "--quiet", "--workers", "2"]) == 0
    results = read_results(Path("out") / "results.json")
    assert [ratio.name for ratio in results.ratios] == ["R_D", "R_Dst"]
    kinds = {parameter.name: (parameter.kind, parameter.constraint) for parameter in results.fit.parameters}
    assert kinds["D_ff_1"] == ("nuisance", 1.0)
    assert not any(name.startswith("_") for name in kinds)
    assert {"D_ff_1", "D_ff_2"} < {nuisance.name for nuisance in results.nuisances}
    assert results.linearity
    varied = mini({'data = "pseudo"': 'data = "expected"'})
    assert main(["study", str(varied), "--quiet", "--workers", "2", "--output", "varied"]) == 0
    other = read_results(Path("varied") / "results.json")
    for mine, theirs in zip(results.ratios, other.ratios, strict=True):
        assert mine.error == pytest.approx(theirs.error, rel=0.01)
    shifts = [{n.name: n for n in part.nuisances} for part in (results, other)]
    first, second = (
        next(s for s in by_name[name].shifts if s.ratio == "R_D")
        for by_name, name in zip(shifts, ("D_ff_1", "D_first"), strict=True)
    )
    assert first.up is not None
    assert second.up is not None
    assert first.up == pytest.approx(second.up, rel=0.2, abs=0.02 * results.ratios[0].error)
    moved = templates_at(read_templates(Path("out") / "templates.root"), {"D_ff_1": 2.0})
    chosen_set = gen.form_factors("BCL-2021").along(0, 2.0, "D")
    parents = {"B+": 0.514, "B0": 0.486}
    tagged = {parent: share * open_study(path).detector.tag.kept(parent) for parent, share in parents.items()}
    widths = {
        lepton: sum(
            tagged[parent] * gen.observables(gen.Decay(parent, charm, lepton, chosen_set)).branching_fraction
            for parent, charm in (("B+", "D0"), ("B0", "D-"))
        )
        for lepton in ("e", "mu", "tau")
    }
    expected = 2.0 * widths["tau"] / (widths["e"] + widths["mu"])
    assert moved.parameters[0].injected == pytest.approx(expected, rel=1e-9)
