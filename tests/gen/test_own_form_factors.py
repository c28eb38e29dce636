"""Form-factor sets that users bring: what is read is what was written, and what is wrong is told with its numbers."""

from __future__ import annotations

import json
import re
from pathlib import Path

import numpy as np
import pytest
from semitau import gen
from semitau.core.errors import InputError
from semitau.gen.decays import form_factor_set
from semitau.gen.decays.form_factor_parameters import FIXED
from semitau.gen.decays.form_factor_set import read_form_factors
from semitau.gen.study_file.reader import read_study
from semitau.gen.templates.component_plan import plan_channels, predicted_ratio
from semitau.gen.truth.decay_record import decay_as_data, decay_from_data

from .small_study import TEXT

FOLDER = Path(form_factor_set.__file__).parent / "form_factor_sets"
TOML = """\
[D]
parametrisation = "CLN"
source = "ours"
values = { "V1(1)" = 1.05, rho2 = 1.1 }
covariance = [
    [1e-4, 2e-5],
    [2e-5, 4e-3],
]
"""
CSV = """\
# ours
parameter, value, V1(1), rho2
V1(1), 1.05, 1e-4, 2e-5
rho2, 1.1, 2e-5, 4e-3
"""


def written(folder: Path, text: str, name: str = "set.toml") -> Path:
    path = folder / name
    path.write_text(text, encoding="utf-8")
    return path


def problems(path: Path, *more: str) -> str:
    with pytest.raises(InputError) as error:
        read_form_factors(path, *more)
    return str(error.value).replace(f"{path.parent}/", "")


@pytest.mark.parametrize("name", gen.form_factor_sets())
def test_shipped_sets_come_back(name: str, tmp_path: Path) -> None:
    """A shipped set written by hand as a covariance is the same set."""
    chosen = gen.form_factors(name)
    lines = []
    for member in chosen.members[:1] if chosen.shared else chosen.members:
        table = '"D+Dst"' if chosen.shared else member.transition
        values = ", ".join(f'"{key}" = {value!r}' for key, value in member.parameters.items())
        lines += [f"[{table}]", f'parametrisation = "{member.parametrisation}"', f'source = "{member.source}"']
        lines += [f"values = {{ {values} }}", f"covariance = {member.covariance.tolist()}"]
    back = read_form_factors(written(tmp_path, "\n".join(lines)))
    assert back.transitions == chosen.transitions
    assert back.shared == chosen.shared
    for mine, theirs in zip(back.members, chosen.members, strict=True):
        assert mine.parameters == theirs.parameters
        np.testing.assert_allclose(mine.covariance, theirs.covariance, rtol=1e-12, atol=1e-18)


def test_both_formats_say_the_same(tmp_path: Path) -> None:
    toml = read_form_factors(written(tmp_path, TOML))["D"]
    table = read_form_factors(written(tmp_path, CSV, "set.csv"), "CLN", "D")["D"]
    assert toml.parameters == table.parameters == {"V1(1)": 1.05, "rho2": 1.1}
    np.testing.assert_array_equal(toml.covariance, table.covariance)
    assert toml.errors == pytest.approx((0.01, np.sqrt(4e-3)))
    assert toml.correlation[0][1] == pytest.approx(2e-5 / (0.01 * np.sqrt(4e-3)))


def test_fixed_parameter(tmp_path: Path) -> None:
    fixed = TOML.replace("[1e-4, 2e-5]", "[0, 0]").replace("[2e-5, 4e-3]", "[0, 4e-3]")
    member = read_form_factors(written(tmp_path, fixed))["D"]
    assert member.errors[0] == 0.0
    np.testing.assert_allclose(member.directions.T @ member.directions, member.covariance, atol=1e-18)


