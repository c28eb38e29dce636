"""Templates as functions of form factors: pieces of events against the weights of `variation_weights` (which are
checked against products of Dirac matrices), spectra against quadrature, templates against direct generation.

Statistical tests fail by chance with the probability named at each; SEMITAU_TEST_SEED changes the seed.
"""

from __future__ import annotations

import os
import tomllib
from functools import cache
from itertools import pairwise
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from scipy.integrate import quad
from scipy.stats import chi2
from semitau import gen
from semitau.core.errors import InputError
from semitau.core.quadratic import form_at, monomials, reweightings, templates_at
from semitau.core.streams import stream_key
from semitau.core.templates import TemplateSet
from semitau.gen import block as row
from semitau.gen.block import LANES, new_block
from semitau.gen.decays.chains import Channel, chains_of
from semitau.gen.decays.form_factor_directions import directions
from semitau.gen.decays.form_factor_set import FormFactorSet
from semitau.gen.decays.form_factor_shifts import FormFactorShift, bent_pairs, shifted_decay
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.component_plan import predicted_ratio
from semitau.gen.templates.fit_components import components_and_parameters
from semitau.gen.truth.bilinear_pieces import bilinear_pieces, piece_table
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.variation_weights import variation_table, variation_weights

from .marlow_study import TEXT, study
from .small_study import TEXT as SMALL

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
SETS = {"D": "BCL-2021", "Dst": "BGL-2021"}


def shifts(transition: str, number: int = 3) -> tuple[FormFactorShift, ...]:
    """The largest directions of a shipped set."""
    chosen = gen.form_factors(SETS[transition])
    names, rows = chosen[transition].names, directions(chosen, transition, "variance").shifts[:number].tolist()
    return tuple(
        FormFactorShift(f"{transition}_{k}", (transition,), tuple(zip(names, one, strict=True)), 1.0, "", "")
        for k, one in enumerate(rows)
    )


ALL = shifts("D") + shifts("Dst")
CHAINS = [
    ("D-", "mu", "mu", "none"),
    ("D-", "tau", "pi", "none"),
    ("D*-", "e", "mu", "charged_pion"),
    ("D*-", "mu", "mu", "photon"),
    ("D*-", "tau", "e", "neutral_pion"),
]


def channel(charm: str, lepton: str, tau_to: str, soft: str, wilson: dict[str, complex] | None = None) -> Channel:
    transition = "Dst" if "*" in charm else "D"
    decay = gen.Decay("B0", charm, lepton, form_factors=SETS[transition], wilson=wilson)
    return next(chain for chain in chains_of(decay, (tau_to,)) if chain.soft == soft)


@pytest.mark.parametrize("wilson", [None, {"SR": 0.3 + 0.1j, "T": 0.05j, "VR": -0.1}], ids=["SM", "beyond"])
@pytest.mark.parametrize("chain", CHAINS, ids=" ".join)
def test_pieces_give_the_weight_at_any_point(chain: tuple[str, ...], wilson: dict[str, complex] | None) -> None:
    """For light leptons too, and at complex couplings; directions of the other decay count nothing. Exact but for
    rounding."""
    at_work = channel(*chain, wilson=wilson)
    taken = ALL if wilson is None else ALL[:2] + ALL[3:5]
    table, found = piece_table(at_work, taken)
    if wilson is None:
        assert (table.operators, table.pieces) == (4, 10)
    else:  # real and imaginary parts; some parameters move real amplitudes alone
        assert table.operators <= 6
        assert table.pieces == table.operators**2
    x = new_block()
    draw_decays(x, channel_table(at_work), stream_key(SEED, "shifts"), np.uint64(0))
    pieces, weights = np.zeros((LANES, table.pieces)), np.zeros((LANES, 1))
    bilinear_pieces(x.copy(), table, pieces, LANES)
    rng = np.random.default_rng(SEED)
    for point in rng.uniform(-3.0, 3.0, (4, len(taken))):
        target = shifted_decay(at_work.decay, list(zip(taken, point.tolist(), strict=True)))
        variation_weights(x.copy(), variation_table(at_work, [target], shape_only=False), weights, LANES)
        np.testing.assert_allclose(pieces @ found.contraction.T @ monomials(point), weights[:, 0], rtol=1e-8)
        assert np.ptp(weights) > 1e-4


