"""Exact relations of form-factor sets: which hold by construction, which within errors, and what is said if not."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import MASS
from semitau.gen.decays.exact_relations import Relation, exact_relations
from semitau.gen.decays.form_factor_set import read_form_factors
from semitau.gen.decays.form_factor_values import PseudoscalarFormFactors, VectorFormFactors

BUILT_IN = {
    ("BCL-2021", "D"): {"f+(0) = f0(0)"},
    ("HQE-2021", "D"): {"f+(0) = f0(0)"},
    ("BCL-2022", "Dst"): {"A0(0) = A3(0)", "F1 = (M-m) f at zero recoil"},
    ("BGL-2021", "Dst"): {"F1 = (M-m) f at zero recoil"},
    ("CLN-2012", "Dst"): {"F1 = (M-m) f at zero recoil"},
    ("CLN-2021", "Dst"): {"F1 = (M-m) f at zero recoil"},
    ("HQE-2021", "Dst"): {"A0(0) = A3(0)", "F1 = (M-m) f at zero recoil"},
}
PAIRS = [
    (name, transition)
    for name in gen.form_factor_sets()
    for transition in gen.form_factors(name).transitions
    if transition != "Dss"
]


def by_name(name: str, transition: str) -> dict[str, Relation]:
    return {relation.name: relation for relation in exact_relations(gen.form_factors(name), transition)}


@pytest.mark.parametrize(("name", "transition"), PAIRS)
def test_shipped_sets(name: str, transition: str) -> None:
    found = by_name(name, transition)
    assert {key for key, relation in found.items() if relation.status == "exact"} == BUILT_IN.get(
        (name, transition), set()
    )
    assert all(relation.status != "broken" for relation in found.values())


@pytest.mark.parametrize("charm", ["D+", "D0", "D*+", "D*0"])
def test_built_in_for_both_charges(charm: str) -> None:
    """Not only for the masses that the check takes."""
    M, m = MASS["B0" if charm.endswith("+") else "B+"], MASS[charm]
    names = ("BCL-2021", "HQE-2021") if "*" not in charm else ("BCL-2022", "HQE-2021")
    for name in names:
        origin = gen.form_factors(name)["Dst" if "*" in charm else "D"](M, m, np.zeros(1))
        if isinstance(origin, PseudoscalarFormFactors):
            assert origin.f_plus[0] == pytest.approx(origin.f_zero[0], rel=1e-12)
        else:
            assert origin.F1[0] == pytest.approx((M * M - m * m) * origin.A0[0], rel=1e-12)
            rest = gen.form_factors(name)["Dst"](M, m, np.array([(M - m) ** 2]))
            assert isinstance(rest, VectorFormFactors)
            assert rest.F1[0] == pytest.approx((M * M - m * m) * rest.A1[0], rel=1e-12)


def test_unitarity_sums() -> None:
    """Written out: sum of squares by channel, F1_0 from f_0 by F1 = (M - m) f at zero recoil."""
    p = gen.form_factors("BGL-2021")["Dst"].parameters
    found = by_name("BGL-2021", "Dst")
    assert found["unitarity sum 1-"].value == pytest.approx(0.0330**2 + 0.156**2 + 0.12**2)
    r = MASS["D*+"] / MASS["B0"]
    first = p["f_0"] * (1 - r) / (np.sqrt(2) * (1 + np.sqrt(r)) ** 2)
    expected = sum(p[f"f_{n}"] ** 2 for n in range(3)) + first**2 + p["F1_1"] ** 2 + p["F1_2"] ** 2
    assert found["unitarity sum 1+"].value == pytest.approx(expected)
    # Error of a sum of squares, linear: 2 a sigma in quadrature.
    errors = dict(
        zip(gen.form_factors("BGL-2021")["Dst"].names, gen.form_factors("BGL-2021")["Dst"].errors, strict=True)
    )
    linear = np.sqrt(sum((2 * p[f"g_{n}"] * errors[f"g_{n}"]) ** 2 for n in range(3)))
    assert found["unitarity sum 1-"].error == pytest.approx(linear, rel=1e-9)


def test_broken(tmp_path: Path) -> None:
    path = tmp_path / "set.toml"
    text = '[D]\nparametrisation = "BGL"\nsource = "ours"\n'
    text += "values = { plus_0 = 0.0126, plus_1 = -1.2, zero_0 = 0.0114, zero_1 = -0.059 }\n"
    text += "errors = { plus_0 = 0.0001, plus_1 = 0.01, zero_0 = 0.0001, zero_1 = 0.001 }\n"
    path.write_text(text, encoding="utf-8")
    found = {relation.name: relation for relation in exact_relations(read_form_factors(path), "D")}
    assert found["unitarity sum 1-"].status == "broken"
    assert found["unitarity sum 1-"].value == pytest.approx(1.44, abs=0.01)
    assert found["f+(0) = f0(0)"].status == "broken"
    assert found["unitarity sum 0+"].status == "holds"


def test_orbital_states_have_none() -> None:
    assert exact_relations(gen.form_factors("IW-1998"), "Dss") == ()
