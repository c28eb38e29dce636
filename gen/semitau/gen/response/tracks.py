"""What the detector makes of a charged track or a photon: acceptance and smearing, one lane at a time."""

from __future__ import annotations

import numpy as np
from semitau.core.compiled import inlined
from semitau.core.elementary import normal_pair
from semitau.core.streams import uniform

from .detector import Photons, Tracks
from .draw_numbers import ONE, THREE, TWO

_TINY = 1e-300
_LEAST_ENERGY_FACTOR = 0.05


@inlined
def in_track_acceptance(px: float, py: float, pz: float, tracks: Tracks) -> float:
    """1.0 if transverse momentum and polar angle are within the limits, else 0.0."""
    across = px * px + py * py
    p = np.sqrt(across + pz * pz)
    inside = (
        (across >= tracks.pt_min * tracks.pt_min) & (pz >= tracks.cos_min * p) & (pz <= tracks.cos_max * p) & (p > 0.0)
    )
    return 1.0 if inside else 0.0


@inlined
def in_photon_acceptance(px: float, py: float, pz: float, photons: Photons) -> float:
    """1.0 if the polar angle is within the limits, else 0.0."""
    p = np.sqrt(px * px + py * py + pz * pz)
    inside = (pz >= photons.cos_min * p) & (pz <= photons.cos_max * p) & (p > 0.0)
    return 1.0 if inside else 0.0


@inlined
def polar_cosine_inside(px: float, py: float, pz: float, tracks: Tracks) -> float:
    """1.0 if the polar angle is within the limits of the tracks, whatever the transverse momentum, else 0.0."""
    p = np.sqrt(px * px + py * py + pz * pz)
    inside = (pz >= tracks.cos_min * p) & (pz <= tracks.cos_max * p) & (p > 0.0)
    return 1.0 if inside else 0.0


@inlined
def smeared_track(
    px: float, py: float, pz: float, key: np.uint64, draw: np.uint64, tracks: Tracks
) -> tuple[float, float, float]:
    """Measured momentum of a charged track; uses four draws from `draw` on.

    Transverse momentum, polar angle and azimuth are measured independently. Angles move by arctan of the Gaussian
    number: for the few milliradians of a detector that differs from the number itself by less than 1e-4 of it.
    """
    n1, n2 = normal_pair(uniform(key, draw), uniform(key, draw + ONE))
    n3, _ = normal_pair(uniform(key, draw + TWO), uniform(key, draw + THREE))
    square = px * px + py * py
    across = np.sqrt(square) + _TINY
    factor = 1.0 + n1 * np.sqrt(tracks.slope * tracks.slope * square + tracks.floor * tracks.floor)
    polar = tracks.angle * n2
    azimuth = tracks.angle * n3
    # cot(theta') = (pz - a pt) / (pt + a pz); the bound only acts along the beam, far outside any acceptance.
    level = across + polar * pz
    level = level if level > 0.5 * across else 0.5 * across
    turned = factor / np.sqrt(1.0 + azimuth * azimuth)
    return turned * (px - azimuth * py), turned * (py + azimuth * px), factor * across * (pz - polar * across) / level


@inlined
def smeared_photon(
    px: float, py: float, pz: float, e: float, key: np.uint64, draw: np.uint64, photons: Photons
) -> tuple[float, float, float]:
    """Measured momentum of a photon, or of a neutral pion taken as one object; four draws from `draw` on.

    The relative resolution of the energy serves for the momentum of a pion, too (its mass is known).
    """
    n1, n2 = normal_pair(uniform(key, draw), uniform(key, draw + ONE))
    n3, _ = normal_pair(uniform(key, draw + TWO), uniform(key, draw + THREE))
    factor = 1.0 + n1 * np.sqrt(photons.stochastic * photons.stochastic / (e + _TINY) + photons.floor * photons.floor)
    factor = factor if factor > _LEAST_ENERGY_FACTOR else _LEAST_ENERGY_FACTOR
    polar = photons.angle * n2
    azimuth = photons.angle * n3
    across = np.sqrt(px * px + py * py) + _TINY
    factor = factor / np.sqrt(1.0 + polar * polar)
    turned = factor * (1.0 + polar * pz / across) / np.sqrt(1.0 + azimuth * azimuth)
    return turned * (px - azimuth * py), turned * (py + azimuth * px), factor * (pz - polar * across)
