"""The machine and the detector as the compiled kernels take them: plain numbers and piecewise linear efficiencies."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from ..truth.radiation import SILENT, Radiation
from .efficiency import Efficiency, constant

NO_PARTICLE, CHARGED_PION, NEUTRAL_PION, PHOTON, ETA = range(5)
"""Kinds of the soft particle of a D* and of the light mesons of a D**."""


NO_PARTNER, ONE_NEUTRAL, TWO_NEUTRAL, TWO_CHARGED = range(4)
"""Other pions of a tau, besides the one in the LEPTON rows."""

NEVER = constant(0.0)


class Beams(NamedTuple):
    """Nominal collision energy and its spread in GeV; velocity and gamma of the centre-of-mass frame along +z."""

    energy: float
    spread: float
    beta: float
    gamma: float


class Tag(NamedTuple):
    """Resolution of each tag-momentum component (GeV, centre of mass) for right and wrong tags; fractions."""

    resolution: float
    wrong_resolution: float
    wrong_fraction: float
    wrong_charge_fraction: float


class Tracks(NamedTuple):
    """Charged tracks. sigma(pt)/pt = slope * pt (+) floor; angle: rad; cosines of the polar limits; pt_min: GeV."""

    slope: float
    floor: float
    angle: float
    cos_min: float
    cos_max: float
    pt_min: float
    efficiency: Efficiency


class Photons(NamedTuple):
    """Photons, and reconstructed neutral pions as one. sigma(E)/E = stochastic / sqrt(E) (+) floor; angle: rad."""

    stochastic: float
    floor: float
    angle: float
    cos_min: float
    cos_max: float


class Leptons(NamedTuple):
    """Chances against laboratory momentum: a flavour is called by its name, or by that of another one.

    hadrons : 0 if no category asks for pions; then nothing is called a pion.
    """

    electron: Efficiency
    muon: Efficiency
    electron_as_muon: Efficiency
    muon_as_electron: Efficiency
    pion: Efficiency = NEVER
    pion_as_electron: Efficiency = NEVER
    pion_as_muon: Efficiency = NEVER
    electron_as_pion: Efficiency = NEVER
    muon_as_pion: Efficiency = NEVER
    hadrons: int = 0


class SoftParticles(NamedTuple):
    """Efficiencies against laboratory momentum; chances of a random candidate in the wide window of delta_m (GeV)."""

    charged: Efficiency
    neutral: Efficiency
    photon: Efficiency
    random_charged: float
    random_neutral: float
    random_photon: float
    window_min: float
    window_max: float


class Residual(NamedTuple):
    """Residual calorimeter energy: chance of none, means in GeV for right and wrong tags, chance that a lost neutral
    particle leaves its energy."""

    clean_fraction: float
    mean: float
    wrong_tag_mean: float
    lost_neutral: float


class Detector(NamedTuple):
    """Everything that the response kernels need to know of the experiment.

    recovery_sine : of the largest angle between an electron and a photon that is added to it.
    """

    beams: Beams
    tag: Tag
    tracks: Tracks
    photons: Photons
    leptons: Leptons
    soft: SoftParticles
    residual: Residual
    recovery_sine: float = 0.0


class Chain(NamedTuple):
    """What the response needs to know of a channel: masses in GeV and the kinds of its particles.

    charged_parent, charged_d : 1 or 0. muon : 1 if the charged lepton is a muon. tau_pion : 1 if a tau gave pions;
    partners : which others, NO_PARTNER to TWO_CHARGED. radiation : photons of the lepton.
    soft, pion, pion2 : NO_PARTICLE, CHARGED_PION, NEUTRAL_PION, PHOTON or ETA.
    beside_soft, kaon, hadron : what double charm has besides, numbers of `light_decays.SPECIES` or NO_SPECIES.
    """

    parent_mass: float
    d_mass: float
    dst0_mass: float
    dstp_mass: float
    charged_parent: int
    charged_d: int
    muon: int
    soft: int
    pion: int
    pion2: int = NO_PARTICLE
    beside_soft: int = -1
    kaon: int = -1
    hadron: int = -1
    tau_pion: int = 0
    partners: int = NO_PARTNER
    radiation: Radiation = SILENT


def beams(electron: float, positron: float, spread: float) -> Beams:
    """Beams of these energies in GeV, head on along z and massless, with a spread in GeV of the collision energy."""
    total, along = electron + positron, electron - positron
    energy = float(np.sqrt(total**2 - along**2))
    return Beams(energy, spread, along / total, total / energy)
