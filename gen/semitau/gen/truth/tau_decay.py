"""Decay of a polarised tau into a charged particle and neutrinos, in its rest frame.

tau -> l nu nu with both neutrinos integrated: d Gamma ~ |l| (A(E) - B(E) n.P) dE dOmega for the direction n of the
lepton and the polarisation P of a tau- (V - A, lepton mass kept). tau -> pi nu: d Gamma ~ 1 + n.P at one energy, i.e.
B = -A.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined
from semitau.core.constants import MASS

Floats = npt.NDArray[np.float64]

TAU_MASS = MASS["tau"]


def energy_range(mass: float) -> tuple[float, float]:
    """Smallest and largest energy (GeV) of a charged daughter of this mass in the tau rest frame."""
    return mass, (TAU_MASS**2 + mass**2) / (2.0 * TAU_MASS)


@inlined
def emission(energy: Any, mass: float) -> tuple[Any, Any, Any]:
    """(|l|, A, B) at an energy (GeV, number or array) of the charged lepton of this mass."""
    momentum = np.sqrt((energy - mass) * (energy + mass))
    pair_mass2 = TAU_MASS**2 + mass**2 - 2.0 * TAU_MASS * energy
    dot = TAU_MASS * energy - mass**2
    even = pair_mass2 * TAU_MASS * energy + 2.0 * (TAU_MASS**2 - TAU_MASS * energy) * dot
    odd = TAU_MASS * momentum * (2.0 * dot - pair_mass2)
    return momentum, even, odd


def energy_density(mass: float, position: Floats) -> Floats:
    """Unnormalised density of the lepton energy in `position` in [0, 1]: energy = mass + span * position²."""
    low, high = energy_range(mass)
    energy = low + (high - low) * position**2
    momentum, even, _ = emission(energy, mass)
    density: Floats = momentum * even * position
    return density
