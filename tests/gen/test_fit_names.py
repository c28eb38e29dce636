"""Names in [fit]: wrong ones are found when the file is read; right ones are those that the templates will have.

Nothing is random.
"""

from __future__ import annotations

from pathlib import Path
from typing import Any

import pytest
from semitau.core.errors import InputError
from semitau.gen.study_file.idle_variations import nuisance_names
from semitau.gen.study_file.parameter_names import parameter_names
from semitau.gen.study_file.reader import read_study
from semitau.gen.templates.fit_components import components_and_parameters, template_coefficients, template_nuisances

from .small_study import TEXT

WITH_SR = '[quadratic]\ncoefficients = ["SR", "Im_T"]\n'
PARAMETERS = "R_D, R_Dst, yield_D_tau, yield_Dst_tau"


def read(tmp_path: Path, tables: str) -> Any:
    path = tmp_path / "study.toml"
    path.write_text(f"{TEXT}\n{tables}", encoding="utf-8")
    return read_study(path)


def complaint(tmp_path: Path, tables: str) -> list[str]:
    with pytest.raises(InputError) as error:
        read(tmp_path, tables)
    return [str(problem).split("study.toml:")[-1].split(": ", 1)[1] for problem in error.value.problems]


WRONG = {
    "[fit.fixed]\nyield_Dss_light = 1.0": "fit.fixed.yield_Dss_light: names no parameter of the fit",
    '[fit.functions]\nR_Dst = "0.86 * R_DD"': 'fit.functions.R_Dst: names no parameter of the fit (got "R_DD"',
    '[fit.functions]\nR_Dst_B0 = "R_Dst"': "fit.functions.R_Dst_B0: names no parameter of the fit",
    "[fit.constraints]\nmuon_idd = { gaussian = 0.5 }": "fit.constraints.muon_idd: names no parameter of the fit",
    "[fit.bounds]\nr_D = { min = 0 }": "fit.bounds.r_D: names no parameter of the fit",
    '[[fit.correlated]]\nparameters = ["R0", "Muon"]\nerrors = [1, 1]\ncorrelations = [[1, 0], [0, 1]]': (
        'fit.correlated[1].parameters[2]: names no parameter of the fit (got "Muon"'
    ),
    '[fit]\napart = ["R1"]': 'fit.apart[1]: names no variation (got "R1", allowed R0, muon_id). Did you mean "R0"?',
    '[fit.mirrored]\nR_D = "plus"': "fit.mirrored.R_D: names no variation",
    '[fit]\napart = ["R0"]\n[fit.fixed]\nR0 = 0': (
        'fit.fixed.R0: names no parameter of the fit (got "R0", allowed R_D, R_Dst'
    ),
    '[fit]\ncoefficients = ["SR"]': (
        'fit.coefficients[1]: is nothing that templates are functions of (got "SR", allowed none). '
        "Add a [quadratic] table that names it."
    ),
    f'{WITH_SR}[fit]\ncoefficients = ["SL"]': (
        'fit.coefficients[1]: is nothing that templates are functions of (got "SL", allowed SR, Im_T). '
        'Did you mean "SR"?'
    ),
    f'{WITH_SR}[fit]\ncoefficients = ["SR", "SR"]': "fit.coefficients: must not name anything twice",
    f'{WITH_SR}[fit]\ncoefficients = ["SR"]\nlikelihood = "exact"': (
        'fit.coefficients: cannot be fitted with likelihood = "exact" (got ["SR"]). Take likelihood = "light"'
    ),
    f'{WITH_SR}[blinding]\nkind = "offset"\nwidth = 0.1\n[fit]\ncoefficients = ["SR"]\ndata = "pseudo"': (
        'fit.coefficients: would give hidden ratios away (got ["SR"])'
    ),
    f'{WITH_SR}[fit]\ncoefficients = ["SR"]\n[fit.functions]\nR_D = "1.1 * R_Dst"': (
        'fit.functions.R_D: already follows the fitted coefficients (got "1.1 * R_Dst"). Take one of them away.'
    ),
    f"{WITH_SR}[fit.bounds]\nSR = {{ min = 0 }}": "fit.bounds.SR: names no parameter of the fit",
}


