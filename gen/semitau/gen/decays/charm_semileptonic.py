"""Semileptonic decays of D and D_s mesons, c -> s and c -> d, from form factors with poles.

Formulas and frames are those of `amplitudes.py`, with one difference: the charge conjugate of c -> s has the lepton of
b -> c with the other sign of the vector current, so the helicities + and - of the hadron change places. That is why
leptons of charm are soft: the W is mostly left-handed, and a positive lepton goes against its spin.

Only shapes are used: the rates come from branching fractions. Form factors: f+ with the pole of the vector meson and
one effective pole above it, f0 with one effective pole (Phys. Lett. B 478 (2000) 417); V, A1, A2, A0 with single poles,
as measurements quote them. Numbers from memory: particle data tables (ratios at q2 = 0; alpha from world averages).
"""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache
from types import MappingProxyType
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.constants import MASS

from ..truth.kinematics import kallen

Floats = npt.NDArray[np.float64]


class Pseudoscalar(NamedTuple):
    """f+ = 1 / ((1 - q2/pole²)(1 - alpha q2/pole²)), f0 = 1 / (1 - q2 / (beta pole²)); pole in GeV."""

    pole: float
    alpha: float
    beta: float


class Vector(NamedTuple):
    """V(0)/A1(0) and A2(0)/A1(0), and the poles (GeV) of V, of A1 and A2, and of A0."""

    r_V: float
    r_2: float
    vector: float
    axial: float
    pseudoscalar: float


# Poles of c -> s: D_s*, D_s1(2460), D_s; of c -> d: D*, D1(2420), D.
_STRANGE = (2.1122, 2.4595, 1.96835)
_DOWN = (2.0103, 2.4221, 1.86966)

FORM_FACTORS: Mapping[tuple[str, str], Pseudoscalar | Vector] = MappingProxyType(
    {
        ("D_s+", "eta"): Pseudoscalar(_STRANGE[0], 0.30, 1.3),
        ("D_s+", "eta'"): Pseudoscalar(_STRANGE[0], 0.30, 1.3),
        ("D_s+", "K0"): Pseudoscalar(_DOWN[0], 0.28, 1.3),
        ("D0", "K+"): Pseudoscalar(_STRANGE[0], 0.30, 1.3),
        ("D+", "K0"): Pseudoscalar(_STRANGE[0], 0.30, 1.3),
        ("D0", "pi+"): Pseudoscalar(_DOWN[0], 0.28, 1.3),
        ("D+", "pi0"): Pseudoscalar(_DOWN[0], 0.28, 1.3),
        ("D_s+", "phi"): Vector(1.80, 0.84, *_STRANGE),
        ("D_s+", "K*0"): Vector(1.67, 0.77, *_DOWN),
        ("D0", "K*+"): Vector(1.49, 0.80, *_STRANGE),
        ("D+", "K*0"): Vector(1.49, 0.80, *_STRANGE),
        ("D0", "rho+"): Vector(1.64, 0.84, *_DOWN),
        ("D+", "rho0"): Vector(1.64, 0.84, *_DOWN),
    }
)
"""(charmed meson, hadron) -> form factors; f+(0) and A1(0) are set to 1."""


@dataclass(frozen=True)
class CharmDecay:
    """charmed meson -> hadron lepton nu; names as in `constants.MASS`, lepton "e" or "mu"."""

    meson: str
    hadron: str
    lepton: str

    @property
    def m_meson(self) -> float:
        """GeV."""
        return MASS[self.meson]

    @property
    def m_hadron(self) -> float:
        """GeV."""
        return MASS[self.hadron]

    @property
    def m_lepton(self) -> float:
        """GeV."""
        return MASS[self.lepton]

    @property
    def q2_range(self) -> tuple[float, float]:
        """Smallest and largest q2, GeV²."""
        return self.m_lepton**2, (self.m_meson - self.m_hadron) ** 2


