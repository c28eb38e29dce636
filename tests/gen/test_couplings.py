"""Couplings beyond the Standard Model in study files and rates: against published formulas and closed forms.

Nothing is random but the events of light leptons: eight means within 5 standard deviations, 5e-6 in all.
"""

from __future__ import annotations

import json
import os
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from semitau import gen
from semitau.core.constants import BOTTOM_MASS, CHARM_MASS, ELECTROWEAK_CORRECTION, FERMI_COUPLING, VCB
from semitau.core.errors import InputError
from semitau.core.quadratic import value_at
from semitau.gen.decays.amplitudes import helicity_amplitudes
from semitau.gen.decays.coefficients import LARGEST, label_of, part_of, quadratic_form, value_of, with_values
from semitau.gen.decays.decay import WilsonCoefficients
from semitau.gen.decays.rates_table import rates_table
from semitau.gen.study_file.reader import read_study
from semitau.gen.templates.component_plan import plan_channels, predicted_ratio

from .marlow_study import study as marlow_study
from .small_study import TEXT

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
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


LIGHT = {"e": {"SL": 0.3, "VL": 0.02j}, "mu": {"VL": -0.05, "VR": 0.1j, "T": 0.06}}


@pytest.mark.parametrize(("parent", "charm"), [("B0", "D-"), ("B+", "D*0")])
def test_light_couplings_in_the_ratio(parent: str, charm: str) -> None:
    """VL alone multiplies amplitudes by 1 + VL: R over (|1 + VL_e|² G_e + |1 + VL_mu|² G_mu) / (G_e + G_mu)."""
    rate = {lepton: gen.observables(gen.Decay(parent, charm, lepton)).rate for lepton in ("e", "mu", "tau")}
    found = gen.ratio(parent, charm, light={"e": {"VL": 0.1 - 0.2j}, "mu": {"VL": -0.05}})
    below = abs(1.1 - 0.2j) ** 2 * rate["e"] + 0.95**2 * rate["mu"]
    assert found == pytest.approx(2.0 * rate["tau"] / below, rel=1e-12)
    assert gen.ratio(parent, charm, light={"e": {}, "mu": {}}) == gen.ratio(parent, charm)
    with pytest.raises(InputError, match="no such light lepton"):
        gen.ratio(parent, charm, light={"tau": {"VL": 0.1}})


def test_scalar_current_of_electrons_in_closed_form() -> None:
    """A massless lepton does not interfere with a scalar current (opposite helicity), so B -> D e nu gains the integral
    of G_F² |V_cb|² |p| q² |S|²/(16 pi³ M²), S = (SL + SR)/2 (M² - m²) f0/(m_b - m_c): the textbook width of a scalar
    vertex, here with another quadrature (scipy's)."""
    plain, new = gen.Decay("B0", "D-", "e"), gen.Decay("B0", "D-", "e", wilson={"SL": 0.3, "SR": 0.4j})
    M, m = plain.m_parent, plain.m_charm

    def added(q2: float) -> float:
        f_zero = float(plain.model(M, m, np.array([q2])).f_zero[0])
        scalar = 0.5 * abs(0.3 + 0.4j) * (M * M - m * m) * f_zero / (BOTTOM_MASS - CHARM_MASS)
        momentum = np.sqrt(((M - m) ** 2 - q2) * ((M + m) ** 2 - q2)) / (2.0 * M)
        coupling = (FERMI_COUPLING * ELECTROWEAK_CORRECTION * VCB) ** 2
        return float(coupling * momentum * q2 * scalar**2 / (16.0 * np.pi**3 * M * M))

    expected = quad(added, 0.0, (M - m) ** 2, epsabs=0.0)[0]
    found = gen.observables(new).rate - gen.observables(plain).rate
    assert found == pytest.approx(expected, rel=2e-3)  # m_e interferes: m_e/sqrt(q²) of the vector rate, 1e-3 of this


