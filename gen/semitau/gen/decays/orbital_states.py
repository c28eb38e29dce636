"""The four orbitally excited charmed mesons: quantum numbers, decays, how often a B decays to them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType


@dataclass(frozen=True)
class OrbitalState:
    """One orbitally excited state, both charges.

    family : name without the charge, e.g. "D1(2420)".
    spin : 0, 1 or 2.
    narrow : member of the doublet with light-quark spin 3/2.
    to_vector : share of its one-pion decays that end in D* (the rest in D).
    light_branching_fraction : B+ -> state l nu, one lepton flavour, times the branching fraction into D(*) pi.
    """

    family: str
    spin: int
    narrow: bool
    to_vector: float
    light_branching_fraction: float


# Averages of measured products B(B+ -> D** l nu) B(D** -> D(*)+ pi-), divided by the isospin factor 2/3 (Eur. Phys. J.
# C 81 (2021) 226, from memory): D1 0.281%, D2* 0.15% (D pi) and 0.068% (D* pi), D1' 0.13%, D0* 0.29%. Two-pion decays
# are left out, so that the numbers are what the D** components of a study contain. B0: scaled by the lifetimes.
ORBITAL_STATES: Mapping[str, OrbitalState] = MappingProxyType(
    {
        state.family: state
        for state in (
            OrbitalState("D1(2420)", 1, True, 1.0, 0.00422),
            OrbitalState("D2*(2460)", 2, True, 0.39, 0.00327),
            OrbitalState("D0*(2300)", 0, False, 0.0, 0.00435),
            OrbitalState("D1'(2430)", 1, False, 1.0, 0.00195),
        )
    }
)

CHARGED_PION_SHARE = 2.0 / 3.0
"""Share of charged pions in a decay of isospin 1/2 into isospin 1/2 and a pion."""
