"""Measure the events that were found: smeared momenta, soft particles found or lost, the tag, the energy left over.

Everything here is common to all scenarios; `candidates.py` turns it into observables for one of them.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.constants import mass
from semitau.core.elementary import log, normal_pair, sincos_turns
from semitau.core.streams import uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draws
from .charm_decay import PION
from .collider import to_laboratory
from .detector import (
    CHARGED_PION,
    ETA,
    NEUTRAL_PION,
    NO_PARTICLE,
    PHOTON,
    Chain,
    Detector,
    Residual,
    SoftParticles,
    Tag,
    Tracks,
)
from .efficiency import evaluate
from .light_decays import species
from .neutral_pions import energy_left
from .others import add_others, follow_one, has_others
from .photons import measure_photons
from .tau_pions import known_masses, measure_pions
from .tracks import (
    in_photon_acceptance,
    in_track_acceptance,
    polar_cosine_inside,
    smeared_photon,
    smeared_track,
)

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]

_MOMENTUM = row.SCRATCH_0
_CHANCE = row.SCRATCH_1
_INSIDE = row.SCRATCH_2
NEUTRAL_PION_MASS = mass("pi0")
ETA_SPECIES = species("eta")


@kernel
def measure(y: Floats, keys: Keys, chain: Chain, detector: Detector) -> None:
    """From the rows kept by `find` to the MEASURED_*, TAG_*, SOFT_*, EXTRA, LEFT_OVER and RANDOM_* rows."""
    measure_charm(y, keys, chain.charged_d, detector.tracks)
    measure_lepton(y, keys, detector.tracks)
    known_masses(y)
    measure_tag(y, keys, chain.parent_mass, chain.charged_parent, detector.tag)
    add_noise(y, keys, detector.residual)
    measure_pions(y, keys, chain.partners, detector)
    measure_soft(y, keys, chain, detector)
    measure_pion(y, keys, chain.pion, detector)
    see_light_meson(y, keys, chain.pion2, row.PION2_PX, draws.PION2_SEEN, draws.PION2_PHOTONS, detector)
    if has_others(chain):
        add_others(y)
    if chain.radiation.on == 1:
        measure_photons(y, keys, detector)
    draw_random_soft(y, keys, chain.charged_d, detector.soft)


@kernel
def measure_charm(y: Floats, keys: Keys, charged_d: int, tracks: Tracks) -> None:
    """MEASURED_D: sum of the smeared tracks. Its energy is later set by the known mass of the D."""
    for i in range(LANES):
        px, py, pz = smeared_track(
            y[row.TRACK1_PX + i], y[row.TRACK1_PY + i], y[row.TRACK1_PZ + i], keys[i], draws.TRACK1_SMEAR, tracks
        )
        qx, qy, qz = smeared_track(
            y[row.TRACK2_PX + i], y[row.TRACK2_PY + i], y[row.TRACK2_PZ + i], keys[i], draws.TRACK2_SMEAR, tracks
        )
        y[row.MEASURED_D_PX + i] = px + qx
        y[row.MEASURED_D_PY + i] = py + qy
        y[row.MEASURED_D_PZ + i] = pz + qz
    if charged_d == 1:
        for i in range(LANES):
            px, py, pz = smeared_track(
                y[row.TRACK3_PX + i], y[row.TRACK3_PY + i], y[row.TRACK3_PZ + i], keys[i], draws.TRACK3_SMEAR, tracks
            )
            y[row.MEASURED_D_PX + i] += px
            y[row.MEASURED_D_PY + i] += py
            y[row.MEASURED_D_PZ + i] += pz


@kernel
def measure_lepton(y: Floats, keys: Keys, tracks: Tracks) -> None:
    """MEASURED_LEPTON: the smeared track."""
    for i in range(LANES):
        px, py, pz = smeared_track(
            y[row.LAB_LEPTON_PX + i],
            y[row.LAB_LEPTON_PY + i],
            y[row.LAB_LEPTON_PZ + i],
            keys[i],
            draws.LEPTON_SMEAR,
            tracks,
        )
        y[row.MEASURED_LEPTON_PX + i] = px
        y[row.MEASURED_LEPTON_PY + i] = py
        y[row.MEASURED_LEPTON_PZ + i] = pz


@kernel
def measure_tag(y: Floats, keys: Keys, parent_mass: float, charged_parent: int, tag: Tag) -> None:
    """TAG_*: true momentum of the signal B (the tag flies against it), its shift, and whether the tag is what it seems.

    A wrong tag has the wide resolution, and with `wrong_charge_fraction` the charge of the other B species.
    """
    charge = float(charged_parent)
    for i in range(LANES):
        wrong = 1.0 if uniform(keys[i], draws.WRONG_TAG) < tag.wrong_fraction else 0.0
        swapped = wrong if uniform(keys[i], draws.WRONG_CHARGE) < tag.wrong_charge_fraction else 0.0
        width = tag.wrong_resolution if wrong == 1.0 else tag.resolution
        _, nx = normal_pair(
            uniform(keys[i], draws.ENERGY_AND_TAG_X), uniform(keys[i], draws.ENERGY_AND_TAG_X + draws.ONE)
        )
        ny, nz = normal_pair(uniform(keys[i], draws.TAG_Y_AND_Z), uniform(keys[i], draws.TAG_Y_AND_Z + draws.ONE))
        y[row.TAG_PX + i] = parent_mass * y[row.BOOST_X + i]
        y[row.TAG_PY + i] = parent_mass * y[row.BOOST_Y + i]
        y[row.TAG_PZ + i] = parent_mass * y[row.BOOST_Z + i]
        y[row.TAG_SHIFT_X + i] = width * nx
        y[row.TAG_SHIFT_Y + i] = width * ny
        y[row.TAG_SHIFT_Z + i] = width * nz
        y[row.TAG_WRONG + i] = wrong
        y[row.TAG_CHARGED + i] = charge + swapped * (1.0 - 2.0 * charge)


@kernel
def add_noise(y: Floats, keys: Keys, residual: Residual) -> None:
    """LEFT_OVER: calorimeter noise and what a wrong tag leaves, both exponential."""
    for i in range(LANES):
        noise = -residual.mean * log(1.0 - uniform(keys[i], draws.CLUSTER_ENERGY))
        noise = 0.0 if uniform(keys[i], draws.NO_CLUSTER) < residual.clean_fraction else noise
        wrong = -residual.wrong_tag_mean * log(1.0 - uniform(keys[i], draws.WRONG_TAG_ENERGY))
        y[row.LEFT_OVER + i] = noise + wrong * y[row.TAG_WRONG + i]


@kernel
def measure_soft(y: Floats, keys: Keys, chain: Chain, detector: Detector) -> None:
    """SOFT_EFFICIENCY, SOFT_FOUND, MEASURED_SOFT, and in LEFT_OVER the energy of a neutral one that was lost.

    Photons are looked for beside a D0 only: those of D*+ -> D+ gamma (1.6%) count as lost.
    """
    if chain.soft == NO_PARTICLE:
        for i in range(LANES):
            y[row.SOFT_EFFICIENCY + i] = 0.0
            y[row.SOFT_FOUND + i] = 0.0
            y[row.MEASURED_SOFT_PX + i] = 0.0
            y[row.MEASURED_SOFT_PY + i] = 0.0
            y[row.MEASURED_SOFT_PZ + i] = 0.0
            y[row.LAB_SOFT_E + i] = 0.0
        return
    to_laboratory(y, row.SOFT_PX, row.LAB_SOFT_PX, detector.beams)
    for i in range(LANES):
        px, py, pz = y[row.LAB_SOFT_PX + i], y[row.LAB_SOFT_PY + i], y[row.LAB_SOFT_PZ + i]
        y[_MOMENTUM + i] = np.sqrt(px * px + py * py + pz * pz)
    momentum, chance = y[_MOMENTUM : _MOMENTUM + LANES], y[_CHANCE : _CHANCE + LANES]
    if chain.soft == CHARGED_PION:
        # The efficiency holds the losses at small transverse momentum, too: only the polar limits are applied.
        evaluate(detector.soft.charged, momentum, chance)
        for i in range(LANES):
            px, py, pz = y[row.LAB_SOFT_PX + i], y[row.LAB_SOFT_PY + i], y[row.LAB_SOFT_PZ + i]
            qx, qy, qz = smeared_track(px, py, pz, keys[i], draws.SOFT_SMEAR, detector.tracks)
            y[row.SOFT_EFFICIENCY + i] = y[_CHANCE + i] * polar_cosine_inside(px, py, pz, detector.tracks)
            y[row.MEASURED_SOFT_PX + i] = qx
            y[row.MEASURED_SOFT_PY + i] = qy
            y[row.MEASURED_SOFT_PZ + i] = qz
            y[row.SOFT_FOUND + i] = 1.0 if uniform(keys[i], draws.SOFT_SEEN) < y[row.SOFT_EFFICIENCY + i] else 0.0
        return
    usable = 0.0 if chain.soft == PHOTON and chain.charged_d == 1 else 1.0
    if chain.soft == PHOTON:
        evaluate(detector.soft.photon, momentum, chance)
    else:
        evaluate(detector.soft.neutral, momentum, chance)
    for i in range(LANES):
        px, py, pz, e = y[row.LAB_SOFT_PX + i], y[row.LAB_SOFT_PY + i], y[row.LAB_SOFT_PZ + i], y[row.LAB_SOFT_E + i]
        qx, qy, qz = smeared_photon(px, py, pz, e, keys[i], draws.SOFT_SMEAR, detector.photons)
        inside = in_photon_acceptance(px, py, pz, detector.photons)
        y[row.SOFT_EFFICIENCY + i] = usable * inside * y[_CHANCE + i]
        y[row.MEASURED_SOFT_PX + i] = qx
        y[row.MEASURED_SOFT_PY + i] = qy
        y[row.MEASURED_SOFT_PZ + i] = qz
        found = 1.0 if uniform(keys[i], draws.SOFT_SEEN) < y[row.SOFT_EFFICIENCY + i] else 0.0
        y[row.SOFT_FOUND + i] = found
        alone = inside * e if uniform(keys[i], draws.SOFT_LEFT_OVER) < detector.residual.lost_neutral else 0.0
        both = energy_left(px, py, pz, e, keys[i], draws.SOFT_PHOTONS, detector.photons, detector.residual)
        y[row.LEFT_OVER + i] += (1.0 - found) * (alone if chain.soft == PHOTON else both)


@kernel
def measure_pion(y: Floats, keys: Keys, kind: int, detector: Detector) -> None:
    """The (first) light meson of a D**: EXTRA, and in LEFT_OVER the energy of a neutral one."""
    for i in range(LANES):
        y[row.EXTRA + i] = 0.0
    see_light_meson(y, keys, kind, row.PION_PX, draws.PION_SEEN, draws.PION_PHOTONS, detector)


@kernel
def see_light_meson(
    y: Floats, keys: Keys, kind: int, first: int, seen: np.uint64, photons: np.uint64, detector: Detector
) -> None:
    """EXTRA becomes 1 if it is charged and seen; photons of a neutral one may leave their energy in LEFT_OVER.

    first : of the four rows of its momentum. seen, photons : numbers of its draws. An eta decays as in `others.py`.
    """
    if kind == NO_PARTICLE:
        return
    to_laboratory(y, first, row.LAB_PION_PX, detector.beams)
    if kind == CHARGED_PION:
        for i in range(LANES):
            px, py, pz = y[row.LAB_PION_PX + i], y[row.LAB_PION_PY + i], y[row.LAB_PION_PZ + i]
            y[_MOMENTUM + i] = np.sqrt(px * px + py * py + pz * pz)
            y[_INSIDE + i] = in_track_acceptance(px, py, pz, detector.tracks)
        evaluate(detector.tracks.efficiency, y[_MOMENTUM : _MOMENTUM + LANES], y[_CHANCE : _CHANCE + LANES])
        for i in range(LANES):
            found = y[_INSIDE + i] if uniform(keys[i], seen) < y[_CHANCE + i] else 0.0
            y[row.EXTRA + i] = max(y[row.EXTRA + i], found)
    if kind == NEUTRAL_PION:
        for i in range(LANES):
            px, py, pz, e = (
                y[row.LAB_PION_PX + i],
                y[row.LAB_PION_PY + i],
                y[row.LAB_PION_PZ + i],
                y[row.LAB_PION_E + i],
            )
            y[row.LEFT_OVER + i] += energy_left(px, py, pz, e, keys[i], photons, detector.photons, detector.residual)
    if kind == ETA:
        for i in range(LANES):
            px, py, pz, e = (
                y[row.LAB_PION_PX + i],
                y[row.LAB_PION_PY + i],
                y[row.LAB_PION_PZ + i],
                y[row.LAB_PION_E + i],
            )
            if e > 0.0:
                found, left = follow_one(keys[i], ETA_SPECIES, px, py, pz, e, detector)
                y[row.EXTRA + i] = max(y[row.EXTRA + i], found)
                y[row.LEFT_OVER + i] += left


@kernel
def draw_random_soft(y: Floats, keys: Keys, charged_d: int, soft: SoftParticles) -> None:
    """RANDOM_*: a random soft candidate, by the charge that the tag asks for.

    A D0 beside a neutral tag can only become a D*+ (with a charged pion), beside a charged tag only a D*0 (with a
    neutral pion or a photon); a D+ becomes a D*+ with a neutral pion. Directions are isotropic in the D frame, and
    delta_m is even over the window, from the mass of the soft particle on.
    """
    with_d0 = 1.0 - float(charged_d)
    for i in range(LANES):
        charged = with_d0 * (1.0 - y[row.TAG_CHARGED + i])
        u = uniform(keys[i], draws.RANDOM_KIND)
        first = soft.random_charged if charged == 1.0 else soft.random_neutral
        second = (1.0 - charged) * with_d0 * soft.random_photon
        pion = PION if charged == 1.0 else NEUTRAL_PION_MASS
        soft_mass = pion if u < first else 0.0
        low = soft.window_min if soft.window_min > soft_mass else soft_mass
        width = soft.window_max - low
        delta = low + (width if width > 0.0 else 0.0) * uniform(keys[i], draws.RANDOM_DELTA_M)
        cosine = 2.0 * uniform(keys[i], draws.RANDOM_COS) - 1.0
        s, c = sincos_turns(uniform(keys[i], draws.RANDOM_AZIMUTH))
        across = np.sqrt(1.0 - cosine * cosine)
        y[row.RANDOM_MASS + i] = soft_mass
        y[row.RANDOM_DELTA_M + i] = delta if u < first + second else 0.0
        y[row.RANDOM_X + i] = across * c
        y[row.RANDOM_Y + i] = across * s
        y[row.RANDOM_Z + i] = cosine
