"""The polarimeter of a tau that decayed into pions, from their momenta: the vector Pi of `hadronic_tau.py`.

Four-momenta are float64 arrays (4, n), order px, py, pz, E, in GeV.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from .decay_angles import invariant_mass, to_rest_frame
from .hadronic_currents import form_factors

Floats = npt.NDArray[np.float64]

PARTNERS = {"rho": ("pi0",), "a1": ("pi_second", "pi_odd"), "a1_1prong": ("pi0_first", "pi0_second")}
"""Decay of the tau -> fields of events for its pions besides the one in "lepton"."""


def polarimeter(tau: Floats, pions: tuple[Floats, ...]) -> Floats:
    """(4, n): light-like vector whose direction in the tau rest frame is the polarimeter vector, in the given frame.

    pions : one, the charged and the neutral one, or three, of which the last is unlike the two others.
    """
    if len(pions) == 1:
        return pions[0]
    hadrons = np.sum(pions, axis=0)
    at_rest = [to_rest_frame(pion, hadrons)[:3] for pion in pions]
    if len(pions) == 2:
        real, imaginary = at_rest[0] - at_rest[1], np.zeros_like(at_rest[0])
    else:
        s1, s2 = (invariant_mass(pion + pions[2]) ** 2 for pion in (pions[1], pions[0]))
        current = form_factors(s2) * (at_rest[0] - at_rest[2]) + form_factors(s1) * (at_rest[1] - at_rest[2])
        real, imaginary = current.real, current.imag
    neutrino = to_rest_frame(tau - hadrons, hadrons)[:3]
    u = neutrino / np.sqrt(np.sum(neutrino**2, axis=0))
    square = np.sum(real**2 + imaginary**2, axis=0)
    cross = np.cross(real, imaginary, axis=0)
    space = square * u - 2.0 * (np.sum(real * u, axis=0) * real + np.sum(imaginary * u, axis=0) * imaginary + cross)
    time = square - 2.0 * np.sum(u * cross, axis=0)
    away = np.concatenate([-hadrons[:3], hadrons[3:]])
    return to_rest_frame(np.concatenate([space, time[None]]), away)
