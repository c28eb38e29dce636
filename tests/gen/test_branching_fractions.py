"""Branching fractions given in the study file: what they do to decay chains and expected events, and what is refused.

Expected numbers are products of the numbers given, worked out here. One test draws at random and asks for a p-value
above 1e-6; SEMITAU_TEST_SEED changes its seed.
"""

from __future__ import annotations

import os
import re
from pathlib import Path

import numpy as np
import pytest
from scipy import integrate, stats
from semitau import gen
from semitau.core.constants import LIFETIME, MASS
from semitau.core.errors import InputError
from semitau.core.streams import stream_key
from semitau.gen.block import CHARM_MASS, LANES, LIGHT_MASS, new_block
from semitau.gen.decays.branching_fractions import COMPLETE, FROM_TABLES, TABLES, BranchingFractions
from semitau.gen.decays.chains import Channel, channels
from semitau.gen.decays.decay import CHARMS, Decay, charm_name
from semitau.gen.decays.double_charm import DoubleCharmChain, double_charm_chains
from semitau.gen.study_file.fractions import BranchingFractionTables
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.component_plan import plan_channels
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.drawing import draw_decays

from .small_study import TEXT

DOCS = Path(__file__).parents[2] / "docs" / "physics.md"
PARENTS = ("B+", "B0")
SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
PION, D_PLUS = MASS["pi+"], MASS["D+"]
DOUBLE_CHARM = '[[double_charm]]\ncomponent = "cc"\nbeside = ["D_s", "D K"]\nevents = 100_000\n'


def given(**tables: dict[str, object]) -> BranchingFractions:
    names = {
        "Bp": "B+",
        "D1": "D1(2420)",
        "D2": "D2*(2460)",
        "Dstp": "D*+",
        "Dst0": "D*0",
        "Dsst": "D_s*+",
        "Ds": "D_s+",
        "pairs": "pi pi",
    }
    return BranchingFractionTables.model_validate({names.get(k, k): v for k, v in tables.items()}).fractions


D1_BROAD_TO_PAIRS = BranchingFractionTables.model_validate({"D1'(2430)": {"D* pi": 0.8, "D pi pi": 0.2}}).fractions


def total(chains: tuple[Channel, ...], **wanted: str) -> float:
    """Sum of branching fractions of the chains with these properties."""
    return sum(c.branching_fraction for c in chains if all(getattr(c, k) == v for k, v in wanted.items()))


def of(
    family: str, fractions: BranchingFractions, leptons: tuple[str, ...] = ("e", "mu", "tau")
) -> tuple[Channel, ...]:
    return channels(PARENTS, [family], leptons, fractions=fractions)


def study_with(tmp_path: Path, extra: str, text: str = TEXT) -> StudyConfig:
    path = tmp_path / "study.toml"
    path.write_text(f"{text}\n{extra}", encoding="utf-8")
    return read_study(path)


# --- decay chains ---------------------------------------------------------------------------------------------------


def test_nothing_given_changes_nothing() -> None:
    for family in CHARMS:
        assert of(family, BranchingFractions()) == channels(PARENTS, [family], ("e", "mu", "tau"))


def test_giving_the_numbers_of_the_tables_changes_nothing() -> None:
    """Every number of the tables written out, those computed from form factors left out."""
    written = {
        particle: {final: one for final, one in finals.items() if one is not None}
        for particle, finals in TABLES.items()
    }
    same = BranchingFractions(written)
    for family in CHARMS:
        for new, old in zip(of(family, same), of(family, FROM_TABLES), strict=True):
            assert new.name == old.name
            assert new.branching_fraction == pytest.approx(old.branching_fraction, rel=1e-14)
    for pair in zip(double_charm_chains(PARENTS, fractions=same), double_charm_chains(PARENTS), strict=True):
        assert pair[0].branching_fraction == pytest.approx(pair[1].branching_fraction, rel=1e-14)
        assert pair[0].photon_share == pair[1].photon_share


