"""Decay chains: complete, charges right, branching fractions multiply up to known numbers."""

from __future__ import annotations

from collections import defaultdict

import pytest
from semitau import gen
from semitau.core.constants import BRANCHING_FRACTION, LIFETIME, MASS
from semitau.core.errors import InputError
from semitau.gen.decays.chains import Channel, channels
from semitau.gen.decays.decay import FAMILIES
from semitau.gen.decays.orbital_states import ORBITAL_STATES

ALL = channels(["B+", "B0"], FAMILIES, ["e", "mu", "tau"])
TAU = BRANCHING_FRACTION["tau"]


def charge(name: str) -> int:
    return name.count("+") - name.count("-")


def chain_pieces(channel: Channel) -> list[tuple[str, list[str]]]:
    """Steps of `Channel.name`: (mother, daughters)."""
    steps = [step.split(" -> ") for step in channel.name.split(", ")]
    return [(mother, daughters.split()) for mother, daughters in steps]


def test_one_of_each() -> None:
    assert len({channel.name for channel in ALL}) == len(ALL)
    # D: 1 chain; D*+: 3, D*0: 2; with a bachelor both charges of D* occur: 5; D2* in addition to two Dpi, D1 to three
    # Dpipi.
    per_family = {"D": {"B+": 1, "B0": 1}, "D*": {"B+": 2, "B0": 3}, "D2*(2460)": {"B+": 7, "B0": 7}}
    per_family["D1(2420)"] = {"B+": 8, "B0": 8}
    for family in FAMILIES:
        expected = per_family.get(family, {"B+": 2, "B0": 2} if family.startswith("D0*") else {"B+": 5, "B0": 5})
        for parent, number in expected.items():
            for lepton, tau_ways in (("e", 1), ("mu", 1), ("tau", 2)):
                found = [c for c in ALL if (c.family, c.parent, c.lepton) == (family, parent, lepton)]
                assert len(found) == number * tau_ways


@pytest.mark.parametrize("channel", ALL, ids=lambda channel: channel.name)
def test_charge_and_energy(channel: Channel) -> None:
    """Every step conserves charge (the B decays to a positive lepton) and is open kinematically."""
    for mother, daughters in chain_pieces(channel):
        if mother == "tau":
            continue
        if mother in ("B+", "B0"):
            assert charge(daughters[0]) + 1 == charge(mother)
            assert daughters[1] == channel.lepton
        else:
            assert sum(map(charge, daughters)) == charge(mother)
            unsigned = [name[:-1] + "+" if name.endswith("-") else name for name in (mother, *daughters)]
            assert MASS[unsigned[0]] > sum(MASS[name] for name in unsigned[1:])
    assert channel.ground in ("D0", "D+")
    assert channel.m_ground == MASS[channel.ground]
    last = chain_pieces(channel)[-1][1]
    if channel.vector:
        soft = {"pi-": "charged_pion", "pi0": "neutral_pion", "gamma": "photon"}[last[1]]
        assert soft == channel.soft


def test_sums_over_chains() -> None:
    """The D* decays add to one, the tau decays to those asked for: sums over chains are the semileptonic ones."""
    sums: dict[tuple[str, str, str], float] = defaultdict(float)
    for channel in ALL:
        sums[channel.parent, channel.family, channel.lepton] += channel.branching_fraction
    for (parent, family, lepton), total in sums.items():
        if family in ORBITAL_STATES:
            state = ORBITAL_STATES[family]
            light = state.light_branching_fraction * (1 + state.to_two_pions) * LIFETIME[parent] / LIFETIME["B+"]
            charm = family + ("0" if parent == "B+" else "-")
            expected = light * (gen.ratio(parent, charm) if lepton == "tau" else 1.0)
        else:
            charm = family + ("0" if parent == "B+" else "-")
            expected = gen.observables(gen.Decay(parent, charm, lepton)).branching_fraction
        share = TAU["e"] + TAU["mu"] if lepton == "tau" else 1.0
        assert total == pytest.approx(share * expected, rel=1e-12)