@pytest.mark.parametrize("tables", WRONG)
def test_unknown_names_are_found_when_the_file_is_read(tmp_path: Path, tables: str) -> None:
    found = complaint(tmp_path, tables)
    assert any(text.startswith(WRONG[tables]) for text in found), found
    assert len(found) == 1


def test_remedies(tmp_path: Path) -> None:
    assert "Did you mean" in complaint(tmp_path, "[fit.bounds]\nr_D = { min = 0 }")[0]
    (found,) = complaint(tmp_path, f"{WITH_SR}[fit.bounds]\nSR = {{ min = 0 }}")
    assert found.endswith("Float it: name it in fit.coefficients.")
    (found,) = complaint(tmp_path, '[fit]\napart = ["R0"]\n[fit.fixed]\nR0 = 0')
    assert found.endswith("It is apart: take R0_shape or R0_rate.")


RIGHT = {
    "plain": "",
    "floated": f'{WITH_SR}[fit]\ncoefficients = ["Im_T"]\n[fit.bounds]\nIm_T = {{ min = 0 }}',
    "apart": '[fit]\napart = ["R0"]\n[fit.fixed]\nR0_shape = 0\nmuon_id = 0\nyield_fakes = 1',
    "separate": (
        '[fit]\nratios = "separate"\n[fit.functions]\nR_D_B0 = "R_D_Bp"\nyield_Dst_light_Bp = "yield_Dst_light_B0"\n'
        "[fit.constraints]\nyield_Dst_light_B0 = { gaussian = 0.1 }"
    ),
    "imported": (
        '[[import.component]]\ncomponent = "other"\nfile = "study.toml"\nhistogram = "h"\n'
        '[[import.component.variations]]\nname = "foreign"\nplus = "p"\nmirror = true\n'
        "[fit.fixed]\nforeign = 0\nyield_other = 1.0"
    ),
    "directions": (
        '[[variation]]\nname = "shape"\nkind = "form_factor_directions"\nset = "D"\n[fit.fixed]\nshape_1 = 0'
    ),
}


@pytest.mark.parametrize("kind", RIGHT)
def test_names_are_those_of_the_templates(tmp_path: Path, kind: str) -> None:
    """Against what the build makes its template set from; imported ones and parts against docs/statistics.md."""
    made = read(tmp_path, RIGHT[kind])
    sections = made.sections(folder=tmp_path)
    variations = [name for table in made.variation_tables for name in nuisance_names(sections, table)]
    names = parameter_names(made, variations)
    _, parameters = components_and_parameters(made)
    extra = ["yield_other"] if kind == "imported" else []
    assert sorted([*names.ratios, *names.yields]) == sorted([p.name for p in parameters] + extra)
    own = [nuisance.name for nuisance in template_nuisances(made)]
    assert list(names.variations) == own + (["foreign"] if kind == "imported" else [])
    if kind == "apart":
        assert names.nuisances == ("R0_shape", "R0_rate", "muon_id")
    assert list(names.coefficients) == [known.name for known in template_coefficients(made)]


def test_names_are_not_judged_where_they_cannot_be_known(tmp_path: Path) -> None:
    """A variation that is wrong itself is told; names that would follow from it are not."""
    found = complaint(
        tmp_path,
        '[[variation]]\nname = "shape"\nkind = "form_factor_directions"\nset = "Dss"\n'
        '[form_factors]\nDss = "IW-2099"\n[fit.fixed]\nshape_1 = 0',
    )
    assert len(found) == 1
    assert found[0].startswith("form_factors.Dss: is no form-factor set")
