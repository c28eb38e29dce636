"""Decay chains: every way in which a B ends in a ground-state D, a seen lepton and perhaps slow particles."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass

from semitau.core.constants import BRANCHING_FRACTION, LIFETIME, MASS
from semitau.core.errors import InputError, Problem

from .decay import DEFAULT_SETS, FAMILIES, LEPTONS, PARENTS, Decay, WilsonCoefficients, charm_name
from .form_factor_set import FormFactorSet
from .orbital_states import CHARGED_PION_SHARE, OrbitalState
from .rates import observables, ratio

PION_MASS = {"none": 0.0, "charged": MASS["pi+"], "neutral": MASS["pi0"]}
SOFT_MASS = {"none": 0.0, "charged_pion": MASS["pi+"], "neutral_pion": MASS["pi0"], "photon": 0.0}

# Species of the D* -> (species of the D, kind of soft particle, branching fraction).
VECTOR_DECAYS = {
    "D*+": tuple(
        (ground, soft, BRANCHING_FRACTION["D*+"][mode])
        for ground, soft, mode in (
            ("D0", "charged_pion", "D0 pi+"),
            ("D+", "neutral_pion", "D+ pi0"),
            ("D+", "photon", "D+ gamma"),
        )
    ),
    "D*0": tuple(
        (ground, soft, BRANCHING_FRACTION["D*0"][mode])
        for ground, soft, mode in (("D0", "neutral_pion", "D0 pi0"), ("D0", "photon", "D0 gamma"))
    ),
}


@dataclass(frozen=True)
class Channel:
    """One fully specified decay chain of a B+ or B0; charge conjugation is implied.

    decay : the semileptonic decay, with its form factors.
    tau_to : decay of the tau: "e", "mu", "pi", "rho" (pi- pi0), "a1" (pi- pi- pi+) or "a1_1prong" (pi- pi0 pi0); None
        if the B decay gave no tau.
    bachelor : pion of D** -> D(*) pi: "none", "charged" or "neutral".
    vector : species of the D*, "D*+" or "D*0"; "" if there is none.
    soft : particle of the D* decay: "none", "charged_pion", "neutral_pion" or "photon".
    ground : species of the D at the end, "D0" or "D+".
    branching_fraction : of the whole chain for one B of this kind, up to the D, whose own decay is not part of it.

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
    def m_vector(self) -> float:
        """GeV; 0 if there is no D*."""
        return MASS[self.vector] if self.vector else 0.0

    @property
    def m_ground(self) -> float:
        """GeV."""
        return MASS[self.ground]

    @property
    def m_soft(self) -> float:
        """GeV."""
        return SOFT_MASS[self.soft]

    @property
    def m_bachelor(self) -> float:
        """GeV; 0 if there is none."""
        return PION_MASS[self.bachelor]

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
            pion = "pi0" if self.bachelor == "neutral" else "pi-" if self.parent == "B0" else "pi+"
            text += f", {self.decay.charm} -> {vector or ground} {pion}"
        if self.vector:
            soft = {"charged_pion": "pi-", "neutral_pion": "pi0", "photon": "gamma"}[self.soft]
            text += f", {vector} -> {ground} {soft}"
        return text


def _conjugate(species: str) -> str:
    return species[:-1] + "-" if species.endswith("+") else species


