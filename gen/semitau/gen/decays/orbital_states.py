"""The four orbitally excited charmed mesons: quantum numbers, decays, how often a B decays to them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType

from semitau.core.constants import MASS, WIDTH


@dataclass(frozen=True)
class CharmState:
    """A charmed state above the D*, both charges: a resonance, or a system of a D or D* and light mesons.

    family : name without the charge, e.g. "D1(2420)" or "(D pi)".
    spin : 0, 1 or 2.
    narrow : member of the doublet with light-quark spin 3/2.
    to_vector : share of D* (the rest D) where one light meson goes with it.
    light_branching_fraction : B+ -> state l nu, one lepton flavour, times the branching fraction into what `to_vector`
        shares out.
    to_two_pions : decays to D pi pi (flat phase space), relative to these.
    light : what goes with the D or D*: "pi", "pi pi" or "eta".
    continuum : no resonance: its mass follows phase space.
    parity : of the state; a light meson in an S wave takes that of the D(*) to its opposite.
    strength : of a continuum: its universal function at w = 1, such that the width to an electron gives
        `light_branching_fraction` with the shipped sets.
    """

    family: str
    spin: int
    narrow: bool
    to_vector: float
    light_branching_fraction: float
    to_two_pions: float = 0.0
    light: str = "pi"
    continuum: bool = False
    parity: int = 1
    strength: float = 1.0

    @property
    def broad(self) -> bool:
        """Whether the mass is drawn from a line shape; that of the narrow doublet is fixed."""
        return not self.narrow

    @property
    def threshold(self) -> float:
        """GeV: sum of the masses in the heaviest of its charge states."""
        charm = MASS["D*+" if self.to_vector > 0.0 else "D+"]
        return charm + {"pi": MASS["pi+"], "pi pi": 2.0 * MASS["pi+"], "eta": MASS["eta"]}[self.light]

    @property
    def width(self) -> float:
        """GeV; 0 for a continuum."""
        return 0.0 if self.continuum else WIDTH[self.family]

    @property
    def mass(self) -> float:
        """Nominal mass in GeV; for a continuum a typical one."""
        return self.threshold + CONTINUUM_SCALE if self.continuum else MASS[self.family + "0"]


# Averages of measured products B(B+ -> D** l nu) B(D** -> D(*)+ pi-), divided by the isospin factor 2/3 (Eur. Phys. J.
# C 81 (2021) 226, from memory): D1 0.281%, D2* 0.15% (D pi) and 0.068% (D* pi), D1' 0.13%, D0* 0.29%. B0: scaled by the
# lifetimes. D1 -> D pi pi: one third of all, B(D1 -> D* pi) / [B(D* pi) + B(D pi pi)] = 0.67(5) (Phys. Rev. D 85 (2012)
# 094033, from memory).
ORBITAL_STATES: Mapping[str, CharmState] = MappingProxyType(
    {
        state.family: state
        for state in (
            CharmState("D1(2420)", 1, True, 1.0, 0.00422, to_two_pions=0.33 / 0.67),
            CharmState("D2*(2460)", 2, True, 0.39, 0.00327),
            CharmState("D0*(2300)", 0, False, 0.0, 0.00435),
            CharmState("D1'(2430)", 1, False, 1.0, 0.00195),
        )
    }
)

CONTINUUM_SCALE = 0.5
"""GeV: by which the mass spectrum of a continuum falls, beside phase space. A guess, to be varied."""

# Non-resonant decays and the rest of the inclusive rate. B+, one lepton flavour, all charges of the light mesons.
# (D pi), (D* pi): what measured D(*) pi l nu leaves beside the four resonances, (0.58 - 0.64)% and (0.83 - 0.74)%,
# taken as small and positive. (D pi pi), (D* pi pi): measured D(*) pi+ pi- l nu, 0.16% and 0.08% (Phys. Rev. Lett. 116
# (2016) 041801), times 2 for the other charges, less D1 -> D pi pi. (D eta), (D* eta): no measurement; in equal
# parts they fill what is missing to B -> X_c l nu. All from memory; the last is common practice.
CONTINUA: Mapping[str, CharmState] = MappingProxyType(
    {
        state.family: state
        for state in (
            CharmState("(D pi)", 0, False, 0.0, 0.0003, continuum=True, strength=0.58398),
            CharmState("(D* pi)", 1, False, 1.0, 0.0009, continuum=True, strength=0.94550),
            CharmState("(D pi pi)", 0, False, 0.0, 0.0012, light="pi pi", continuum=True, parity=-1, strength=0.65028),
            CharmState("(D* pi pi)", 1, False, 1.0, 0.0016, light="pi pi", continuum=True, parity=-1, strength=0.46537),
            CharmState("(D eta)", 0, False, 0.0, 0.0059, light="eta", continuum=True, strength=3.48613),
            CharmState("(D* eta)", 1, False, 1.0, 0.0059, light="eta", continuum=True, strength=3.47891),
        )
    }
)

CHARM_STATES: Mapping[str, CharmState] = MappingProxyType({**ORBITAL_STATES, **CONTINUA})

CHARGED_PION_SHARE = 2.0 / 3.0
"""Share of charged pions in a decay of isospin 1/2 into isospin 1/2 and a pion."""

PION_PAIR_SHARES: Mapping[tuple[str, str], float] = MappingProxyType(
    {("charged", "charged"): 1.0 / 2.0, ("charged", "neutral"): 1.0 / 3.0, ("neutral", "neutral"): 1.0 / 6.0}
)
"""Charges of the two pions of isospin 1/2 -> isospin 1/2 and a pair: mean of a pair of isospin 0 (2/3, 0, 1/3) and of
isospin 1 (1/3, 2/3, 0)."""

PION_PAIR_ERROR = 1.0 / 6.0
"""Of the share of two charged pions: the distance to either isospin."""
