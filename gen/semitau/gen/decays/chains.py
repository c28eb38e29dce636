"""Decay chains: every way in which a B ends in a ground-state D, a seen lepton and perhaps slow particles."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, replace

from semitau.core.constants import BRANCHING_FRACTION, LIFETIME, MASS
from semitau.core.errors import InputError, Problem

from .branching_fractions import FROM_TABLES, BranchingFractions
from .decay import CHARMS, DEFAULT_SETS, LEPTONS, PARENTS, Decay, WilsonCoefficients, charm_name
from .form_factor_set import FormFactorSet
from .lepton_couplings import Given, LeptonCouplings
from .orbital_states import CHARGED_PION_SHARE
from .rates import observables, ratio
from .seen_charm import SeenCharm

PION_MASS = {"none": 0.0, "charged": MASS["pi+"], "neutral": MASS["pi0"], "eta": MASS["eta"]}


@dataclass(frozen=True)
class Channel(SeenCharm):
    """One fully specified decay chain of a B+ or B0; charge conjugation is implied.

    decay : the semileptonic decay, with its form factors.
    tau_to : decay of the tau: "e", "mu", "pi", "rho" (pi- pi0), "a1" (pi- pi- pi+) or "a1_1prong" (pi- pi0 pi0); None
        if the B decay gave no tau.
    bachelor : light meson beside the D(*) of a D** or a continuum: "none", "charged" or "neutral" (pions), "eta".
    vector, soft, ground : as in `SeenCharm`.
    branching_fraction : of the whole chain for one B of this kind, up to the D, whose own decay is not part of it.
    second : second pion of a D** or a continuum, as `bachelor`.

    Species leave charge conjugation out: a B+ or B0 gives the conjugate of `vector` and `ground`. So a neutral species
    with the lepton looks like a charged B, a charged species like a neutral one.
    """

    decay: Decay
    tau_to: str | None
    bachelor: str
    vector: str
    soft: str
    ground: str
    branching_fraction: float
    second: str = "none"

    @property
    def parent(self) -> str:
        return self.decay.parent

    @property
    def family(self) -> str:
        """Charmed meson of the B decay without its charge: "D", "D*", "D1(2420)" ..."""
        return self.decay.family

    @property
    def lepton(self) -> str:
        """Lepton of the B decay."""
        return self.decay.lepton

    @property
    def seen_lepton(self) -> str:
        """Charged particle that is detected: the lepton, or what the tau leaves."""
        return self.tau_to or self.decay.lepton

    @property
    def m_bachelor(self) -> float:
        """GeV; 0 if there is none."""
        return PION_MASS[self.bachelor]

    @property
    def m_second(self) -> float:
        """GeV; 0 if there is none."""
        return PION_MASS[self.second]

    @property
    def m_seen_lepton(self) -> float:
        """GeV."""
        return MASS[self.seen_lepton if self.seen_lepton in LEPTONS else "pi+"]

    @property
    def name(self) -> str:
        """The chain in words with the charges of a B+ or B0, e.g. "B0 -> D*- tau, tau -> mu, D*- -> D0 pi-"."""
        text = f"{self.parent} -> {self.decay.charm} {self.lepton}"
        if self.tau_to:
            text += f", tau -> {self.tau_to}"
        vector, ground = _conjugate(self.vector), _conjugate(self.ground)
        if self.bachelor != "none":
            text += f", {self.decay.charm} -> {vector or ground} {self.light_mesons}"
        if self.vector:
            soft = {"charged_pion": "pi-", "neutral_pion": "pi0", "photon": "gamma"}[self.soft]
            text += f", {vector} -> {ground} {soft}"
        return text

    @property
    def light_mesons(self) -> str:
        """What goes with the D(*) of a D** or a continuum, with the charges of a B+ or B0; "" if nothing does."""
        if (self.bachelor, self.second) == ("charged", "charged"):
            return "pi+ pi-"
        charged = "pi-" if self.parent == "B0" else "pi+"
        words = {"none": "", "charged": charged, "neutral": "pi0", "eta": "eta"}
        return f"{words[self.bachelor]} {words[self.second]}".strip()


def _conjugate(species: str) -> str:
    return species[:-1] + "-" if species.endswith("+") else species


def channels(
    parents: Iterable[str],
    charms: Iterable[str],
    leptons: Iterable[str],
    *,
    tau_to: Iterable[str] = ("e", "mu"),
    form_factors: Mapping[str, FormFactorSet | str] | None = None,
    wilson: Given = None,
    tensor: str = "LO",
    light: Mapping[str, Given] | None = None,
    fractions: BranchingFractions = FROM_TABLES,
) -> tuple[Channel, ...]:
    """Every chain from these parents through these charmed mesons and leptons, in that order.

    parents : of "B+", "B0". charms : families, of "D", "D*", "D1(2420)", "D2*(2460)", "D0*(2300)", "D1'(2430)",
        and the continua "(D pi)", "(D* pi)", "(D pi pi)", "(D* pi pi)", "(D eta)", "(D* eta)".
    leptons : of "e", "mu", "tau". tau_to : of "e", "mu", "pi", "rho", "a1", "a1_1prong"; only these decays of the tau.
    form_factors : "D", "Dst", "Dss" -> set; the defaults of `Decay` where left out. wilson : on the tau only.
    light : "e", "mu" -> couplings of the decays with that lepton. tensor : of those with couplings.

    Branching fractions: of D and D* from the widths with the shipped |V_cb|; of D** and continua with light
    leptons from measured averages, times what couplings do to the width; with a tau these averages times the ratio of
    the form factors; of tau and D* from the particle data tables. fractions : others instead of these.
    InputError lists names that are unknown.
    """
    parents, charms, leptons, tau_to = tuple(parents), tuple(charms), tuple(leptons), tuple(tau_to)
    _check("parent", parents, PARENTS)
    _check("charmed meson", charms, CHARMS)
    _check("lepton", leptons, LEPTONS)
    _check("tau decay", tau_to, tuple(BRANCHING_FRACTION["tau"]))
    couplings = LeptonCouplings.of(wilson, tensor, light)
    found: list[Channel] = []
    for parent in parents:
        for family in charms:
            for lepton in leptons:
                transition = {"D": "D", "D*": "Dst"}.get(family, "Dss")
                chosen = (form_factors or {}).get(transition, DEFAULT_SETS[transition])
                charm, model = charm_name(parent, family), couplings.model(lepton)
                decay = Decay(parent, charm, lepton, chosen, couplings[lepton], model)
                found.extend(chains_of(decay, tau_to, fractions))
    return tuple(found)


def semileptonic_branching_fraction(decay: Decay, fractions: BranchingFractions = FROM_TABLES) -> float:
    """Of B -> X_c l nu; for D** of the part that ends in D(*) pi or D pi pi.

    What is given for one B alone changes the width of the other by the same factor.
    """
    state = decay.orbital
    if state is None:
        own = observables(decay).branching_fraction
        return own * _given_over_computed(decay, fractions)
    known = fractions.state(decay.family)
    light = known.light_branching_fraction * (1.0 + known.to_two_pions) * decay.lifetime / LIFETIME["B+"]
    for parent in (decay.parent, *PARENTS):
        if (given := fractions.semileptonic(parent, decay.family)) is not None:
            light = given * decay.lifetime / LIFETIME[parent]
            break
    if decay.lepton != "tau":
        if decay.couplings == WilsonCoefficients():
            return light
        return light * observables(decay).rate / observables(replace(decay, wilson=None, tensor="LO")).rate
    if decay.family in fractions.ratios:
        return light * fractions.ratios[decay.family].value
    return light * ratio(decay.parent, decay.charm, decay.form_factors, decay.couplings, decay.tensor)


def _given_over_computed(decay: Decay, fractions: BranchingFractions) -> float:
    """Of B -> D(*) l nu, mean of e and mu; 1 if none is given."""
    for parent in (decay.parent, *PARENTS):
        if (given := fractions.semileptonic(parent, decay.family)) is not None:
            light = [
                observables(Decay(parent, charm_name(parent, decay.family), lepton, decay.form_factors))
                for lepton in ("e", "mu")
            ]
            return given / (0.5 * sum(one.branching_fraction for one in light))
    return 1.0


def chains_of(decay: Decay, tau_to: tuple[str, ...], fractions: BranchingFractions = FROM_TABLES) -> Iterator[Channel]:
    """Every chain of one decay; the decays of the tau in `tau_to`, which a light lepton does not look at."""
    start = semileptonic_branching_fraction(decay, fractions)
    if decay.lepton == "tau":
        leptonic: list[tuple[str | None, float]] = [(name, fractions.value("tau", name)) for name in tau_to]
    else:
        leptonic = [(None, 1.0)]
    for tau, tau_fraction in leptonic:
        for bachelor, second, vector, soft, ground, fraction in _charm_chains(decay, fractions):
            yield Channel(decay, tau, bachelor, vector, soft, ground, start * tau_fraction * fraction, second)


def _charm_chains(decay: Decay, fractions: BranchingFractions) -> Iterator[tuple[str, str, str, str, str, float]]:
    """Bachelor, second pion, D*, soft particle, D, share of the chain."""
    charge = "+" if decay.parent == "B0" else "0"
    if decay.orbital is None:
        parts = [("none", "none", "D*" in decay.charm, charge, 1.0)]
    else:
        parts = [part for part in _light_mesons(fractions, decay.family, charge) if part[-1] > 0.0]
    for bachelor, second, is_vector, daughter_charge, share in parts:
        for vector, soft, ground, fraction in _hadron_chains(is_vector, daughter_charge, fractions):
            yield bachelor, second, vector, soft, ground, share * fraction


def _light_mesons(
    fractions: BranchingFractions, family: str, charge: str
) -> Iterator[tuple[str, str, bool, str, float]]:
    """Bachelor, second pion, whether the rest is a D*, charge of the rest, share."""
    state = fractions.state(family)
    other = "0" if charge == "+" else "+"
    total = 1.0 + state.to_two_pions
    for is_vector, share in ((True, state.to_vector / total), (False, (1.0 - state.to_vector) / total)):
        if state.light == "pi":
            yield "charged", "none", is_vector, other, share * CHARGED_PION_SHARE
            yield "neutral", "none", is_vector, charge, share * (1.0 - CHARGED_PION_SHARE)
        elif state.light == "eta":
            yield "eta", "none", is_vector, charge, share
        else:
            yield from _pion_pairs(fractions, is_vector, charge, share)
    yield from _pion_pairs(fractions, False, charge, state.to_two_pions / total)


def _pion_pairs(
    fractions: BranchingFractions, is_vector: bool, charge: str, share: float
) -> Iterator[tuple[str, str, bool, str, float]]:
    other = "0" if charge == "+" else "+"
    for first, second, isospin in fractions.pion_pairs:
        yield first, second, is_vector, charge if first == second else other, share * isospin


def _hadron_chains(
    is_vector: bool, charge: str, fractions: BranchingFractions
) -> Iterator[tuple[str, str, str, float]]:
    """D*, soft particle, D, share."""
    if not is_vector:
        yield "", "none", "D" + charge, 1.0
        return
    vector = "D*" + charge
    for ground, soft, fraction in fractions.vector_decays[vector]:
        yield vector, soft, ground, fraction


def _check(what: str, given: tuple[str, ...], allowed: tuple[str, ...]) -> None:
    unknown = [name for name in given if name not in allowed]
    if unknown:
        raise InputError(*(Problem(f"no such {what}", got=repr(name), wanted=", ".join(allowed)) for name in unknown))
