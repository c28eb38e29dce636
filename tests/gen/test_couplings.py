"""Couplings beyond the Standard Model in study files and rates: against published formulas and closed forms.

Nothing is random.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import BOTTOM_MASS, CHARM_MASS
from semitau.core.quadratic import value_at
from semitau.gen.decays.amplitudes import helicity_amplitudes
from semitau.gen.decays.coefficients import LARGEST, label_of, part_of, quadratic_form, value_of, with_values
from semitau.gen.decays.decay import WilsonCoefficients
from semitau.gen.study_file.reader import read_study
from semitau.gen.templates.component_plan import plan_channels, predicted_ratio

from .marlow_study import study as marlow_study
from .small_study import TEXT

ALL = ("VL", "VR", "SL", "SR", "T", "Im_VL", "Im_VR", "Im_SL", "Im_SR", "Im_T")


def study(tmp_path: Path, tables: str) -> Any:
    path = tmp_path / "study.toml"
    path.write_text(TEXT.replace("[selection]", f"{tables}\n[selection]"), encoding="utf-8")
    return read_study(path)


def test_table_of_a_study(tmp_path: Path) -> None:
    read = study(tmp_path, '[wilson]\nSR = 0.3\nT = [0.02, -0.1]\nVL = 1\ntensor = "EOM"\n')
    assert read.wilson.couplings == WilsonCoefficients(VL=1.0, SR=0.3, T=0.02 - 0.1j)
    assert read.wilson.tensor == "EOM"
    assert study(tmp_path, "").wilson.couplings == WilsonCoefficients()
    assert study(tmp_path, "").quadratic is None
    assert study(tmp_path, '[quadratic]\ncoefficients = ["SR", "Im_T"]').quadratic.coefficients == ("SR", "Im_T")


@pytest.mark.parametrize("name", ALL)
def test_parts(name: str) -> None:
    moved = with_values(WilsonCoefficients(T=0.1 + 0.2j), {name: 0.7})
    assert value_of(moved, name) == 0.7
    coefficient, unit = part_of(name)
    assert getattr(moved, coefficient) == pytest.approx(
        (0.7 * unit) + ({"T": 0.2j, "Im_T": 0.1}.get(name, 0.0))
    )  # the other part stays
    assert label_of(name) in (f"Re C_{coefficient}", f"Im C_{coefficient}")


@pytest.mark.parametrize(("charm", "couplings"), [("D-", {}), ("D*-", {"SL": 0.2j, "VR": -0.1})])
def test_the_ratio_is_a_quadratic_form(charm: str, couplings: dict[str, complex]) -> None:
    """Amplitudes are linear in the coefficients; the form is exact at points that it was not made from."""
    names = ("VL", "SR", "T", "Im_T", "Im_VR")
    at = WilsonCoefficients.of(couplings)
    form = quadratic_form(lambda c: gen.ratio("B0", charm, wilson=c), at, names)
    rng = np.random.default_rng(3)
    for _ in range(5):
        point = dict(zip(names, rng.uniform(-1, 1, len(names)).tolist(), strict=True))
        there = gen.ratio("B0", charm, wilson=with_values(at, point))
        assert value_at(form, point) == pytest.approx(there, rel=1e-10)


# R(C)/R(SM) at the b mass scale, from memory of the numerical formulas in common use (e.g. PRD 99 (2019) 075006 and
# 035028; not looked up). Coefficients differ between papers by the quark masses, the form factors and, for T, by the
# tensor form factors, here the heavy-quark limit; so the tolerances are those of this spread.
PUBLISHED = {
    "D-": {
        ("one", "SR"): (1.54, 0.15),
        ("one", "SL"): (1.54, 0.15),
        ("SR", "SR"): (1.09, 0.15),
        ("one", "T"): (1.04, 0.25),
        ("T", "T"): (0.75, 0.25),
        ("one", "VL"): (2.0, 1e-9),
        ("VL", "VL"): (1.0, 1e-9),
    },
    "D*-": {
        ("one", "SR"): (0.13, 0.05),
        ("one", "SL"): (-0.13, 0.05),
        ("SR", "SR"): (0.05, 0.03),
        ("one", "T"): (-5.13, 1.2),
        ("T", "T"): (16.9, 4.0),
        ("one", "VL"): (2.0, 1e-9),
        ("one", "VR"): (-1.83, 0.12),
    },
}


@pytest.mark.parametrize("charm", PUBLISHED)
def test_published_numerical_formulas(charm: str) -> None:
    names = ("VL", "VR", "SL", "SR", "T")
    form = quadratic_form(lambda c: gen.ratio("B0", charm, wilson=c), WilsonCoefficients(), names)
    for pair, (value, spread) in PUBLISHED[charm].items():
        assert form[pair] / form["one", "one"] == pytest.approx(value, abs=spread), pair


def test_scalar_amplitude_in_closed_form() -> None:
    """S of B -> D is (SL + SR)/2 (M² - m²) f0/(m_b - m_c), and J_t = (M² - m²) f0/(2 sqrt(q²)): S/J_t has no f0."""
    q2 = np.array([3.5, 7.0, 11.0])
    found = helicity_amplitudes(gen.Decay("B0", "D-", "tau", wilson={"SR": 0.4, "SL": 0.2j}), q2)
    expected = (0.4 + 0.2j) * np.sqrt(q2) / (BOTTOM_MASS - CHARM_MASS)
    np.testing.assert_allclose(found.S / found.J_t, expected, rtol=1e-12)


@pytest.mark.parametrize("name", LARGEST)
def test_ranges_leave_no_room(name: str) -> None:
    """At the largest size of a coefficient at least one ratio is far above any measured one (0.34 and 0.29)."""
    ratios = [
        max(gen.ratio("B0", charm, wilson={name: sign * LARGEST[name]}) / plain for sign in (1, -1))
        for charm, plain in (("D-", 0.30), ("D*-", 0.25))
    ]
    assert max(ratios) > 5.0


def test_study_generates_with_its_couplings() -> None:
    made = marlow_study(wilson={"SR": 0.5, "T": [0.0, 0.1]})
    plain = marlow_study()
    for charm, name, index in (("D", "R_D", 0), ("D*", "R_Dst", 1)):
        assert made.modes[index].charm == (charm,)
        expected = {
            c: sum(plan.expected for plan in plan_channels(s) if plan.component == made.modes[index].name)
            for c, s in (("new", made), ("old", plain))
        }
        ratios = predicted_ratio(made, name, ("B+", "B0")), predicted_ratio(plain, name, ("B+", "B0"))
        assert expected["new"] / expected["old"] == pytest.approx(ratios[0] / ratios[1], rel=1e-3)
        assert predicted_ratio(made, name, ("B+", "B0"), WilsonCoefficients()) == pytest.approx(ratios[1])
    for plan in plan_channels(made):
        at_work = plan.channel.decay.couplings
        assert (at_work == WilsonCoefficients(SR=0.5, T=0.1j)) == (plan.channel.lepton == "tau")


def test_no_mode_with_a_tau() -> None:
    with pytest.raises(Exception, match="acts on nothing: no mode has a tau"):
        marlow_study(wilson={"SR": 0.5}, mode=[{"component": "x", "charm": ["D"], "leptons": ["e"], "events": 9}])


def test_rates_command(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    from semitau.study.command_line import main

    study(tmp_path, "[wilson]\nSR = 0.3\nT = [0.02, -0.1]\n")
    assert main(["rates", str(tmp_path / "study.toml"), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["wilson"]["SR"] == [0.3, 0.0]
    assert document["wilson"]["T"] == [0.02, -0.1]
    assert document["wilson"]["tensor"] == "LO"
    expected = gen.ratio("B0", "D-", wilson={"SR": 0.3, "T": 0.02 - 0.1j})
    found = next(r["value"] for r in document["ratios"] if (r["parent"], r["charm"]) == ("B0", "D-"))
    assert found == pytest.approx(expected, rel=1e-12)
    assert main(["rates", str(tmp_path / "study.toml")]) == 0
    assert "C_SR = 0.3, C_T = 0.02 − 0.1i" in " ".join(capsys.readouterr().out.split())
