"""Constants of nature: masses (GeV), lifetimes (ps), branching fractions, couplings. No choice of this project.

Values follow the 2024 and 2025 editions of the particle data tables; they were written from memory and are compared in
the tests with the `particle` package, which is made from the same tables.

Hadrons are named as in these tables, in ASCII, without bars; a table holds one member of a charge-conjugate pair and
`untagged` maps the other one to it ("D*-" -> "D*+").
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType

HBAR = 6.582119569e-13
"""GeV ps. A width in GeV times a lifetime in ps, over this, is a branching fraction."""

SPEED_OF_LIGHT = 0.299792458
"""mm/ps."""

FINE_STRUCTURE = 1.0 / 137.035999177
"""At zero momentum."""

FERMI_COUPLING = 1.1663788e-5
"""GeV^-2, from the muon lifetime."""

ELECTROWEAK_CORRECTION = 1.0066
"""Short-distance factor on the semileptonic amplitude (Nucl. Phys. B 196 (1982) 83). Cancels in ratios."""

VCB = 39.4e-3
"""|V_cb| of exclusive decays, +- 0.8e-3 (particle data tables 2022, review of V_cb and V_ub). Cancels in ratios."""

BOTTOM_MASS = 4.18
CHARM_MASS = 0.92
"""Quark masses, MS-bar, both at the scale of the b mass: for the scalar currents."""

BOTTOM_POLE_MASS = 4.8
CHARM_POLE_MASS = 1.4
"""Quark masses of the equation-of-motion model of the tensor form factors (Phys. Rev. D 88 (2013) 094012)."""

_D0 = 1.86484

MASS: Mapping[str, float] = MappingProxyType(
    {
        "Y(4S)": 10.5794,
        "B0": 5.27972,
        "B+": 5.27941,
        "D0": _D0,
        "D+": 1.86966,
        # The mass differences are known far better than the masses, and they set the slow-pion momentum.
        "D*0": _D0 + 0.142014,
        "D*+": _D0 + 0.1454258,
        # Orbitally excited states: one mass for both charges.
        "D0*(2300)0": 2.343,
        "D0*(2300)+": 2.343,
        "D1'(2430)0": 2.412,
        "D1'(2430)+": 2.412,
        "D1(2420)0": 2.4221,
        "D1(2420)+": 2.4221,
        "D2*(2460)0": 2.4611,
        "D2*(2460)+": 2.4611,
        "K+": 0.493677,
        "K0": 0.497611,
        "pi+": 0.13957039,
        "pi0": 0.1349768,
        "rho+": 0.77511,
        "eta": 0.547862,
        "rho0": 0.77526,
        "D_s+": 1.96835,
        "D_s*+": 2.1122,
        "K*+": 0.89188,
        "K*0": 0.89556,
        "K_S": 0.497611,
        "K_L": 0.497611,
        "eta'": 0.95778,
        "omega": 0.78266,
        "phi": 1.01946,
        "gamma": 0.0,
        "e": 0.00051099895,
        "mu": 0.1056583755,
        "tau": 1.77693,
    }
)

WIDTH: Mapping[str, float] = MappingProxyType(
    {
        "D0*(2300)": 0.229,
        "D1'(2430)": 0.314,
        "D1(2420)": 0.0313,
        "D2*(2460)": 0.0473,
        "D*+": 83.4e-6,
        "rho+": 0.1491,
    }
)

LIFETIME: Mapping[str, float] = MappingProxyType({"B0": 1.517, "B+": 1.638, "tau": 0.2903, "D0": 0.4103, "D+": 1.033})

MIXING_PROBABILITY = 0.1858
"""Time-integrated probability chi_d that a B0 decays as its antiparticle."""

BRANCHING_FRACTION: Mapping[str, Mapping[str, float]] = MappingProxyType(
    {
        "tau": MappingProxyType(
            {"e": 0.1782, "mu": 0.1739, "pi": 0.1082, "rho": 0.2549, "a1": 0.0902, "a1_1prong": 0.0926}
        ),
        "D*+": MappingProxyType({"D0 pi+": 0.677, "D+ pi0": 0.307, "D+ gamma": 0.016}),
        "D*0": MappingProxyType({"D0 pi0": 0.647, "D0 gamma": 0.353}),
        "D0": MappingProxyType({"K- pi+": 0.0395}),
        "D+": MappingProxyType({"K- pi+ pi+": 0.0938}),
    }
)
"""Parent -> final state -> branching fraction; neutrinos are left out of the final states of the tau.

tau: "rho" is pi- pi0, "a1" pi- pi- pi+, "a1_1prong" pi- pi0 pi0, all without those from kaons.
"""


def untagged(name: str) -> str:
    """Name of the particle that stands in the tables for `name` and its charge conjugate: "D*-" gives "D*+"."""
    return name[:-1] + "+" if name.endswith("-") else name


def mass(name: str) -> float:
    """Mass in GeV of a particle named as in the tables, either charge. KeyError for a name that is not there."""
    return MASS[untagged(name)]