@pytest.mark.parametrize("particle", COMPLETE)
def test_tables_sum_to_one(particle: str) -> None:
    assert sum(one.value for one in TABLES[particle].values() if one) == pytest.approx(1.0, abs=1e-12)


@pytest.mark.parametrize("family", ["D", "D*"])
def test_light_mode(family: str) -> None:
    """One flavour of light lepton has what is given in the mean of e and mu; the B0 and the tau change by the same
    factor as the width does."""
    fractions = given(Bp={f"{family} l": 0.04})
    new, old = of(family, fractions), of(family, FROM_TABLES)
    light = [total(new, parent="B+", lepton=lepton) for lepton in ("e", "mu")]
    assert sum(light) == pytest.approx(2 * 0.04, rel=1e-12)
    factor = 2 * 0.04 / sum(total(old, parent="B+", lepton=lepton) for lepton in ("e", "mu"))
    for parent in PARENTS:
        for lepton in ("e", "mu", "tau"):
            changed, before = (total(c, parent=parent, lepton=lepton) for c in (new, old))
            assert changed == pytest.approx(factor * before, rel=1e-12)


def test_each_b_on_its_own() -> None:
    fractions = given(Bp={"D* l": 0.05}, B0={"D* l": 0.06})
    for parent, value in (("B+", 0.05), ("B0", 0.06)):
        assert sum(total(of("D*", fractions), parent=parent, lepton=one) for one in ("e", "mu")) == pytest.approx(
            2 * value, rel=1e-12
        )


@pytest.mark.parametrize("family", [family for family in CHARMS if family not in ("D", "D*")])
def test_excited_charm(family: str) -> None:
    """The whole of what is followed has what is given; B0 by the lifetimes; the tau by the ratio, given or computed."""
    fractions = given(Bp={f"{family} l": 0.0123})
    with_ratio = given(Bp={f"{family} l": 0.0123}, R={family: 0.11})
    for parent in PARENTS:
        light = 0.0123 * LIFETIME[parent] / LIFETIME["B+"]
        assert total(of(family, fractions), parent=parent, lepton="e") == pytest.approx(light, rel=1e-12)
        computed = gen.ratio(parent, charm_name(parent, family))
        for chosen, ratio in ((fractions, computed), (with_ratio, 0.11)):
            found = total(of(family, chosen), parent=parent, lepton="tau")
            assert found == pytest.approx(light * ratio * (0.1782 + 0.1739), rel=1e-12)  # tau to e and mu


def test_tau_decays() -> None:
    fractions = given(tau={"mu": 0.2, "a1": 0.05})
    kinds = ("e", "mu", "pi", "a1")
    new, old = (channels(PARENTS, ["D"], ["tau"], tau_to=kinds, fractions=one) for one in (fractions, FROM_TABLES))
    for kind, factor in (("e", 1.0), ("mu", 0.2 / 0.1739), ("pi", 1.0), ("a1", 0.05 / 0.0902)):
        assert total(new, tau_to=kind) == pytest.approx(factor * total(old, tau_to=kind), rel=1e-12)


def test_vector_decays() -> None:
    fractions = given(Dstp={"D0 pi+": 0.6, "D+ pi0": 0.3, "D+ gamma": 0.1}, Dst0={"D0 pi0": 0.9, "D0 gamma": 0.1})
    chains = of("D*", fractions)
    shares = {
        "B0": {"charged_pion": 0.6, "neutral_pion": 0.3, "photon": 0.1},
        "B+": {"neutral_pion": 0.9, "photon": 0.1},
    }
    for parent, kinds in shares.items():
        whole = total(chains, parent=parent)
        assert whole == pytest.approx(total(of("D*", FROM_TABLES), parent=parent), rel=1e-12)
        for soft, share in kinds.items():
            assert total(chains, parent=parent, soft=soft) == pytest.approx(share * whole, rel=1e-12)