@pytest.mark.parametrize(("charm", "lepton"), [("D-", "mu"), ("D-", "tau"), ("D*-", "mu"), ("D*-", "tau")])
def test_spectra_at_five_points(charm: str, lepton: str) -> None:
    """Weighted events by q² against the integral of the differential rate over each bin (scipy's quadrature). A χ² over
    eight bins at each point fails by chance with 1e-5; there are twenty."""
    at_work = channel(charm, lepton, "mu", "charged_pion" if "*" in charm else "none")
    taken = shifts("Dst" if "*" in charm else "D", 2)
    table, found = piece_table(at_work, taken)
    truth, blocks = channel_table(at_work), 150
    pieces, q2 = np.zeros((blocks * LANES, table.pieces)), np.zeros(blocks * LANES)
    for b in range(blocks):
        x = new_block()
        draw_decays(x, truth, stream_key(SEED, "spectra", charm, lepton), np.uint64(b * LANES))
        q2[b * LANES : (b + 1) * LANES] = x[row.Q2 : row.Q2 + LANES]
        bilinear_pieces(x, table, pieces[b * LANES : (b + 1) * LANES], LANES)
    decay = at_work.decay
    edges = np.linspace(*decay.q2_range, 9)
    plain = gen.observables(decay).rate
    for point in ([0.0, 0.0], [1.0, 0.0], [0.0, -2.0], [2.5, 1.5], [-4.0, 3.0]):
        weights = pieces @ found.contraction.T @ monomials(point)
        there = shifted_decay(decay, list(zip(taken, point, strict=True)))
        terms = []
        for low, high in pairwise(edges.tolist()):
            share = (
                quad(lambda at, there=there: float(gen.differential_rate(there, at)), low, high, limit=200)[0] / plain
            )
            inside = np.where((q2 >= low) & (q2 < high), weights, 0.0)
            terms.append(((inside.mean() - share) / (inside.std() / np.sqrt(inside.size))) ** 2)
        assert chi2.sf(sum(terms), len(terms)) > 1e-5, (point, terms)


@pytest.mark.parametrize("name", ["BCL-2021", "BGL-2021", "BCL-2022", "CLN-2021", "HQE-2021"])
def test_which_sets_are_linear(name: str) -> None:
    """BCL and BGL are by their definition, in every parameter; CLN has products with the slope (h R1), HQE squares."""
    chosen = gen.form_factors(name)
    for transition in set(chosen.transitions) & {"D", "Dst"}:
        member = chosen[transition]
        every = [
            FormFactorShift(parameter, (transition,), ((parameter, 0.1 * max(abs(value), 0.01)),), None, "", "")
            for parameter, value in member.parameters.items()
        ]
        bent = set(bent_pairs({transition: chosen}, every))
        if name.startswith(("BCL", "BGL")):
            assert not bent
        elif name == "CLN-2021":
            pairs = {frozenset(pair) for pair in bent}
            product, lines = (("rho2", "R1(1)"), ("R1(1)", "R2(1)")) if transition == "Dst" else (("V1(1)", "rho2"), ())
            assert frozenset(product) in pairs
            assert frozenset(lines) not in pairs
            assert not any(len(pair) == 1 for pair in pairs)  # each alone is linear
        else:
            assert bent


def moved_study(folder: Path, point: dict[str, float], **changes: Any) -> StudyConfig:
    """Sets of files whose values are those of the shipped sets moved along their directions."""
    lines = []
    sets = {name: gen.form_factors(chosen) for name, chosen in SETS.items()}
    for one in ALL:
        if one.name in point:
            (transition,) = one.transitions
            moves = {name: shift * point[one.name] for name, shift in one.shift}
            sets[transition] = sets[transition].shifted(moves, transition)
    for transition, chosen in sets.items():
        member = chosen[transition]
        values = ", ".join(f"{key} = {value!r}" for key, value in member.parameters.items())
        lines += [f"[{transition}]", f'parametrisation = "{member.parametrisation}"', 'source = "test"']
        lines += [f"values = {{ {values} }}", f"covariance = {member.covariance.tolist()}"]
    path = folder / "moved.toml"
    path.write_text("\n".join(lines), encoding="utf-8")
    files = {name: {"file": str(path)} for name in SETS}
    return small_study(SEED + 1, form_factors=files, **changes)