def test_isospin_of_the_bachelor() -> None:
    """Clebsch-Gordan coefficients 1/2 x 1: two charged pions for each neutral one."""
    for family in ORBITAL_STATES:
        for parent in ("B+", "B0"):
            kinds: dict[str, float] = defaultdict(float)
            for channel in ALL:
                found = channel.family, channel.parent, channel.lepton, channel.second
                if found == (family, parent, "mu", "none"):
                    kinds[channel.bachelor] += channel.branching_fraction
            assert kinds["charged"] == pytest.approx(2 * kinds["neutral"], rel=1e-12)


def test_orbital_branching_fractions_against_averages() -> None:
    """Products B(B+ -> D** l nu) B(D** -> D(*)- pi+), averages of Eur. Phys. J. C 81 (2021) 226, from memory."""
    known = {
        ("D1(2420)", True): (0.00281, 0.00018),
        ("D2*(2460)", False): (0.0015, 0.0003),
        ("D2*(2460)", True): (0.00068, 0.00020),
        ("D1'(2430)", True): (0.0013, 0.0004),
        ("D0*(2300)", False): (0.0029, 0.0005),
    }
    for (family, to_vector), (value, error) in known.items():
        found = sum(
            c.branching_fraction
            for c in ALL
            if (c.parent, c.family, c.lepton, c.bachelor) == ("B+", family, "e", "charged")
            and bool(c.vector) == to_vector
        )
        assert found == pytest.approx(value, abs=error)
    # D2*: ratio of D pi to D* pi, 1.52(14) in the particle data tables (from memory).
    state = ORBITAL_STATES["D2*(2460)"]
    assert (1 - state.to_vector) / state.to_vector == pytest.approx(1.52, abs=0.14)


def test_selected_products() -> None:
    """By hand from the particle data tables: tau -> mu and D*- -> D0 pi- are 0.1739 and 0.677."""
    (found,) = (
        c for c in channels(["B0"], ["D*"], ["tau"], tau_to=["mu"]) if (c.ground, c.soft) == ("D0", "charged_pion")
    )
    assert found.name == "B0 -> D*- tau, tau -> mu, D*- -> D0 pi-"
    whole = gen.observables(gen.Decay("B0", "D*-", "tau")).branching_fraction
    assert found.branching_fraction == pytest.approx(whole * 0.677 * 0.1739, rel=1e-12)
    assert (found.seen_lepton, found.m_seen_lepton) == ("mu", MASS["mu"])
    assert (found.vector, found.m_vector) == ("D*+", MASS["D*+"])


def test_couplings_act_on_the_tau_only() -> None:
    plain = channels(["B0"], ["D", "D1(2420)"], ["mu", "tau"])
    new = channels(["B0"], ["D", "D1(2420)"], ["mu", "tau"], wilson={"VL": 0.1})
    for before, after in zip(plain, new, strict=True):
        factor = 1.1**2 if before.lepton == "tau" else 1.0
        assert after.branching_fraction == pytest.approx(factor * before.branching_fraction, rel=1e-12)


def test_form_factors_are_passed_on() -> None:
    (channel,) = channels(["B0"], ["D"], ["mu"], form_factors={"D": "CLN-2021"})
    assert channel.decay == gen.Decay("B0", "D-", "mu", "CLN-2021")


def test_bad_names() -> None:
    with pytest.raises(InputError, match=r"no such parent .*'Bs'.*B\+, B0"):
        channels(["Bs"], ["D"], ["mu"])
    with pytest.raises(InputError, match=r"no such charmed meson .*'Ds'.*D1\(2420\)"):
        channels(["B0"], ["Ds"], ["mu"])
    with pytest.raises(InputError, match=r"no such lepton .*'nu'.*e, mu, tau"):
        channels(["B0"], ["D"], ["nu"])
    with pytest.raises(InputError, match=r"no such tau decay .*'eta'.*e, mu, pi, rho"):
        channels(["B0"], ["D"], ["tau"], tau_to=["eta"])
