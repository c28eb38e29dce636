"""Decays of light hadrons, as flat tables for compiled loops: what companions of the signal leave in the detector.

Daughters follow flat phase space, resonances have their nominal mass, and every decay is at the place of the B.
"""

from __future__ import annotations

import numpy as np
from semitau.core.charm_fractions import LIGHT_DECAYS
from semitau.core.constants import MASS

# Fates of a species.
TRACK, CLUSTER, UNSEEN, DECAYS = range(4)

SPECIES = ("pi+", "K+", "gamma", "K_L", *LIGHT_DECAYS)
NO_SPECIES = -1


def _fate(name: str) -> int:
    if name in LIGHT_DECAYS:
        return DECAYS
    return {"pi+": TRACK, "K+": TRACK, "K_L": UNSEEN}.get(name, CLUSTER)


FATES = np.array([_fate(name) for name in SPECIES], dtype=np.int64)
MASSES = np.array([MASS[name] for name in SPECIES])

_ROWS = [
    (SPECIES.index(name), share / sum(other for other, _ in modes), [SPECIES.index(daughter) for daughter in daughters])
    for name, modes in LIGHT_DECAYS.items()
    for share, daughters in modes
]
FIRST_ROW = np.array([min((k for k, row in enumerate(_ROWS) if row[0] == s), default=0) for s in range(len(SPECIES))])
"""Of each species' decays in the tables below."""

SHARES = np.array([share for _, share, _ in _ROWS])
DAUGHTERS = np.array([(*daughters, NO_SPECIES, NO_SPECIES)[:3] for _, _, daughters in _ROWS], dtype=np.int64)
"""(decays, 3): species; NO_SPECIES after the last one. One daughter alone is the same particle by another name."""


def species(name: str) -> int:
    """Number of a species named without the sign of its charge; NO_SPECIES for ""."""
    return SPECIES.index(name) if name else NO_SPECIES
