"""Covariances as nuisances: directions that are independent, ordered, cut, and shared between decays."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from semitau import gen
from semitau.core.errors import InputError
from semitau.gen.decays.form_factor_directions import directions, moved
from semitau.gen.decays.form_factor_set import read_form_factors
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.component_plan import plan_channels
from semitau.gen.templates.fit_components import template_nuisances
from semitau.gen.templates.variations import varied_set

from .small_study import TEXT

PAIRS = [
    (name, transition)
    for name in ("BCL-2021", "BCL-2022", "BGL-2021", "CLN-2012", "CLN-2021", "HQE-2021")
    for transition in gen.form_factors(name).transitions
]


@pytest.mark.parametrize(("name", "transition"), PAIRS)
def test_directions_add_up_to_the_covariance(name: str, transition: str) -> None:
    """Sum of outer products = covariance; by effect what is lost is the normalisation alone."""
    chosen = gen.form_factors(name)
    covariance = chosen[transition].covariance
    errors = np.array(chosen[transition].errors)
    by_variance = directions(chosen, transition, "variance")
    np.testing.assert_allclose(by_variance.shifts.T @ by_variance.shifts, covariance, rtol=1e-9, atol=1e-15)
    by_effect = directions(chosen, transition, "effect")
    assert np.all(np.diff(by_effect.shares) <= 0)
    assert by_effect.shares.sum() == pytest.approx(1.0)
    lost = (covariance - by_effect.shifts.T @ by_effect.shifts) / np.outer(errors, errors)
    eigenvalues = np.linalg.eigvalsh(lost)
    assert eigenvalues[0] > -1e-6
    assert len(errors) - len(by_effect.shifts) <= 3  # normalisations of D and D*, and one that spectra do not feel


def mean_square_change(name: str, transition: str, shift: np.ndarray) -> float:
    """Change of the shape of d Gamma/d q2 of mu and tau, on a plain grid: independent of how directions are found."""
    chosen = gen.form_factors(name)
    charm = {"D": "D-", "Dst": "D*-"}[transition]
    total = 0.0
    for lepton in ("mu", "tau"):
        shapes = []
        for sign in (0.0, 1.0, -1.0):
            shifts = dict(zip(chosen[transition].names, sign * shift, strict=True))
            decay = gen.Decay("B0", charm, lepton, chosen.shifted(shifts, transition))
            low, high = decay.q2_range
            rate = gen.differential_rate(decay, low + (high - low) * (np.arange(400) + 0.5) / 400)
            shapes.append(rate / rate.sum())
        total += float(np.sum((0.5 * (shapes[1] - shapes[2])) ** 2 / shapes[0]))
    return total


@pytest.mark.parametrize("name", ["BCL-2021", "BGL-2021"])
def test_effect_is_what_spectra_feel(name: str) -> None:
    """B -> D has no transverse part, so the shares are those of the change of d Gamma/d q2 alone, here on a grid."""
    found = directions(gen.form_factors(name), "D", "effect")
    felt = np.array([mean_square_change(name, "D", shift) for shift in found.shifts[:3]])
    np.testing.assert_allclose(felt / felt[0], found.shares[:3] / found.shares[0], rtol=0.03)
    # Neither order nor rotation loses or makes effect.
    by_variance = directions(gen.form_factors(name), "D", "variance")
    total = sum(mean_square_change(name, "D", shift) for shift in by_variance.shifts)
    assert felt.sum() / total == pytest.approx(found.shares[:3].sum(), rel=0.03)


def test_normalisation_has_no_effect(tmp_path: Path) -> None:
    """CLN for D has one parameter that changes a shape; CLN for D* four, R0 among them for the tau only."""
    assert len(directions(gen.form_factors("CLN-2021"), "D", "effect").shifts) == 1
    assert len(directions(gen.form_factors("CLN-2021"), "Dst", "effect").shifts) == 4
    found = directions(gen.form_factors("CLN-2021"), "D", "variance")
    assert found.shares.tolist() == [1.0, 0.0]


def test_cut() -> None:
    found = directions(gen.form_factors("BCL-2021"), "D", "effect")
    assert found.kept(1e-6) == 1
    assert found.kept(1.0) == len(found.shares)
    for keep in (0.9, 0.99, 0.9999):
        count = found.kept(keep)
        assert found.shares[:count].sum() >= keep - 1e-9
        assert found.shares[: count - 1].sum() < keep


def test_shared_parameters_move_together() -> None:
    chosen = gen.form_factors("HQE-2021")
    for name in ("D", "Dst"):
        other = moved(chosen, name, "effect", 0, 1.0)
        assert other["D"].values == other["Dst"].values != chosen["D"].values
    np.testing.assert_array_equal(directions(chosen, "D", "effect").shares, directions(chosen, "Dst", "effect").shares)
    assert chosen.shifted({"eta(1)": 0.1})["D"].parameters == chosen.shifted({"eta(1)": 0.1})["Dst"].parameters


DIRECTIONS = '\n[[variation]]\nname = "ff"\nkind = "form_factor_directions"\nset = "Dst"\n'


def study(folder: Path, text: str) -> StudyConfig:
    path = folder / "study.toml"
    path.write_text(text, encoding="utf-8")
    return read_study(path)


def test_one_table_is_many_nuisances(tmp_path: Path) -> None:
    """Shared between e, mu, tau and B+, B0: every D* chain has every one of them, with one and the same set."""
    made = study(tmp_path, TEXT + DIRECTIONS)
    chosen = gen.form_factors("CLN-2021")
    kept = directions(chosen, "Dst", "effect").kept(0.99)
    names = [f"ff_{k}" for k in range(1, kept + 1)]
    assert [v.name for v in made.variations] == ["R0", "muon_id", *names]
    assert [(n.name, n.group) for n in template_nuisances(made)][2:] == [(name, "form factors") for name in names]
    sets: dict[tuple[str, int], set[object]] = {}
    seen = set()
    for plan in plan_channels(made):
        mine = {side: decay for side, decay in plan.variations.decays.items() if side[0] in names}
        assert len(mine) == (2 * kept if plan.channel.family == "D*" else 0)
        if mine:
            seen.add((plan.channel.parent, plan.channel.lepton))
        for side, decay in mine.items():
            sets.setdefault(side, set()).add(decay.form_factor_set)
    assert seen == {(parent, lepton) for parent in ("B+", "B0") for lepton in ("e", "mu", "tau")}
    for k, name in enumerate(names):
        for sign in (1, -1):
            assert sets[name, sign] == {moved(chosen, "Dst", "effect", k, float(sign))}
            assert varied_set(made, made.variations[2 + k], sign) in sets[name, sign]  # type: ignore[arg-type]


def test_one_set_for_both_moves_both(tmp_path: Path) -> None:
    text = TEXT.replace("[[mode]]", '[form_factors]\nD = "HQE-2021"\nDst = "HQE-2021"\n\n[[mode]]', 1)
    text = text.replace('parameter = "R0(1)"', 'parameter = "eta(1)"')
    made = study(tmp_path, text + DIRECTIONS.replace("ff", "hqe"))
    for plan in plan_channels(made):
        ground = plan.channel.family in ("D", "D*")
        assert (("R0", 1) in plan.variations.decays) == ground
        assert (("hqe_1", -1) in plan.variations.decays) == ground


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ("keep = 1.5", "variation[ff].keep: must not be above 1 (got 1.5)"),
        ("keep = 0", "variation[ff].keep: must be above 0 (got 0)"),
        ('order = "size"', 'variation[ff].order: is not known here (got "size", allowed variance, effect)'),
        ("at_most = 0", "variation[ff].at_most: must be above 0 (got 0)"),
    ],
)
def test_wrong_keys(change: str, message: str, tmp_path: Path) -> None:
    with pytest.raises(InputError) as error:
        study(tmp_path, TEXT + DIRECTIONS + change + "\n")
    assert message in str(error.value)


def test_conflicts(tmp_path: Path) -> None:
    with pytest.raises(
        InputError, match=r"variation\[muon_id\].name: names a variation that there is already .*muon_id_1"
    ):
        study(tmp_path, TEXT.replace('"R0"', '"muon_id_1"') + DIRECTIONS.replace('"ff"', '"muon_id"'))
    with pytest.raises(InputError, match=r"variation\[ff\].set: acts on nothing: no mode has these"):
        study(tmp_path, no_excited(TEXT) + DIRECTIONS.replace('"Dst"', '"Dss"'))
    shared = TEXT.replace("[[mode]]", '[form_factors]\nD = "HQE-2021"\nDst = "HQE-2021"\n\n[[mode]]', 1)
    shared = shared.replace('parameter = "R0(1)"', 'parameter = "eta(1)"').replace('set = "Dst"', 'set = "D"')
    with pytest.raises(InputError, match=r"variation\[ff\].set: moves what R0 moves already"):
        study(tmp_path, shared + DIRECTIONS)
    (tmp_path / "exact.toml").write_text(
        '[D]\nparametrisation = "CLN"\nsource = "ours"\nvalues = { "V1(1)" = 1, rho2 = 1 }\n'
        'errors = { "V1(1)" = 0.1, rho2 = 0 }\n',
        encoding="utf-8",
    )
    own = TEXT.replace("[[mode]]", '[form_factors]\nD = { file = "exact.toml" }\n\n[[mode]]', 1)
    assert len(read_form_factors(tmp_path / "exact.toml")["D"].directions) == 2
    with pytest.raises(InputError, match=r"variation\[ff\].set: acts on nothing: the set has no covariance"):
        study(tmp_path, own + DIRECTIONS.replace('"Dst"', '"D"'))


def no_excited(text: str) -> str:
    start = text.index('[[mode]]\ncomponent = "Dss"')
    return text[:start] + text[text.index("[[background]]") :]


def test_at_most(tmp_path: Path) -> None:
    made = study(tmp_path, TEXT + DIRECTIONS + 'at_most = 1\nlabel = "D* form factors"\ngroup = "theory"\n')
    (last,) = made.variations[2:]
    assert (last.name, last.label, last.budget_group) == ("ff_1", "D* form factors, direction 1", "theory")
    by_variance = study(tmp_path, TEXT + DIRECTIONS + 'order = "variance"\nkeep = 1\n')
    # h(1) alone is one of the five directions, and acts on nothing
    assert len(by_variance.variations) == 2 + 4