def test_decays_of_excited_charm() -> None:
    """Shares by final state; the rate of the whole state stays."""
    narrow = of("D1(2420)", given(D1={"D* pi": 0.8, "D pi pi": 0.2}))
    whole = total(narrow)
    assert whole == pytest.approx(total(of("D1(2420)", FROM_TABLES)), rel=1e-12)
    assert total(narrow, second="none") == pytest.approx(0.8 * whole, rel=1e-12)
    assert total(narrow, vector="") == pytest.approx(0.2 * whole, rel=1e-12)
    tensor = of("D2*(2460)", given(D2={"D* pi": 0.2, "D pi": 0.5, "D pi pi": 0.3}))
    whole = total(tensor)
    assert whole == pytest.approx(total(of("D2*(2460)", FROM_TABLES)), rel=1e-12)
    assert total(tensor, vector="", second="none") == pytest.approx(0.5 * whole, rel=1e-12)
    assert whole - total(tensor, vector="") == pytest.approx(0.2 * whole, rel=1e-12)
    assert whole - total(tensor, second="none") == pytest.approx(0.3 * whole, rel=1e-12)


@pytest.mark.parametrize("family", ["D1(2420)", "(D* pi pi)"])
def test_charges_of_pion_pairs(family: str) -> None:
    """Pair of isospin 0: pi+ pi- 2/3, pi0 pi0 1/3; of isospin 1: pi+ pi- 1/3, pi+ pi0 2/3 (Clebsch-Gordan coefficients,
    particle data tables); without a word the mean of both. The rate stays."""
    scalar = {"pi+ pi-": 2 / 3, "pi+ pi0": 0.0, "pi0 pi0": 1 / 3}
    vector = {"pi+ pi-": 1 / 3, "pi+ pi0": 2 / 3, "pi0 pi0": 0.0}
    mean = {name: (scalar[name] + vector[name]) / 2 for name in scalar}
    rate = total(of(family, FROM_TABLES))
    for shares, fractions in ((scalar, given(pairs=scalar)), (vector, given(pairs=vector)), (mean, FROM_TABLES)):
        chains = of(family, fractions)
        assert total(chains) == pytest.approx(rate, rel=1e-12)
        pairs = rate - total(chains, second="none")
        for kinds, share in zip(
            (("charged", "charged"), ("charged", "neutral"), ("neutral", "neutral")), shares.values(), strict=True
        ):
            assert total(chains, bachelor=kinds[0], second=kinds[1]) == pytest.approx(share * pairs, abs=1e-12 * pairs)


def test_varied_charges_of_pion_pairs(tmp_path: Path) -> None:
    """One standard deviation is the way from the mean to either isospin: charged pairs 2/3 or 1/3 of all; nothing else
    but pairs moves."""
    study = study_with(tmp_path, CHANGE.format("pi pi", "pi+ pi-"))
    for sign, charged in ((1, 2 / 3), (-1, 1 / 3)):
        found = factors(study, sign)
        for name, factor in found.items():
            pair = sum(name.split("->")[-1].count(pion) for pion in ("pi+", "pi-", "pi0"))
            if factor != 1.0:
                assert pair >= 2
                assert factor == pytest.approx(2 * charged, rel=1e-9) or factor == pytest.approx(
                    2 - 2 * charged, rel=1e-9
                )
        assert any(factor != 1.0 for factor in found.values())


