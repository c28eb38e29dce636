"""Double charm: B -> D(*) D_s(*) and B -> D(*) D(*) K, where the second charmed meson gives the lepton.

The first D(*), with the charm quark of the b decay, is the one that is reconstructed; the second one holds the charm
quark from the W and decays to a lepton of the same charge as a signal lepton has. What comes besides is seen as tracks
or leaves energy, or is lost.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator
from dataclasses import dataclass

from semitau.core.charm_fractions import Fraction
from semitau.core.constants import MASS
from semitau.core.errors import InputError, Problem

from .branching_fractions import FROM_TABLES, BranchingFractions
from .chains import Channel
from .charm_semileptonic import muon_over_electron
from .decay import DEFAULT_SETS, LEPTONS, PARENTS, Decay, charm_name
from .form_factor_set import FormFactorSet
from .seen_charm import SeenCharm

FIRST = ("D", "D*")
BESIDE = ("D_s", "D_s*", "D K", "D* K")
"""What a B decay has beside the D(*) that is reconstructed, without charges."""

SOURCES = ("tau", "mu", "eta", "eta'", "phi", "K", "K*", "pi", "rho")
"""Where the lepton comes from: D_s -> tau nu, D_s -> mu nu, or the hadron beside lepton and neutrino."""


@dataclass(frozen=True)
class DoubleCharmChain(SeenCharm):
    """One decay chain; charge conjugation is implied and species leave it out, as in `chains.Channel`.

    parent : "B+" or "B0". family : "D" or "D*", the meson that is reconstructed. vector, soft, ground : how it decays.
    partner : what comes beside it, "D_s+", "D_s*+", "D0", "D+", "D*0" or "D*+". kaon : "K+", "K0" or "".
    beside_soft : pion or photon of a D* partner: "none", "charged_pion" or "neutral" (pion or photon).
    meson : "D_s+", "D0" or "D+", which gives the lepton. hadron : what comes with the lepton pair; "" for D_s -> l nu.
    lepton : of the meson's decay, "e", "mu" or "tau". tau_to : "e" or "mu" for a tau, else None.
    branching_fraction : of the whole chain for one B of this kind, up to the D, whose own decay is not part of it.
    form_factors : set of B -> D*, for the helicities in B -> D* D_s*.
    photon_share : of photons among the neutral pions and photons of the partner's decay to `meson`.
    """

    parent: str
    family: str
    vector: str
    soft: str
    ground: str
    partner: str
    kaon: str
    beside_soft: str
    meson: str
    hadron: str
    lepton: str
    tau_to: str | None
    branching_fraction: float
    form_factors: FormFactorSet | str
    photon_share: float

    @property
    def bachelor(self) -> str:
        """There is no pion of a D**."""
        return "none"

    @property
    def second(self) -> str:
        """Nor a second one."""
        return "none"

    @property
    def beside(self) -> str:
        """The class of the B decay: "D_s", "D_s*", "D K" or "D* K"."""
        return class_of(self.entry[2:])

    @property
    def entry(self) -> tuple[str, ...]:
        """Where the branching fraction of the B decay stands in TO_TWO_CHARMED: parent, then the key of its table."""
        beside = (self.partner, self.kaon) if self.kaon else (self.partner,)
        return (self.parent, self.family, *beside)

    @property
    def source(self) -> str:
        """Where the lepton comes from, one of SOURCES."""
        return source_of(self.hadron or self.lepton)

    @property
    def seen_lepton(self) -> str:
        """The charged lepton that is detected."""
        return self.tau_to or self.lepton

    @property
    def m_parent(self) -> float:
        """GeV."""
        return MASS[self.parent]

    @property
    def m_charm(self) -> float:
        """Of the D(*) that is reconstructed, GeV."""
        return self.m_vector or self.m_ground

    @property
    def m_partner(self) -> float:
        """GeV."""
        return MASS[self.partner]

    @property
    def m_kaon(self) -> float:
        """GeV; 0 if there is none."""
        return MASS[self.kaon] if self.kaon else 0.0

    @property
    def m_meson(self) -> float:
        """GeV."""
        return MASS[self.meson]

    @property
    def m_visible(self) -> float:
        """Of the charged lepton that is detected, GeV."""
        return MASS[self.seen_lepton]

    @property
    def decay(self) -> Decay:
        """B -> D(*) e nu of the same mesons: its hadron current is that of the factorised decay."""
        return Decay(self.parent, charm_name(self.parent, self.family), "e", self.form_factors)

    @property
    def name(self) -> str:
        """The chain in words, with species as in the fields, e.g. "B0 -> D* D_s*+, D* -> D0 charged_pion, ..."."""
        text = f"{self.parent} -> {self.vector or self.ground} {self.partner}" + (f" {self.kaon}" if self.kaon else "")
        if self.vector:
            text += f", {self.vector} -> {self.ground} {self.soft}"
        if self.partner != self.meson:
            text += f", {self.partner} -> {self.meson} {self.beside_soft}"
        text += f", {self.meson} -> " + (f"{self.hadron} " if self.hadron else "") + self.lepton
        return text + (f", tau -> {self.tau_to}" if self.tau_to else "")


AnyChain = Channel | DoubleCharmChain
"""A decay chain of either kind of component."""


def class_of(beside: tuple[str, ...]) -> str:
    """Without charges: ("D*0", "K+") gives "D* K"."""
    return " ".join(name.rstrip("0+") for name in beside)


def source_of(product: str) -> str:
    """Without charges: "K*0" gives "K*"."""
    return product.rstrip("0+")


def double_charm_chains(
    parents: Iterable[str],
    charms: Iterable[str] = FIRST,
    beside: Iterable[str] = BESIDE,
    leptons: Iterable[str] = LEPTONS,
    *,
    form_factors: FormFactorSet | str = DEFAULT_SETS["Dst"],
    fractions: BranchingFractions = FROM_TABLES,
) -> tuple[DoubleCharmChain, ...]:
    """Every chain of these parents to these reconstructed mesons with these companions.

    parents : of "B+", "B0". charms : of FIRST. beside : of BESIDE. leptons : of the charm decay, of "e", "mu", "tau"; a
    tau goes on to e and mu. form_factors : of B -> D*. fractions : instead of those of the tables.

    InputError lists names that are unknown.
    """
    chosen = tuple(parents), tuple(charms), tuple(beside), tuple(leptons)
    words = zip(
        ("parent", "charmed meson", "companion", "lepton"), chosen, (PARENTS, FIRST, BESIDE, LEPTONS), strict=True
    )
    problems = [
        Problem(f"no such {what}", got=repr(name), wanted=", ".join(allowed))
        for what, given, allowed in words
        for name in given
        if name not in allowed
    ]
    if problems:
        raise InputError(*problems)
    return tuple(_chains(*chosen, form_factors, fractions))


def _chains(
    parents: tuple[str, ...],
    charms: tuple[str, ...],
    beside: tuple[str, ...],
    leptons: tuple[str, ...],
    form_factors: FormFactorSet | str,
    fractions: BranchingFractions,
) -> Iterator[DoubleCharmChain]:
    for parent in parents:
        for (family, partner, *rest), decay in fractions.to_two_charmed(parent).items():
            if family not in charms or class_of((partner, *rest)) not in beside:
                continue
            kaon = rest[0] if rest else ""
            for vector, soft, ground, first in _first_meson(parent, family, fractions):
                for meson, beside_soft, second in _partner(partner, fractions):
                    photons = _photon_share(partner, meson, fractions)
                    for hadron, lepton, tau_to, third in _lepton_sources(meson, fractions):
                        fraction = decay.value * first * second * third
                        if lepton in leptons:
                            yield DoubleCharmChain(
                                parent, family, vector, soft, ground, partner, kaon, beside_soft, meson, hadron, lepton,
                                tau_to, fraction, form_factors, photons,
                            )  # fmt: skip


def _first_meson(parent: str, family: str, fractions: BranchingFractions) -> Iterator[tuple[str, str, str, float]]:
    """D*, soft particle, D, share."""
    charge = "+" if parent == "B0" else "0"
    if family == "D":
        yield "", "none", "D" + charge, 1.0
        return
    for ground, soft, share in fractions.vector_decays["D*" + charge]:
        yield "D*" + charge, soft, ground, share


def _partner(partner: str, fractions: BranchingFractions) -> Iterator[tuple[str, str, float]]:
    """Meson that decays weakly, soft particle, share; neutral pions and photons go together."""
    if partner == "D_s*+":
        yield "D_s+", "neutral", 1.0
    elif "*" not in partner:
        yield partner, "none", 1.0
    else:
        shares: dict[tuple[str, str], float] = {}
        for ground, soft, share in fractions.vector_decays[partner]:
            kind = ground, "charged_pion" if soft == "charged_pion" else "neutral"
            shares[kind] = shares.get(kind, 0.0) + share
        for (ground, soft), share in shares.items():
            yield ground, soft, share


def _photon_share(partner: str, meson: str, fractions: BranchingFractions) -> float:
    """Of photons among the neutral pions and photons of partner -> meson."""
    if partner == "D_s*+":
        return fractions.value(partner, "D_s+ gamma")
    if partner == meson:
        return 0.0
    neutral = {
        soft: share
        for ground, soft, share in fractions.vector_decays[partner]
        if ground == meson and soft != "charged_pion"
    }
    whole = sum(neutral.values())
    return neutral.get("photon", 0.0) / whole if whole > 0.0 else 0.0


def _lepton_sources(meson: str, fractions: BranchingFractions) -> Iterator[tuple[str, str, str | None, float]]:
    """Hadron, lepton, daughter of a tau, branching fraction."""
    for (product,), fraction in fractions.to_leptons(meson).items():
        if product == "tau":
            for lepton in ("e", "mu"):
                yield "", "tau", lepton, fraction.value * fractions.value("tau", lepton)
        elif product == "mu":
            yield "", "mu", None, fraction.value
        else:
            yield product, "e", None, fraction.value
            yield product, "mu", None, fraction.value * muon_over_electron(meson, product)


def relative_error(fractions: Iterable[tuple[float, Fraction]]) -> float:
    """Of a sum of weighted branching fractions with independent errors."""
    rows = list(fractions)
    total = sum(weight * fraction.value for weight, fraction in rows)
    return float(sum((weight * fraction.error) ** 2 for weight, fraction in rows) ** 0.5 / total)