@pytest.mark.parametrize(("charm", "lepton"), [("D-", "e"), ("D-", "mu"), ("D*-", "e"), ("D*-", "mu")])
def test_light_leptons_are_drawn_with_their_couplings(charm: str, lepton: str) -> None:
    """Mean q² and forward-backward asymmetry of events drawn with couplings against the quadrature of rates."""
    decay = gen.Decay("B0", charm, lepton, wilson={"SL": 0.6 - 0.2j, "VR": 0.2, "T": 0.1})
    events = gen.simulate(decay, 30_000, SEED, frame="B")
    expected = gen.observables(decay)
    parts = {key: {axis: np.asarray(events[key][axis]) for axis in ("E", "px", "py", "pz")} for key in ("lepton", "nu")}
    total = {axis: parts["lepton"][axis] + parts["nu"][axis] for axis in ("E", "px", "py", "pz")}
    q2 = total["E"] ** 2 - total["px"] ** 2 - total["py"] ** 2 - total["pz"] ** 2
    assert abs(q2.mean() - expected.mean_q2) < 5.0 * q2.std() / np.sqrt(q2.size)
    assert abs(expected.mean_q2 - gen.observables(gen.Decay("B0", charm, lepton)).mean_q2) > 0.05
    # In the W* frame: energies of lepton and neutrino in the B frame tell the angle to the W* flight.
    flight = np.sqrt(total["px"] ** 2 + total["py"] ** 2 + total["pz"] ** 2)
    mass2 = decay.m_lepton**2
    energy, size = (q2 + mass2) / (2.0 * np.sqrt(q2)), (q2 - mass2) / (2.0 * np.sqrt(q2))
    cosine = (parts["lepton"]["E"] * np.sqrt(q2) - total["E"] * energy) / (flight * size)
    forward = np.sign(cosine)
    assert abs(forward.mean() - expected.forward_backward) < 5.0 / np.sqrt(q2.size)


def test_light_couplings_of_a_study(tmp_path: Path) -> None:
    """Each lepton has its own; ratios are over the mean of e and mu; without any nothing changes."""
    read = study(tmp_path, "[wilson]\nSR = 0.5\n[wilson.mu]\nVL = -0.05\nVR = [0, 0.1]\nT = 0.06\n")
    assert read.wilson.couplings == WilsonCoefficients(SR=0.5)
    assert read.wilson.by_lepton.mu == WilsonCoefficients(VL=-0.05, VR=0.1j, T=0.06)
    assert read.wilson.by_lepton.e == WilsonCoefficients()
    given = {name: {key: [value.real, value.imag] for key, value in part.items()} for name, part in LIGHT.items()}
    made, plain = marlow_study(wilson={"SR": 0.5, **given}), marlow_study(wilson={"SR": 0.5})
    for plan, old in zip(plan_channels(made), plan_channels(plain), strict=True):
        decay = plan.channel.decay
        wanted = LIGHT.get(decay.lepton, {"SR": 0.5})
        assert decay.couplings == WilsonCoefficients(**wanted)
        reference = replace(decay, wilson=None if decay.lepton in LIGHT else {"SR": 0.5})
        # D** too: a measured branching fraction moves with the width of its decay
        growth = gen.observables(decay).rate / gen.observables(reference).rate
        assert plan.expected == pytest.approx(old.expected * growth, rel=1e-12), plan.channel.name
    for name, charm in (("R_D", "D-"), ("R_Dst", "D*-")):
        expected = gen.ratio("B0", charm, wilson={"SR": 0.5}, light=LIGHT)
        assert predicted_ratio(made, name, ("B0",)) == pytest.approx(expected, rel=1e-12)


def test_light_couplings_in_the_table_of_rates() -> None:
    table = rates_table(("D*",), parents=("B0",), wilson={"SR": 0.5}, light=LIGHT)
    assert table.ratios[0].value == pytest.approx(gen.ratio("B0", "D*-", wilson={"SR": 0.5}, light=LIGHT), rel=1e-12)
    for mode in table.modes:
        couplings = LIGHT.get(mode.decay.lepton, {"SR": 0.5})
        assert mode.values == gen.observables(gen.Decay("B0", "D*-", mode.decay.lepton, wilson=couplings))


def test_no_mode_with_a_muon() -> None:
    modes = [
        {"component": "x", "charm": ["D"], "leptons": ["e"], "events": 9},
        {"component": "y", "charm": ["D"], "leptons": ["tau"], "events": 9, "scales_with": "R_D", "follows": "x"},
    ]
    with pytest.raises(Exception, match="acts on nothing: no mode has a muon"):
        marlow_study(wilson={"mu": {"VL": 0.1}}, mode=modes)


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
    study(tmp_path, "[wilson]\nSR = 0.3\n[wilson.mu]\nVL = [0.02, -0.1]\n")
    assert main(["rates", str(tmp_path / "study.toml"), "--json"]) == 0
    document = json.loads(capsys.readouterr().out)
    assert document["wilson"]["mu"]["VL"] == [0.02, -0.1]
    assert document["wilson"]["e"]["VL"] == [0.0, 0.0]
    expected = gen.ratio("B0", "D-", wilson={"SR": 0.3}, light={"mu": {"VL": 0.02 - 0.1j}})
    found = next(r["value"] for r in document["ratios"] if (r["parent"], r["charm"]) == ("B0", "D-"))
    assert found == pytest.approx(expected, rel=1e-12)
    assert main(["rates", str(tmp_path / "study.toml")]) == 0
    assert "Couplings of the μ beyond the Standard Model: C_VL = 0.02 − 0.1i" in " ".join(
        capsys.readouterr().out.split()
    )