@pytest.mark.parametrize("family", ["D2*(2460)", "D1'(2430)"])
def test_two_pions_of_a_state_that_has_none_in_the_tables(family: str) -> None:
    """Pairs between the edges of phase space, and along the borders of the Dalitz plot (particle data tables, review of
    kinematics) for a fixed mass: its height in the square of the pair mass is 4 m_pair p_pi* p_D*."""
    fractions = {"D2*(2460)": given(D2={"D* pi": 0.3, "D pi": 0.5, "D pi pi": 0.2}), "D1'(2430)": D1_BROAD_TO_PAIRS}
    (chain,) = (
        c for c in of(family, fractions[family], ("mu",))
        if (c.parent, c.bachelor, c.second, c.vector) == ("B0", "charged", "charged", "")
    )  # fmt: skip
    table, x, rows = channel_table(chain), new_block(), []
    for block in range(60):
        draw_decays(x, table, stream_key(SEED, "pairs"), np.uint64(block * LANES))
        rows.append([x[row : row + LANES].copy() for row in (CHARM_MASS, LIGHT_MASS)])
    charm, pair = np.concatenate(rows, axis=1)
    assert np.all(pair > 2 * PION)
    assert np.all(pair < charm - D_PLUS)
    if family == "D2*(2460)":
        m, points = float(charm[0]), np.linspace(2 * PION, charm[0] - D_PLUS, 4001)
        in_pair = np.sqrt(np.maximum(points**2 / 4 - PION**2, 0.0))
        energy = (m * m - points**2 - D_PLUS**2) / (2 * points)
        height = in_pair * np.sqrt(np.maximum(energy**2 - D_PLUS**2, 0.0)) * points
        cumulated = integrate.cumulative_simpson(height, x=points, initial=0.0)
        found = stats.kstest(pair, lambda value: np.interp(value, points, cumulated / cumulated[-1]))
        assert found.pvalue > 1e-6


def test_double_charm() -> None:
    """B+ -> D0 D_s+, D_s+ -> tau nu, tau -> mu nu nu: a product of three numbers; D_s* shares by photon."""
    fractions = given(Bp={"D D_s+": 0.01}, Ds={"tau": 0.06, "phi e": 0.03}, tau={"mu": 0.18}, Dsst={"D_s+ gamma": 0.9})
    chains = double_charm_chains(["B+"], fractions=fractions)
    by_name = {chain.name: chain for chain in chains}
    assert by_name["B+ -> D0 D_s+, D_s+ -> tau, tau -> mu"].branching_fraction == pytest.approx(
        0.01 * 0.06 * 0.18, rel=1e-12
    )
    assert by_name["B+ -> D0 D_s+, D_s+ -> phi e"].branching_fraction == pytest.approx(0.01 * 0.03, rel=1e-12)
    assert {chain.photon_share for chain in chains if chain.partner == "D_s*+"} == {0.9}


def test_fractions_of_zero_in_double_charm(tmp_path: Path) -> None:
    """What is switched off leaves no chain, and no variation of its share, whose error the tables would tell."""
    vector = '[branching_fractions]\n"D*+" = { "D0 pi+" = 1, "D+ pi0" = 0, "D+ gamma" = 0 }\n'
    pairs = DOUBLE_CHARM.replace('["D_s", "D K"]', '["D* K"]')
    found = [p.channel for p in plan_channels(study_with(tmp_path, pairs + vector)) if p.mode == "cc"]
    assert {c.beside_soft for c in found if isinstance(c, DoubleCharmChain) and c.partner == "D*+"} == {"charged_pion"}
    share = '[[variation]]\nname = "share"\nkind = "double_charm_share"\nsource = "tau"\n'
    none = '[branching_fractions]\n"D_s+".tau = 0\n'
    for text, there in ((DOUBLE_CHARM + share, True), (DOUBLE_CHARM + share + none, False)):
        plans = [plan for plan in plan_channels(study_with(tmp_path, text)) if plan.mode == "cc"]
        assert any(plan.channel.lepton == "tau" for plan in plans) == there
        assert all((("share", 1) in plan.variations.factors) == there for plan in plans)


def test_moving_one_of_a_sum() -> None:
    """The other decays take up the difference in proportion."""
    moved = FROM_TABLES.moved("D*+", "D0 pi+", 0.7)
    assert moved.value("D*+", "D+ pi0") == pytest.approx(0.3 * 0.307 / 0.323, rel=1e-12)
    assert sum(moved.value("D*+", final) for final in TABLES["D*+"]) == pytest.approx(1.0, abs=1e-12)
    assert FROM_TABLES.moved("tau", "mu", 0.2).value("tau", "e") == 0.1782


# --- studies --------------------------------------------------------------------------------------------------------