def small_study(seed: int, **changes: Any) -> StudyConfig:
    """Light and heavy modes of D and D*, no variations, no backgrounds."""
    events = {"D_tau": 150_000, "Dst_tau": 200_000, "D_light": 200_000, "Dst_light": 300_000}
    modes = [
        mode | {"events": events[mode["component"]]}
        for mode in tomllib.loads(TEXT)["mode"]
        if mode["component"] in events
    ]
    return study(study__seed=seed, mode=modes, background=[], variation=[], **{"form_factors": SETS, **changes})


QUADRATIC = {
    "form_factors": [
        {"name": "ffD", "set": "D", "order": "variance", "keep": 1.0, "at_most": 3},
        {"name": "ffDst", "set": "Dst", "order": "variance", "keep": 1.0, "at_most": 3},
    ]
}
NAMES = {"D_0": "ffD_1", "D_1": "ffD_2", "D_2": "ffD_3", "Dst_0": "ffDst_1", "Dst_1": "ffDst_2", "Dst_2": "ffDst_3"}


@cache
def shape_set() -> TemplateSet:
    return build_templates(small_study(SEED, quadratic=QUADRATIC)).templates


POINTS: dict[str, dict[str, float]] = {
    "D": {"D_0": 3.0},
    "D, other": {"D_1": -4.0, "D_2": 2.0},
    "D*": {"Dst_0": 4.0},
    "D*, other": {"Dst_1": -4.0, "Dst_2": 3.0},
    "all": {"D_0": -2.0, "D_1": 2.0, "Dst_0": -3.0, "Dst_2": -3.0},
}


@pytest.mark.parametrize("name", POINTS)
def test_direct_generation_at_five_points(name: str, tmp_path: Path) -> None:
    """Other events with these form factors from the start; `templates_at` keeps the number of light decays, so those of
    direct generation are scaled by the change of the light width. Each of the four components gives a χ² over its bins
    with more than 30 events, and one for the category sums; each fails by chance with 1e-5 (4e-4 in all)."""
    point = POINTS[name]
    direct = build_templates(moved_study(tmp_path, point)).templates
    at = {NAMES[key]: value for key, value in point.items()}
    moved, share = templates_at(shape_set(), at), {(r.category, r.component): r for r in reweightings(shape_set(), at)}
    for old, new in zip(moved.parameters, direct.parameters, strict=True):
        assert old.injected == pytest.approx(new.injected, rel=1e-9), old.name
    for component, family in (("D_tau", "D"), ("Dst_tau", "D*"), ("D_light", "D"), ("Dst_light", "D*")):
        growth = light_growth(family, point)
        bins, sums = [], []
        for category in moved.categories:
            key = category.name, component
            if key not in moved.templates or key not in direct.templates:
                continue
            a, b, plain = moved.templates[key], direct.templates[key], shape_set().templates[key]
            events = np.where(plain.variance > 0, plain.nominal**2 / np.where(plain.variance > 0, plain.variance, 1), 0)
            enough = (events > 30) & (b.nominal > 0) & (b.nominal**2 > 30 * b.variance)
            difference, variance = a.nominal - b.nominal / growth, a.variance + b.variance / growth**2
            bins.append((difference**2 / np.where(enough, variance, 1.0))[enough])
            of_sum = a.nominal.sum() ** 2 / share[key].effective + b.variance.sum() / growth**2
            sums.append(difference.sum() ** 2 / of_sum)
        for terms in (np.concatenate(bins), np.array(sums)):
            assert terms.size >= 4
            assert chi2.sf(terms.sum(), terms.size) > 1e-5, (component, terms.sum(), terms.size)