def channels(
    parents: Iterable[str],
    charms: Iterable[str],
    leptons: Iterable[str],
    *,
    tau_to: Iterable[str] = ("e", "mu"),
    form_factors: Mapping[str, FormFactorSet | str] | None = None,
    wilson: WilsonCoefficients | Mapping[str, complex] | None = None,
    tensor: str = "LO",
) -> tuple[Channel, ...]:
    """Every chain from these parents through these charmed mesons and leptons, in that order.

    parents : of "B+", "B0". charms : families, of "D", "D*", "D1(2420)", "D2*(2460)", "D0*(2300)", "D1'(2430)".
    leptons : of "e", "mu", "tau". tau_to : of "e", "mu", "pi", "rho", "a1", "a1_1prong"; only these decays of the tau.
    form_factors : "D", "Dst", "Dss" -> set; the defaults of `Decay` where left out. wilson, tensor : on the tau only.

    Branching fractions: of D and D* from the widths with the shipped |V_cb|; of D** with light leptons from measured
    averages, with a tau these times the ratio at leading order; of tau and D* from the particle data tables.
    InputError lists names that are unknown.
    """
    parents, charms, leptons, tau_to = tuple(parents), tuple(charms), tuple(leptons), tuple(tau_to)
    _check("parent", parents, PARENTS)
    _check("charmed meson", charms, FAMILIES)
    _check("lepton", leptons, LEPTONS)
    _check("tau decay", tau_to, tuple(BRANCHING_FRACTION["tau"]))
    found: list[Channel] = []
    for parent in parents:
        for family in charms:
            for lepton in leptons:
                transition = {"D": "D", "D*": "Dst"}.get(family, "Dss")
                chosen = (form_factors or {}).get(transition, DEFAULT_SETS[transition])
                couplings, model = (wilson, tensor) if lepton == "tau" else (None, "LO")
                decay = Decay(parent, charm_name(parent, family), lepton, chosen, couplings, model)
                found.extend(chains_of(decay, tau_to))
    return tuple(found)


def semileptonic_branching_fraction(decay: Decay) -> float:
    """Of B -> X_c l nu; for D** of the part that ends in D(*) pi."""
    state = decay.orbital
    if state is None:
        return observables(decay).branching_fraction
    light = state.light_branching_fraction * decay.lifetime / LIFETIME["B+"]
    if decay.lepton != "tau":
        return light
    return light * ratio(decay.parent, decay.charm, decay.form_factors, decay.couplings, decay.tensor)


def chains_of(decay: Decay, tau_to: tuple[str, ...]) -> Iterator[Channel]:
    """Every chain of one decay; the decays of the tau in `tau_to`, which a light lepton does not look at."""
    start = semileptonic_branching_fraction(decay)
    if decay.lepton == "tau":
        leptonic: list[tuple[str | None, float]] = [(name, BRANCHING_FRACTION["tau"][name]) for name in tau_to]
    else:
        leptonic = [(None, 1.0)]
    for tau, tau_fraction in leptonic:
        for bachelor, vector, soft, ground, fraction in _charm_chains(decay):
            yield Channel(decay, tau, bachelor, vector, soft, ground, start * tau_fraction * fraction)


def _charm_chains(decay: Decay) -> Iterator[tuple[str, str, str, str, float]]:
    """Bachelor, D*, soft particle, D, share of the chain."""
    charge = "+" if decay.parent == "B0" else "0"
    if decay.orbital is None:
        yield from _hadron_chains("none", "D*" in decay.charm, charge, 1.0)
        return
    yield from _orbital_chains(decay.orbital, charge)


def _orbital_chains(state: OrbitalState, charge: str) -> Iterator[tuple[str, str, str, str, float]]:
    other = "0" if charge == "+" else "+"
    pions = (("charged", other, CHARGED_PION_SHARE), ("neutral", charge, 1.0 - CHARGED_PION_SHARE))
    for is_vector, share in ((True, state.to_vector), (False, 1.0 - state.to_vector)):
        for bachelor, daughter_charge, isospin in pions:
            if share > 0.0:
                yield from _hadron_chains(bachelor, is_vector, daughter_charge, share * isospin)


def _hadron_chains(
    bachelor: str, is_vector: bool, charge: str, share: float
) -> Iterator[tuple[str, str, str, str, float]]:
    if not is_vector:
        yield bachelor, "", "none", "D" + charge, share
        return
    vector = "D*" + charge
    for ground, soft, fraction in VECTOR_DECAYS[vector]:
        yield bachelor, vector, soft, ground, share * fraction


def _check(what: str, given: tuple[str, ...], allowed: tuple[str, ...]) -> None:
    unknown = [name for name in given if name not in allowed]
    if unknown:
        raise InputError(*(Problem(f"no such {what}", got=repr(name), wanted=", ".join(allowed)) for name in unknown))