def test_expected_events_of_a_study(tmp_path: Path) -> None:
    """2 x pairs x share of the parent x fractions x tag x charm efficiency, by hand; the others stay."""
    text = '[branching_fractions]\n"B+"."D1(2420) l" = 0.008\n"D1(2420)" = { "D* pi" = 0.75, "D pi pi" = 0.25 }\n'
    text += "tau.mu = 0.16"
    new, old = plan_channels(study_with(tmp_path, text)), plan_channels(study_with(tmp_path, ""))
    study = study_with(tmp_path, text)
    chains = [p for p in new if isinstance(p.channel, Channel) and p.channel.family == "D1(2420)"]
    wanted = [p for p in chains if (p.channel.parent, p.channel.lepton, p.channel.ground) == ("B+", "e", "D0")]
    found = sum(p.expected for p in wanted if p.channel.second != "none")
    # pairs to a D0: two charged or two neutral pions keep the charge, 1/2 + 1/6
    by_hand = 2 * 1e8 * 0.514 * 0.008 * 0.25 * (1 / 2 + 1 / 6)
    by_hand *= study.detector.tag.efficiency["B+"] * study.detector.charm.reconstructed["D0"]
    assert found == pytest.approx(by_hand, rel=1e-12)
    for before, after in zip(old, new, strict=True):
        if before.channel.family in ("D", "D*", "D2*(2460)"):
            factor = 0.16 / 0.1739 if before.channel.seen_lepton == "mu" and before.channel.lepton == "tau" else 1.0
            assert after.expected == pytest.approx(factor * before.expected, rel=1e-12)


@pytest.mark.parametrize(
    ("extra", "message"),
    [
        ("tau.mu = 1.2", "tau.mu: is no branching fraction (got 1.2, allowed 0 to 1)"),
        ("tau.mu = -0.1", "tau.mu: is no branching fraction (got -0.1, allowed 0 to 1)"),
        (
            "tau.mu = { value = 1.2 }",
            "tau.mu.value: must not be above 1 (got 1.2)",
        ),
        ('tau.mu = "much"', 'tau.mu: is no branching fraction (got "much", allowed a number from 0 to 1, or'),
        ("tau.muon = 0.1", "tau.muon: is no decay of tau here (got muon, allowed e, mu, pi, rho, a1, a1_1prong). Did"),
        ("taus.mu = 0.1", "branching_fractions.taus: unknown key (allowed B+, B0, R, D1(2420), D2*(2460), D1'(2"),
        (
            '"D*+" = { "D0 pi+" = 0.7, "D+ gamma" = 0.01 }',
            '"D*+": does not sum to one (got 0.7 + 0.307 + 0.01 = 1.017, allowed 1). Give "D+ pi0" as well: the tables',
        ),
        (
            '"D*+" = { "D0 pi+" = 0.6, "D+ pi0" = 0.3, "D+ gamma" = 0.01 }',
            '"D*+": does not sum to one (got 0.6 + 0.3 + 0.01 = 0.91, allowed 1). Change one of them.',
        ),
        (
            '"D1(2420)" = { "D* pi" = 0, "D pi pi" = 1 }',
            '"D1(2420)"."D pi pi": leaves no decay to one pion (got 1, allowed below 1)',
        ),
        ("tau.mu = 0.6", "tau: sums to more than one (got 0.1782 + 0.6 + 0.1082 + 0.2549 + 0.0902 + 0.0926 = 1.3241 ("),
        ('"B+" = { "D l" = 0.2, "D* l" = 0.4 }', '"B+": sums to more than one (got 2 × 0.2 + 2 × 0.4 = 1.2, allowed'),
        ("tau.pi = 0.1", "tau.pi: acts on nothing: no component has this decay. Remove it."),
        ('"D1\'(2430)"."D* pi" = 1', '"D1\'(2430)": acts on nothing: nothing in the study decays so. Remove it.'),
        ('"B+"."D0*(2300) l" = 0.01', '"B+"."D0*(2300) l": acts on nothing: no component has this decay. Remove it.'),
        ('"D_s+".tau = 0.05', '"D_s+".tau: acts on nothing: no component has this decay. Remove it.'),
        ('R."D1(2420)" = 0.1', 'R."D1(2420)": acts on nothing: no mode has this with a tau. Remove it.'),
        ('R."D*" = 0.3', 'R."D*": has no such ratio here (got D*, allowed D1(2420)'),
        ('R."D1" = 0.3', "R.D1: is nothing with such a ratio (got D1, allowed D1(2420)"),
    ],
)
def test_messages(tmp_path: Path, extra: str, message: str) -> None:
    with pytest.raises(InputError) as error:
        study_with(tmp_path, f"[branching_fractions]\n{extra}")
    (problem,) = error.value.problems
    line = len(TEXT.splitlines()) + 3
    assert str(problem).startswith(f"{tmp_path / 'study.toml'}:{line}: ")
    assert message in str(problem)