def hadron_amplitudes(decay: CharmDecay, q2: Floats) -> tuple[Floats, Floats, Floats, Floats]:
    """J_+, J_-, J_0, J_t at q2 (GeV²), times sqrt(q2), as `amplitudes.py` has them; normalised by f+(0) or A1(0)."""
    M, m = decay.m_meson, decay.m_hadron
    square = kallen(M, m, q2)
    size, root = np.sqrt(square), np.sqrt(q2)
    shape = FORM_FACTORS[decay.meson, decay.hadron]
    if isinstance(shape, Pseudoscalar):
        y = q2 / shape.pole**2
        plus, zero = 1.0 / ((1.0 - y) * (1.0 - shape.alpha * y)), 1.0 / (1.0 - y / shape.beta)
        nothing = np.zeros_like(q2)
        return nothing, nothing, -0.5 * size * plus, 0.5 * (M**2 - m**2) * zero
    A1 = 1.0 / (1.0 - q2 / shape.axial**2)
    A2 = shape.r_2 * A1
    V = shape.r_V / (1.0 - q2 / shape.vector**2)
    # At q2 = 0 A0 is the combination A3, else the rate of massless leptons would diverge.
    A0 = ((M + m) - (M - m) * shape.r_2) / (2.0 * m) / (1.0 - q2 / shape.pseudoscalar**2)
    transverse, parity = (M + m) * A1, size * V / (M + m)
    longitudinal = ((M**2 - m**2 - q2) * (M + m) * A1 - square * A2 / (M + m)) / (2.0 * m)
    return (
        0.5 * root * (transverse + parity),
        0.5 * root * (transverse - parity),
        0.5 * longitudinal,
        -0.5 * size * A0,
    )


class AngularTerms(NamedTuple):
    """Density in c = cos(theta) at fixed q2: sine² (1 - c²) + cosine² c² + odd c."""

    sine2: Floats
    cosine2: Floats
    odd: Floats

    @property
    def integral(self) -> Floats:
        """Over c from -1 to 1."""
        return (4.0 * self.sine2 + 2.0 * self.cosine2) / 3.0


def angular_terms(decay: CharmDecay, q2: Floats) -> AngularTerms:
    """Summed over helicities of hadron and lepton; theta: lepton in the W frame against the flight of the W."""
    plus, minus, zero, timelike = hadron_amplitudes(decay, q2)
    x2 = decay.m_lepton**2 / q2
    transverse = plus**2 + minus**2
    return AngularTerms(
        sine2=0.5 * transverse * (1.0 + x2) + zero**2 + x2 * timelike**2,
        cosine2=transverse + x2 * (zero**2 + timelike**2),
        odd=minus**2 - plus**2 + 2.0 * x2 * timelike * zero,
    )


def q2_density(decay: CharmDecay, q2: Floats) -> Floats:
    """d Gamma / d q2 without constants: |p| (1 - m_l²/q2)² times the integral over the angle."""
    momentum = np.sqrt(kallen(decay.m_meson, decay.m_hadron, q2)) / (2.0 * decay.m_meson)
    density: Floats = momentum * (1.0 - decay.m_lepton**2 / q2) ** 2 * angular_terms(decay, q2).integral
    return density


def q2_of_position(decay: CharmDecay, t: Floats) -> Floats:
    """q2 in GeV² at positions t in [0, 1] of the tables; the map tames both ends."""
    low, high = decay.q2_range
    return low + (high - low) * t * t * (3.0 - 2.0 * t)


_NODES = np.polynomial.legendre.leggauss(40)


@lru_cache(maxsize=64)
def width(decay: CharmDecay) -> float:
    """Integral of `q2_density` (GeV² times the square of the form factor's unit), to better than 1e-6 of itself."""
    nodes, weights = _NODES
    t = 0.5 * (nodes + 1.0)
    low, high = decay.q2_range
    return float(0.5 * weights @ (q2_density(decay, q2_of_position(decay, t)) * (high - low) * 6.0 * t * (1.0 - t)))


def muon_over_electron(meson: str, hadron: str) -> float:
    """Ratio of the widths: the muon mass costs a few per cent."""
    return width(CharmDecay(meson, hadron, "mu")) / width(CharmDecay(meson, hadron, "e"))
