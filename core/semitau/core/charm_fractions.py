"""Branching fractions of double charm: B -> D(*) D_s(*), B -> D(*) D(*) K, semileptonic charm decays, light hadrons.

All values follow the particle data tables (2024 edition) and were written from memory; those of B -> D(*) D(*) K follow
Phys. Rev. D 83 (2011) 032004, from memory too. Each has its error. Semileptonic ones are those with an electron; the
muon's come from the ratio of the widths (`gen.decays.charm_semileptonic`).

Names as in `constants`. Charge conjugates are implied and bars left out: "D*" beside a B0 is a D*-, and the second
charmed meson of a pair is the one that holds the charm quark from the W.
"""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import NamedTuple


class Fraction(NamedTuple):
    """A branching fraction and its error."""

    value: float
    error: float


def _table(
    rows: Mapping[str, Mapping[tuple[str, ...], tuple[float, float]]],
) -> Mapping[str, Mapping[tuple[str, ...], Fraction]]:
    return MappingProxyType({k: MappingProxyType({n: Fraction(*v) for n, v in row.items()}) for k, row in rows.items()})


TO_TWO_CHARMED = _table(
    {
        "B0": {
            ("D", "D_s+"): (7.2e-3, 0.8e-3),
            ("D", "D_s*+"): (7.4e-3, 1.6e-3),
            ("D*", "D_s+"): (8.0e-3, 1.1e-3),
            ("D*", "D_s*+"): (17.7e-3, 1.4e-3),
            ("D", "D0", "K+"): (1.07e-3, 0.11e-3),
            ("D", "D+", "K0"): (0.75e-3, 0.17e-3),
            ("D", "D*0", "K+"): (3.5e-3, 0.4e-3),
            # The sum with D*- D+ K0 is 6.4e-3; shared as the two are in the decays of the B+.
            ("D", "D*+", "K0"): (4.1e-3, 0.8e-3),
            ("D*", "D0", "K+"): (2.47e-3, 0.21e-3),
            ("D*", "D+", "K0"): (2.3e-3, 0.6e-3),
            ("D*", "D*0", "K+"): (10.6e-3, 0.9e-3),
            ("D*", "D*+", "K0"): (8.1e-3, 0.7e-3),
        },
        "B+": {
            ("D", "D_s+"): (9.0e-3, 0.9e-3),
            ("D", "D_s*+"): (7.6e-3, 1.6e-3),
            ("D*", "D_s+"): (8.2e-3, 1.7e-3),
            ("D*", "D_s*+"): (17.1e-3, 2.4e-3),
            ("D", "D0", "K+"): (1.45e-3, 0.33e-3),
            ("D", "D+", "K0"): (1.55e-3, 0.21e-3),
            ("D", "D*0", "K+"): (6.3e-3, 0.5e-3),
            ("D", "D*+", "K0"): (3.8e-3, 0.4e-3),
            ("D*", "D0", "K+"): (2.26e-3, 0.23e-3),
            ("D*", "D+", "K0"): (2.1e-3, 0.5e-3),
            ("D*", "D*0", "K+"): (11.2e-3, 1.3e-3),
            ("D*", "D*+", "K0"): (9.2e-3, 1.2e-3),
        },
    }
)
"""Parent -> (charmed meson that is reconstructed, without charge; what comes beside it) -> branching fraction."""

TO_LEPTONS = _table(
    {
        "D_s+": {
            ("tau",): (5.36e-2, 0.10e-2),
            ("mu",): (5.35e-3, 0.12e-3),
            ("eta",): (2.26e-2, 0.06e-2),
            ("eta'",): (0.80e-2, 0.04e-2),
            ("phi",): (2.34e-2, 0.12e-2),
            ("K0",): (0.29e-2, 0.04e-2),
            ("K*0",): (0.21e-2, 0.03e-2),
        },
        "D0": {
            ("K+",): (3.55e-2, 0.03e-2),
            ("K*+",): (2.15e-2, 0.16e-2),
            ("pi+",): (0.291e-2, 0.004e-2),
            ("rho+",): (0.150e-2, 0.012e-2),
        },
        "D+": {
            ("K0",): (8.72e-2, 0.09e-2),
            ("K*0",): (5.40e-2, 0.10e-2),
            ("pi0",): (0.372e-2, 0.017e-2),
            ("rho0",): (0.19e-2, 0.02e-2),
        },
    }
)
"""Charmed meson -> what comes with the leptons -> branching fraction; ("tau",) and ("mu",) are D_s -> tau nu, mu nu."""

INCLUSIVE_ELECTRON = MappingProxyType(
    {"D_s+": Fraction(6.33e-2, 0.15e-2), "D0": Fraction(6.49e-2, 0.11e-2), "D+": Fraction(16.07e-2, 0.30e-2)}
)
"""Of charmed meson -> e X, to see how much the list above leaves out."""

STRANGE_VECTOR_PHOTON = Fraction(0.936, 0.004)
"""D_s* -> D_s gamma; the rest is taken as D_s pi0."""

LIGHT_DECAYS: Mapping[str, tuple[tuple[float, tuple[str, ...]], ...]] = MappingProxyType(
    {
        "pi0": ((1.0, ("gamma", "gamma")),),
        "K0": ((0.5, ("K_L",)), (0.346, ("pi+", "pi+")), (0.154, ("pi0", "pi0"))),
        "K*0": ((2 / 3, ("K+", "pi+")), (1 / 3, ("K0", "pi0"))),
        "K*+": ((2 / 3, ("K0", "pi+")), (1 / 3, ("K+", "pi0"))),
        "rho+": ((1.0, ("pi+", "pi0")),),
        "rho0": ((1.0, ("pi+", "pi+")),),
        "eta": (
            (0.3936, ("gamma", "gamma")),
            (0.3257, ("pi0", "pi0", "pi0")),
            (0.2302, ("pi+", "pi+", "pi0")),
            (0.0428, ("pi+", "pi+", "gamma")),
        ),
        "eta'": (
            (0.425, ("pi+", "pi+", "eta")),
            (0.295, ("rho0", "gamma")),
            (0.224, ("pi0", "pi0", "eta")),
            (0.025, ("omega", "gamma")),
            (0.023, ("gamma", "gamma")),
        ),
        "phi": (
            (0.491, ("K+", "K+")),
            (0.339, ("K_L", "K_S")),
            (0.103, ("rho+", "pi+")),
            (0.051, ("rho0", "pi0")),
            (0.013, ("eta", "gamma")),
        ),
        "omega": ((0.892, ("pi+", "pi+", "pi0")), (0.0835, ("pi0", "gamma")), (0.0153, ("pi+", "pi+"))),
        "K_S": ((0.692, ("pi+", "pi+")), (0.307, ("pi0", "pi0"))),
    }
)
"""Light hadron -> (share, daughters without the sign of their charge); shares are normalised where they are used."""