@pytest.mark.parametrize(
    ("extra", "used"),
    [
        ('"D_s+".tau = 0.05', True),
        ('"D_s+"."phi e" = 0.02', True),
        ('"B0"."D D_s+" = 0.007', True),
        ('"B0"."D D_s*+" = 0.007', False),  # beside = D_s and D K
        ('"B0"."D D*0 K+" = 0.003', False),
        ('"D0"."K+ e" = 0.035', True),
        ('"D_s*+" = { "D_s+ gamma" = 0.9, "D_s+ pi0" = 0.1 }', False),
        ('"D*0" = { "D0 pi0" = 0.6, "D0 gamma" = 0.4 }', True),
    ],
)
def test_what_double_charm_uses(tmp_path: Path, extra: str, used: bool) -> None:
    text = f"{DOUBLE_CHARM}\n[branching_fractions]\n{extra}"
    if used:
        study_with(tmp_path, text)
        return
    with pytest.raises(InputError, match="acts on nothing"):
        study_with(tmp_path, text)


def test_a_rate_that_is_given_is_no_width() -> None:
    """Form factors still say what shape and what ratio to the tau; the width with the shipped V_cb stays as it is."""
    assert gen.observables(Decay("B+", "D*0", "mu")).branching_fraction != pytest.approx(0.04, rel=0.01)


def test_documented_numbers() -> None:
    """docs/physics.md has every number of the tables, to four digits."""
    text = DOCS.read_text(encoding="utf-8")
    for particle, finals in TABLES.items():
        (line,) = (line for line in text.splitlines() if line.startswith(f"| `{particle}` | `"))
        written = {final: float(value) for final, value in re.findall(r"`([^`]+)` ([0-9.e-]+)", line.split("|")[2])}
        known = {final: one.value for final, one in finals.items() if one is not None}
        assert written == pytest.approx(known, rel=1e-3)


def test_documented_example(tmp_path: Path) -> None:
    (example,) = re.findall(r"```toml\n(\[branching_fractions\].*?)```", DOCS.read_text(encoding="utf-8"), re.DOTALL)
    text = TEXT.replace('leptons = ["e", "mu"]\nyield', 'leptons = ["e", "mu", "tau"]\nyield')
    assert study_with(tmp_path, example, text).fractions.ratios == {"D1(2420)": (0.09, 0.0)}


# --- variations of shares -------------------------------------------------------------------------------------------


def test_a_varied_share_does_not_pass_one(tmp_path: Path) -> None:
    """D1 is 0.0063 of 0.0063 + 0.0033, 66%, a little more by the charm efficiencies: 60% more of it pass the whole."""
    variation = '[[variation]]\nname = "narrow"\nkind = "fraction"\ncharm = "D1(2420)"\nrelative = {}\n'
    plan_channels(study_with(tmp_path, variation.format(0.5)))
    message = r"variation narrow: the varied share of Dss passes 1 \(got 0.66\d* × 1.6, allowed relative up to 0.5\d*\)"
    with pytest.raises(InputError, match=message):
        plan_channels(study_with(tmp_path, variation.format(0.6)))


def test_a_varied_share_of_double_charm_does_not_pass_one(tmp_path: Path) -> None:
    variation = '[[variation]]\nname = "strange"\nkind = "double_charm_share"\nbeside = "D_s"\nrelative = {}\n'
    plan_channels(study_with(tmp_path, DOUBLE_CHARM + variation.format(0.1)))
    with pytest.raises(
        InputError, match=r"variation strange: the varied share of cc passes 1 \(got .* × 1.99, allowed"
    ):
        plan_channels(study_with(tmp_path, DOUBLE_CHARM + variation.format(0.99)))