def light_growth(family: str, point: dict[str, float]) -> float:
    """Decays to e and μ, both parents, over those of the shipped set, from observables alone."""
    sums = [0.0, 0.0]
    transition = "Dst" if family == "D*" else "D"
    moves = [(one, point[one.name]) for one in ALL if one.name in point]
    made = small_study(SEED)
    for parent in ("B+", "B0"):
        share = made.experiment.charged_fraction if parent == "B+" else 1.0 - made.experiment.charged_fraction
        charm = family + ("0" if parent == "B+" else "-")
        for lepton in ("e", "mu"):
            decay = gen.Decay(parent, charm, lepton, form_factors=SETS[transition])
            for k, one in enumerate((decay, shifted_decay(decay, moves))):
                sums[k] += share * made.detector.tag.kept(parent) * gen.observables(one).branching_fraction
    return sums[1] / sums[0]


def test_forms_are_rates() -> None:
    """Ratios and numbers of decays against those of the moved sets, at a point that the forms were not made from."""
    made = small_study(SEED, quadratic=QUADRATIC, fit={"injected": {"R_D": 0.4}})
    components, parameters = components_and_parameters(made)
    point = {"D_0": 2.2, "D_1": -1.7, "Dst_0": 3.1, "Dst_1": 0.6}
    values = dict.fromkeys(NAMES.values(), 0.0) | {NAMES[key]: value for key, value in point.items()}
    ratios = {p.name: form_at(p.rate, values) / form_at(p.over, values) for p in parameters if p.kind == "ratio"}
    for name, transition, injected in (("R_D", "D", 0.4), ("R_Dst", "Dst", None)):
        chosen = gen.form_factors(SETS[transition])
        moves: dict[str, float] = {}
        for one in ALL:
            if transition in one.transitions and one.name in point:
                for key, shift in one.shift:
                    moves[key] = moves.get(key, 0.0) + shift * point[one.name]
        there = study_with(made, transition, chosen.shifted(moves, transition))
        growth = predicted_ratio(there, name, ("B+", "B0")) / predicted_ratio(made, name, ("B+", "B0"))
        start = injected or predicted_ratio(made, name, ("B+", "B0"))
        assert ratios[name] == pytest.approx(start * growth, rel=1e-9)
    sizes = {component.name: form_at(component.rate, values) for component in components}
    assert sizes["D_light"] == pytest.approx(light_growth("D", point), rel=1e-9)
    assert sizes["Dst_light"] == pytest.approx(light_growth("D*", point), rel=1e-9)
    assert sizes["D_tau"] / sizes["D_light"] == pytest.approx(ratios["R_D"] / 0.4, rel=1e-9)


def study_with(made: StudyConfig, transition: str, chosen: FormFactorSet) -> Any:
    """The study with another set in the place of a shipped one."""

    class Other:
        def __getattr__(self, name: str) -> Any:
            return getattr(made, name)

        def form_factor_set(self, name: str) -> FormFactorSet:
            return chosen if name == transition else made.form_factor_set(name)

    return Other()


def test_pieces_stand_where_they_belong() -> None:
    """D follows its directions alone, D* its own; at home the pieces are the nominal templates."""
    for (_, component), template in shape_set().templates.items():
        used = {name for pair in template.quadratic for name in pair} - {"one"}
        assert used == {name for name in NAMES.values() if name.startswith("ffDst_" if "st" in component else "ffD_")}
        np.testing.assert_allclose(template.quadratic["one", "one"], template.nominal, rtol=1e-12)