WRONG = {
    "not symmetric": (
        "[2e-5, 4e-3]",
        "[3e-5, 4e-3]",
        "set.toml:5: D.covariance: is not symmetric (got 2e-05 for V1(1), rho2 and 3e-05 the other way round)",
    ),
    # Eigenvalues of [[1, c], [c, 1]] are 1 - c and 1 + c; here c = 7e-4 / (0.01 sqrt(4e-3)) = 1.10680.
    "not positive definite": (
        "2e-5",
        "7e-4",
        "set.toml:5: D.covariance: is not positive definite (got eigenvalue -0.107 of the correlation matrix, along",
    ),
    "negative variance": ("[1e-4, ", "[-1e-4, ", "has a negative variance (got -0.0001 for V1(1))"),
    "variance zero, covariance not": ("[1e-4, ", "[0, ", "is not positive definite (got no variance but a covariance"),
    "not square": ("[2e-5, 4e-3],", "", "must be a square matrix, a row a parameter (got rows of 2, allowed 2 × 2)"),
    "not finite": ("4e-3", "nan", "set.toml:7: D.covariance.1: must be finite numbers (got nan for rho2, rho2)"),
    "missing parameter": (
        'values = { "V1(1)" = 1.05, rho2 = 1.1 }\ncovariance = [\n    [1e-4, 2e-5],\n    [2e-5, 4e-3],\n]',
        "values = { rho2 = 1.1 }\ncovariance = [[4e-3]]",
        "lacks parameters of CLN for B -> D (got rho2, allowed V1(1), rho2). Add V1(1).",
    ),
    "unknown parameter": ("rho2", "rho3", "has parameters that CLN for B -> D does not know (got rho3,"),
    "unknown parametrisation": ("CLN", "CLM", "is no parametrisation of B -> D (got CLM, allowed BCL, BGL, CLN, HQE)"),
    "no source": ('source = "ours"\n', "", "D: D.source: lacks source (got nothing, allowed a text)"),
    "unknown key": ("source =", "sauce = 1\nsource =", "D.sauce: unknown key (got sauce,"),
    "unknown transition": ("[D]", "[Ds]", "Ds: is no transition (got Ds, allowed D, Dst, Dss"),
    "text for a number": ("1.05", '"1.05"', "must be a finite number (got 1.05)"),
    "no TOML": ("[D]", "[D", "is no TOML"),
}


@pytest.mark.parametrize("name", WRONG)
def test_what_is_wrong(name: str, tmp_path: Path) -> None:
    old, new, message = WRONG[name]
    assert old in TOML
    said = problems(written(tmp_path, TOML.replace(old, new)))
    expected = message.replace("D: D.source", "D.source")
    assert expected in said, said


def test_errors_and_correlations(tmp_path: Path) -> None:
    head = TOML.split("covariance")[0]
    good = head + 'errors = { "V1(1)" = 0.01, rho2 = 0.06 }\ncorrelations = [["V1(1)", "rho2", 0.3]]\n'
    assert read_form_factors(written(tmp_path, good))["D"].correlation[0][1] == pytest.approx(0.3)
    for old, new, message in (
        ("0.3]", "1.3]", "D.correlations: is not positive definite (got eigenvalue -0.3 of"),
        ('"rho2", 0.3', '"rho", 0.3', "needs two different parameters (got rho, allowed V1(1), rho2)"),
        ("rho2 = 0.06", "rho2 = -0.06", "must not be below 0 (got -0.06)"),
        ("rho2 = 0.06", "rho3 = 0.06", "D.errors: lacks a parameter (got V1(1), rho3, allowed V1(1), rho2)"),
        ("errors =", "covariance = [[1, 0], [0, 1]]\nerrors =", "needs either covariance or errors"),
    ):
        assert message in problems(written(tmp_path, good.replace(old, new)))
    assert "needs either covariance or errors" in problems(written(tmp_path, head))


def test_series(tmp_path: Path) -> None:
    """Expansions of any length, without gaps."""
    names = ["plus_0", "plus_1", "zero_0"]
    text = '[D]\nparametrisation = "BGL"\nsource = "ours"\nvalues = { plus_0 = 0.01, plus_1 = -0.1, zero_0 = 0.01 }\n'
    text += "errors = { plus_0 = 0.001, plus_1 = 0.01, zero_0 = 0.001 }\n"
    assert read_form_factors(written(tmp_path, text))["D"].names == tuple(names)
    said = problems(written(tmp_path, text.replace("plus_1", "plus_2")))
    assert "lacks parameters of BGL for B -> D (got plus_0, plus_2, zero_0" in said
    assert "Add plus_1." in said
    assert "Add zero_0." in problems(written(tmp_path, text.replace("zero_0", "null_0")))


@pytest.mark.parametrize(
    ("old", "new", "message"),
    [
        ("parameter, value", "name, value", "has no such heading (got name,value,V1(1),rho2"),
        ("V1(1), rho2\n", "rho2, V1(1)\n", "must name the same parameters in its lines and columns"),
        ("1.05, 1e-4, 2e-5", "1.05, 1e-4", "V1(1): has the wrong number of columns (got 3, allowed 4)"),
        ("1.05", "about 1", "V1(1).value: must be a finite number (got about 1)"),
        ("rho2, 1.1, 2e-5", "rho2, 1.1, 1e-5", "covariance: is not symmetric (got 2e-05 for V1(1), rho2 and 1e-05"),
    ],
)
def test_tables(old: str, new: str, message: str, tmp_path: Path) -> None:
    assert old in CSV
    assert message in problems(written(tmp_path, CSV.replace(old, new), "set.csv"), "CLN", "D")


def test_files(tmp_path: Path) -> None:
    assert "there is no such file" in problems(tmp_path / "none.toml")
    assert "cannot be read" in problems(tmp_path)
    assert "does not say its parametrisation" in problems(written(tmp_path, CSV, "set.csv"))
    assert "holds no form factors" in problems(written(tmp_path, ""))
    (tmp_path / "set.toml").write_bytes(b"\xff\xfe")
    assert "is no UTF-8 text" in problems(tmp_path / "set.toml")