# --- variations of fractions ----------------------------------------------------------------------------------------

CHANGE = '[[variation]]\nname = "br"\nkind = "branching_fraction"\nparticle = "{}"\ndecay = "{}"\n'


def factors(study: StudyConfig, sign: int) -> dict[str, float]:
    """Of the variation "br", by chain; 1 where it does not act."""
    found = {}
    for plan in plan_channels(study):
        factor = plan.variations.factors.get(("br", sign))
        found[f"{plan.mode}: {plan.channel.name}"] = 1.0 if factor is None else float(factor[0])
    return found


def test_a_varied_tau_decay(tmp_path: Path) -> None:
    """By the error that is given, 2% of tau -> mu: the chains with it and no others; those of D_s -> tau too."""
    text = (
        DOUBLE_CHARM + CHANGE.format("tau", "mu") + "[branching_fractions]\ntau.mu = { value = 0.17, error = 0.0034 }"
    )
    study = study_with(tmp_path, text)
    for sign in (1, -1):
        for name, factor in factors(study, sign).items():
            assert factor == pytest.approx(1.0 + 0.02 * sign if "tau -> mu" in name else 1.0, abs=1e-12)


def test_a_varied_vector_decay(tmp_path: Path) -> None:
    """D*+ -> D0 pi+ up by 1%: the others go down by 0.677 x 1% / 0.323, and the sum stays."""
    study = study_with(tmp_path, CHANGE.format("D*+", "D0 pi+") + "relative = 0.01\n")
    moved = factors(study, 1)
    for plan in plan_channels(study):
        wanted = 1.0
        if plan.channel.vector == "D*+":
            wanted = 1.01 if plan.channel.soft == "charged_pion" else 1.0 - 0.01 * 0.677 / 0.323
        assert moved[f"{plan.mode}: {plan.channel.name}"] == pytest.approx(wanted, rel=1e-12)


def test_a_varied_fraction_in_templates(tmp_path: Path) -> None:
    """B(tau -> mu) up by 5%: the signal with a muon grows so, in a template that has both leptons' categories."""
    study = study_with(tmp_path, CHANGE.format("tau", "mu") + "relative = 0.05\n")
    templates = build_templates(study, workers=1).templates.templates
    template = templates["D0_mu", "D_tau"]
    assert template.plus["br"] == pytest.approx(1.05 * template.nominal, rel=1e-12)
    assert template.minus["br"] == pytest.approx(0.95 * template.nominal, rel=1e-12)
    assert "br" not in templates["D0_mu", "D_light"].plus


@pytest.mark.parametrize(
    ("change", "message"),
    [
        (CHANGE.format("taus", "mu"), ".particle: names no particle"),
        (CHANGE.format("tau", "muon"), "names no decay of tau (got muon, allowed e, mu, pi"),
        (
            CHANGE.format("tau", "pi") + "relative = 0.1\n",
            "acts on nothing: no component has this decay (got tau → pi)",
        ),
        (CHANGE.format("B+", "D l") + "relative = 0.1\n", 'has no value to change (got B+ → D l). Give "B+"."D l" in'),
        (CHANGE.format("tau", "mu"), "does not say how far it goes (got tau → mu). Add relative, or an error to"),
        (
            CHANGE.format("D*+", "D0 pi+") + "relative = 0.6\n",
            "leaves the range of a branching fraction (got 0.677 × 1.6 and 0.677 × 0.4, allowed above 0 and below 1)",
        ),
    ],
)
def test_messages_of_varied_fractions(tmp_path: Path, change: str, message: str) -> None:
    with pytest.raises(InputError) as error:
        study_with(tmp_path, change)
    (problem,) = error.value.problems
    assert "variation[br]" in str(problem)
    assert message.removeprefix(".particle: ") in str(problem)
