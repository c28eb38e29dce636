"""The study's machine and detector in the form that compiled kernels take."""

from __future__ import annotations

import numpy as np
from semitau.core.constants import MASS

from ..decays.double_charm import AnyChain, DoubleCharmChain
from ..study_file.categories import Cut
from ..study_file.detector import Curve
from ..study_file.names import LEPTONS, SEEN_LEPTONS
from ..study_file.study import StudyConfig
from ..truth.radiation import SILENT, radiation_of
from . import detector as kernel
from .candidates import Windows
from .efficiency import Efficiency, piecewise_linear
from .light_decays import NO_SPECIES, species

_SOFT = {
    "none": kernel.NO_PARTICLE,
    "charged_pion": kernel.CHARGED_PION,
    "neutral_pion": kernel.NEUTRAL_PION,
    "photon": kernel.PHOTON,
}
_BACHELOR = {
    "none": kernel.NO_PARTICLE,
    "charged": kernel.CHARGED_PION,
    "neutral": kernel.NEUTRAL_PION,
    "eta": kernel.ETA,
}
_PARTNERS = {"rho": kernel.ONE_NEUTRAL, "a1_1prong": kernel.TWO_NEUTRAL, "a1": kernel.TWO_CHARGED}


_BESIDE_SOFT = {"none": "", "charged_pion": "pi+", "neutral": "pi0"}


def kernel_detector(study: StudyConfig) -> kernel.Detector:
    """Everything that the response kernels need to know of the experiment."""
    d = study.detector
    soft = d.soft_pion
    return kernel.Detector(
        beams=kernel.beams(*study.experiment.beam_energies, study.experiment.energy_spread),
        tag=kernel.Tag(
            d.tag.momentum_resolution,
            d.tag.wrong_momentum_resolution,
            d.tag.wrong_fraction,
            d.tag.wrong_charge_fraction,
        ),
        tracks=kernel.Tracks(
            *d.tracks.momentum_resolution,
            d.tracks.angle_resolution,
            *_cosines(d.tracks.polar_acceptance),
            d.tracks.minimum_transverse_momentum,
            _curve(d.tracks.efficiency),
        ),
        photons=kernel.Photons(
            *d.photons.energy_resolution, d.photons.angle_resolution, *_cosines(d.photons.polar_acceptance)
        ),
        leptons=kernel.Leptons(
            _curve(d.lepton_id.e),
            _curve(d.lepton_id.mu),
            _curve(d.lepton_id.e_as_mu),
            _curve(d.lepton_id.mu_as_e),
            _curve(d.lepton_id.pi),
            _curve(d.lepton_id.hadron_as_e),
            _curve(d.lepton_id.hadron_as_mu),
            _curve(d.lepton_id.e_as_pi),
            _curve(d.lepton_id.mu_as_pi),
            int(has_pions(study)),
        ),
        soft=kernel.SoftParticles(
            _curve(soft.charged),
            _curve(soft.neutral),
            _curve(d.photons.efficiency),
            soft.random.charged,
            soft.random.neutral,
            soft.random.photon,
            *soft.random_window,
        ),
        residual=kernel.Residual(
            d.residual_energy.clean_fraction,
            d.residual_energy.noise_mean,
            d.residual_energy.wrong_tag_mean,
            d.residual_energy.lost_neutral_probability,
        ),
        recovery_sine=float(np.sin(study.radiation.recovery_angle)),
    )


def kernel_chain(channel: AnyChain, least_photon: float | None = None) -> kernel.Chain:
    """What the response needs to know of a decay chain. least_photon : GeV, None if leptons do not radiate.

    Leptons of double charm do not.
    """
    beside_soft, kaon, hadron = _others(channel)
    return kernel.Chain(
        parent_mass=MASS[channel.parent],
        d_mass=channel.m_ground,
        dst0_mass=MASS["D*0"],
        dstp_mass=MASS["D*+"],
        beside_soft=beside_soft,
        kaon=kaon,
        hadron=hadron,
        charged_parent=int(channel.parent == "B+"),
        charged_d=int(channel.ground == "D+"),
        muon=int(channel.seen_lepton == "mu"),
        tau_pion=int(channel.seen_lepton not in LEPTONS),
        partners=_PARTNERS.get(channel.seen_lepton, kernel.NO_PARTNER),
        radiation=SILENT if isinstance(channel, DoubleCharmChain) else radiation_of(channel, least_photon),
        soft=_SOFT[channel.soft],
        pion=_BACHELOR[channel.bachelor],
        pion2=_BACHELOR[channel.second],
    )


def _others(channel: AnyChain) -> tuple[int, int, int]:
    """Species of what double charm has beside charmed meson and lepton."""
    if isinstance(channel, DoubleCharmChain):
        # The more frequent one stands for both: a photon of a D_s*, a pion of a D*.
        photon = channel.beside_soft == "neutral" and channel.partner.startswith("D_s")
        beside = "gamma" if photon else _BESIDE_SOFT[channel.beside_soft]
        return species(beside), species(channel.kaon), species(channel.hadron)
    return NO_SPECIES, NO_SPECIES, NO_SPECIES


def delta_m_windows(study: StudyConfig) -> Windows:
    """The delta_m cuts of the D* categories; those of [selection] where the study lacks a category."""
    given: dict[tuple[str, str], Cut | None] = {(c.charm, c.lepton): c.cuts.get("delta_m") for c in study.categories}
    limits = []
    for charm in ("D*0", "D*+"):
        for lepton in SEEN_LEPTONS:
            cut = given.get((charm, lepton), study.selection.get("delta_m"))
            limits.append(-np.inf if cut is None or cut.min is None else cut.min)
            limits.append(np.inf if cut is None or cut.max is None else cut.max)
    return Windows(int(has_pions(study)), *map(float, limits))


def has_pions(study: StudyConfig) -> bool:
    """Whether a category takes pions for the daughters of a tau."""
    return any(category.lepton not in LEPTONS for category in study.categories)


def _curve(curve: Curve) -> Efficiency:
    return piecewise_linear(curve.momentum, curve.value)


def _cosines(angles: tuple[float, float]) -> tuple[float, float]:
    """Limits of the cosine, increasing, for limits of the polar angle."""
    return float(np.cos(angles[1])), float(np.cos(angles[0]))