def chosen(folder: Path, tables: str, variation: str = "") -> Path:
    text = TEXT.replace("[[mode]]", f"[form_factors]\n{tables}\n\n[[mode]]", 1)
    return written(folder, text + variation, "study.toml")


def test_in_a_study(tmp_path: Path) -> None:
    """The set is that of the decays, the rates and the injected ratio."""
    written(tmp_path, TOML)
    written(tmp_path, CSV, "set.csv")
    for source in ('{ file = "set.toml" }', '{ file = "set.csv", parametrisation = "CLN" }'):
        study = read_study(chosen(tmp_path, f"D = {source}"))
        own = study.form_factor_set("D")
        assert own["D"].parameters["rho2"] == 1.1
        models = {plan.channel.decay.model for plan in plan_channels(study) if plan.channel.family == "D"}
        assert models == {own["D"]}
        low, high = sorted(gen.ratio(p, c, own) for p, c in (("B+", "D0"), ("B0", "D-")))
        assert low < predicted_ratio(study, "R_D", ("B+", "B0")) < high


@pytest.mark.parametrize(
    ("tables", "message"),
    [
        ('D = { file = "none.toml" }', "form_factors.D.file: none.toml: there is no such file"),
        ('Dst = { file = "set.toml" }', "form_factors.Dst.file: set.toml: does not describe B -> D* (got B -> D)"),
        ('D = { file = "bad.toml" }', "form_factors.D.file: bad.toml:5: D.covariance: is not symmetric (got 2e-05 for"),
        ('D = { file = "set.csv" }', "form_factors.D: does not say its parametrisation"),
        ('D = { file = "set.toml", parametrisation = "CLN" }', "form_factors.D: needs no parametrisation"),
        ("D = 3", 'form_factors.D: is no form-factor set (got 3, allowed the name of a shipped set or { file = "my_'),
        ("D = { fil = 3 }", "form_factors.D.fil: unknown key"),
    ],
)
def test_wrong_in_a_study(tables: str, message: str, tmp_path: Path) -> None:
    written(tmp_path, TOML)
    written(tmp_path, CSV, "set.csv")
    written(tmp_path, TOML.replace("[2e-5, 4e-3]", "[3e-5, 4e-3]"), "bad.toml")
    with pytest.raises(InputError) as error:
        read_study(chosen(tmp_path, tables))
    said = str(error.value).replace(f"{tmp_path}/", "")
    assert any(line.startswith("study.toml:11: ") and message in line for line in said.splitlines()), said


def test_document() -> None:
    """docs/form_factors.md: every shipped set has a row, and its examples are sound."""
    text = (Path(__file__).parents[2] / "docs" / "form_factors.md").read_text(encoding="utf-8")
    for name in gen.form_factor_sets():
        assert f"| `{name}` |" in text, name
    for (parametrisation, transition), names in FIXED.items():
        for name in names:
            assert f"`{name}`" in text or parametrisation == "BCL", (parametrisation, transition, name)


def test_examples_of_the_document(tmp_path: Path) -> None:
    text = (Path(__file__).parents[2] / "docs" / "form_factors.md").read_text(encoding="utf-8")
    (own,) = re.findall(r"```toml\n(\[D\]\n.*?)```", text, re.DOTALL)
    (table,) = re.findall(r"```csv\n(.*?)```", text, re.DOTALL)
    assert gen.read_form_factors(written(tmp_path, own)).transitions == ("D",)
    assert gen.read_form_factors(written(tmp_path, table, "my_set.csv"), "CLN", "D").transitions == ("D",)


def test_quark_masses(tmp_path: Path) -> None:
    """Masses of an expansion must be masses; a shift of several standard deviations still is one."""
    shipped = (FOLDER / "HQE-2021.toml").read_text(encoding="utf-8")
    said = problems(written(tmp_path, shipped.replace("m_b-m_c = 3.3984", "m_b-m_c = 4.9")))
    assert "has quark masses out of range (got m_b = 4.7481, m_c = -0.1519 GeV, allowed m_b from 4 to 5.2" in said


def test_events_know_their_set(tmp_path: Path) -> None:
    """Through the data that events carry, a set of one's own and a shared one come back equal."""
    own = gen.read_form_factors(written(tmp_path, TOML))
    for decay in (gen.Decay("B0", "D-", "mu", own), gen.Decay("B0", "D*-", "tau", "HQE-2021", {"T": 0.1}, "HQE")):
        back = decay_from_data(json.loads(json.dumps(decay_as_data(decay))))
        assert back == decay
        assert back.form_factor_set.shared == decay.form_factor_set.shared