WRONG = {
    '[[quadratic.form_factors]]\nname = "x"\nset = "Dst"': (
        "quadratic.form_factors[x].set: moves form factors that are not linear in the coefficients (got a term with "
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "D"\nparameters = ["a1", "a7"]': (
        'quadratic.form_factors[x].parameters[2]: is no parameter of the set (got "a7", allowed a0, a1, a2, b0, b1). '
        'Did you mean "a'
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "Dst"\nparameters = ["h(1)"]': (
        "quadratic.form_factors[x].parameters[1]: acts on nothing: the fit's yields take up the normalisation"
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "D"\nparameters = ["a1"]\nat_most = 2': (
        "quadratic.form_factors[x]: has parameters and directions (got at_most, allowed one of them)"
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "D"\n[[quadratic.form_factors]]\nname = "y"\nset = "D"': (
        'quadratic.form_factors[y].set: moves what x moves already (got "D"). Make them one table.'
    ),
    '[quadratic]\ncoefficients = ["SR"]\n[[quadratic.form_factors]]\nname = "x"\nset = "D"': (
        "quadratic.form_factors: are functions of couplings already: products of both are not quadratic"
    ),
    '[[variation]]\nname = "v"\nkind = "form_factor_directions"\nset = "D"\n'
    '[[quadratic.form_factors]]\nname = "x"\nset = "D"': (
        'quadratic.form_factors[x].set: moves what the variation v moves already (got "D"). Remove one of them.'
    ),
    '[[quadratic.form_factors]]\nname = "R0"\nset = "D"\nparameters = ["a1"]\n[[variation]]\nname = "R0_a1"\n'
    'kind = "production_ratio"\nrelative = 0.1': (
        'quadratic.form_factors[R0].name: names a variation that there is already (got "R0_a1"). Rename one of them.'
    ),
    "[quadratic]": "quadratic: has no coefficients (allowed coefficients or form_factors)",
    '[wilson]\nSR = [0, 0.1]\n[[quadratic.form_factors]]\nname = "x"\nset = "D"\nparameters = ["a0", "a1", "a2"]': (
        "quadratic.form_factors[x].parameters: makes too many coefficients for one decay with complex couplings "
        "(got 3, allowed at most 2). Leave out parameters."
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "Dss"': (
        'quadratic.form_factors[x].set: is not known here (got "Dss"'
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "D"\n[fit]\ncoefficients = ["x_9"]': (
        'fit.coefficients[1]: is nothing that templates are functions of (got "x_9", allowed x_1, x_2'
    ),
    '[[quadratic.form_factors]]\nname = "x"\nset = "D"\n[[mode]]\ncomponent = "m"\ncharm = ["D", "D0*(2300)"]\n'
    'leptons = ["tau"]\nparents = ["B+"]\nevents = 9': (
        'mode[m].charm: mixes charm whose shares x would change (got ["D", "D0*(2300)"])'
    ),
}


@pytest.mark.parametrize("tables", WRONG)
def test_messages(tables: str, tmp_path: Path) -> None:
    path = tmp_path / "study.toml"
    path.write_text(f"{SMALL}\n{tables}", encoding="utf-8")
    with pytest.raises(InputError) as error:
        read_study(path)
    found = [str(problem).split("study.toml:")[-1].split(": ", 1)[1] for problem in error.value.problems]
    assert any(text.startswith(WRONG[tables]) for text in found), found


def test_no_constraint_for_what_correlates(tmp_path: Path) -> None:
    """Parameters of BCL-2021 correlate with each other; R0(1) of CLN-2021 with none; a direction never."""
    path = tmp_path / "study.toml"
    tables = (
        '[[quadratic.form_factors]]\nname = "d"\nset = "D"\nparameters = ["a1"]\n[[quadratic.form_factors]]\n'
        'name = "dst"\nlabel = "D*"\nset = "Dst"\nparameters = ["R0(1)"]'
    )
    start = SMALL.index('[[variation]]\nname = "R0"')
    text = SMALL[:start] + SMALL[SMALL.index('[[variation]]\nname = "muon_id"') :]
    path.write_text(f"{text}\n{tables}", encoding="utf-8")
    first, second = read_study(path).coefficients
    assert isinstance(first, FormFactorShift)
    assert isinstance(second, FormFactorShift)
    assert (first.name, first.constraint, first.shift) == ("d_a1", None, (("a1", 0.2),))
    assert (second.name, second.constraint, second.label) == ("dst_R0_1", 1.0, "D*, R0(1)")
