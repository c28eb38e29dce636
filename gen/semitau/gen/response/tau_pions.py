"""Pions of a tau in the detector: taken for the lepton they replace, for themselves, or three of them together.

One charged pion makes a candidate like a lepton does, under whatever name it gets. Three make one together if all are
seen and called pions. Of three, one of the tau's charge that is alone in being seen counts as a single one; with two
seen the charges do not add up or a track is left over, and there is no candidate. Neutral pions leave their energy in
the calorimeter with the chance of any lost neutral particle.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.constants import mass
from semitau.core.streams import uniform

from .. import block as row
from ..block import LANES
from . import draw_numbers as draws
from .charm_decay import PION
from .collider import to_laboratory
from .detector import NO_PARTNER, ONE_NEUTRAL, TWO_CHARGED, Detector, Leptons, Photons, Residual, Tracks
from .efficiency import evaluate
from .neutral_pions import energy_left
from .tracks import in_track_acceptance, smeared_track

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]

ELECTRON_MASS = mass("e")
MUON_MASS = mass("mu")
THREE_PIONS = 3.0
"""Value of FLAVOUR."""

_ALL = row.SCRATCH_10
_MOMENTA = (row.SCRATCH_11, row.SCRATCH_12, row.SCRATCH_13)
_SEEN = (row.SCRATCH_14, row.SCRATCH_15, row.SCRATCH_16)
_CHANCES = (row.SCRATCH_17, row.SCRATCH_18, row.SCRATCH_19)
_FIRST = (row.LAB_LEPTON_PX, row.LAB_PARTNER1_PX, row.LAB_PARTNER2_PX)
_DRAWS = (draws.LEPTON_SEEN, draws.PARTNER1_SEEN, draws.PARTNER2_SEEN)


@kernel
def see_pions(
    x: Floats, keys: Keys, partners: int, detector: Detector, charm_seen: int, seen: int, momentum: int
) -> None:
    """Fill LAB_PARTNER*, and from charm and tracks the rows `seen` and `momentum` (of the first one).

    charm_seen, seen, momentum : rows. LAB_LEPTON becomes the pion that is alone in being seen.
    """
    if partners != NO_PARTNER:
        to_laboratory(x, row.PARTNER1_PX, row.LAB_PARTNER1_PX, detector.beams)
        if partners != ONE_NEUTRAL:
            to_laboratory(x, row.PARTNER2_PX, row.LAB_PARTNER2_PX, detector.beams)
    for k in range(3):
        if k == 0 or partners == TWO_CHARGED:
            _see_track(x, keys, _FIRST[k], _MOMENTA[k], _SEEN[k], _CHANCES[k], _DRAWS[k], detector.tracks)
    if partners != TWO_CHARGED:
        for i in range(LANES):
            x[_ALL + i] = 0.0
            x[seen + i] = x[charm_seen + i] * x[_SEEN[0] + i]
            x[momentum + i] = x[_MOMENTA[0] + i]
        return
    for i in range(LANES):
        one, other, odd = x[_SEEN[0] + i], x[_SEEN[1] + i], x[_SEEN[2] + i]
        x[_ALL + i] = one * other * odd
        swap = other * (1.0 - one) * (1.0 - odd) == 1.0
        x[seen + i] = x[charm_seen + i] * (
            one * other * odd + (1.0 - odd) * (one * (1.0 - other) + other * (1.0 - one))
        )
        x[momentum + i] = x[_MOMENTA[1] + i] if swap else x[_MOMENTA[0] + i]
        x[row.LAB_LEPTON_PX + i] = x[row.LAB_PARTNER1_PX + i] if swap else x[row.LAB_LEPTON_PX + i]
        x[row.LAB_LEPTON_PY + i] = x[row.LAB_PARTNER1_PY + i] if swap else x[row.LAB_LEPTON_PY + i]
        x[row.LAB_LEPTON_PZ + i] = x[row.LAB_PARTNER1_PZ + i] if swap else x[row.LAB_LEPTON_PZ + i]
        x[row.LAB_LEPTON_E + i] = x[row.LAB_PARTNER1_E + i] if swap else x[row.LAB_LEPTON_E + i]


@kernel
def _see_track(
    x: Floats, keys: Keys, first: int, momentum: int, seen: int, chance: int, draw: np.uint64, tracks: Tracks
) -> None:
    for i in range(LANES):
        px, py, pz = x[first + i], x[first + LANES + i], x[first + 2 * LANES + i]
        x[seen + i] = in_track_acceptance(px, py, pz, tracks)
        x[momentum + i] = np.sqrt(px * px + py * py + pz * pz)
    evaluate(tracks.efficiency, x[momentum : momentum + LANES], x[chance : chance + LANES])
    for i in range(LANES):
        x[seen + i] *= 1.0 if uniform(keys[i], draw) < x[chance + i] else 0.0


@kernel
def identify_pions(x: Floats, keys: Keys, leptons: Leptons, seen: int, momentum: int, identified: int) -> None:
    """Row `identified` and FLAVOUR: one draw decides if a pion is called an electron, a muon, a pion, or nothing."""
    electron, muon, pion = _CHANCES
    p = x[momentum : momentum + LANES]
    evaluate(leptons.pion_as_electron, p, x[electron : electron + LANES])
    evaluate(leptons.pion_as_muon, p, x[muon : muon + LANES])
    evaluate(leptons.pion, p, x[pion : pion + LANES])
    second, third = x[_SEEN[1] : _SEEN[1] + LANES], x[_SEEN[2] : _SEEN[2] + LANES]  # read already
    evaluate(leptons.pion, x[_MOMENTA[1] : _MOMENTA[1] + LANES], second)
    evaluate(leptons.pion, x[_MOMENTA[2] : _MOMENTA[2] + LANES], third)
    hadrons = 1.0 if leptons.hadrons == 1 else 0.0
    for i in range(LANES):
        u = uniform(keys[i], draws.LEPTON_IDENTIFIED)
        together = x[_ALL + i] == 1.0
        as_electron, as_muon = x[electron + i], x[muon + i]
        alone = as_electron + as_muon + hadrons * x[pion + i]
        chance = hadrons * x[pion + i] * x[_SEEN[1] + i] * x[_SEEN[2] + i] if together else alone
        name = 0.0 if u < as_electron else (1.0 if u < as_electron + as_muon else 2.0)
        x[identified + i] = x[seen + i] if u < chance else 0.0
        x[row.FLAVOUR + i] = THREE_PIONS if together else name


@kernel
def keep_partners(x: Floats, lanes: Keys, first: int, count: int, y: Floats, filled: int) -> None:
    """Copy the LAB_PARTNER rows of some lanes, as `compaction.move` does with the rows that all channels have."""
    start, place, n = np.uint64(first), np.uint64(filled), np.uint64(count)
    for number in range(8):
        offset = np.uint64(row.LAB_PARTNER1_PX + number * LANES)
        for k in range(n):
            y[offset + place + k] = x[offset + lanes[start + k]]


@kernel
def measure_pions(y: Floats, keys: Keys, partners: int, detector: Detector) -> None:
    """MEASURED_LEPTON and LEPTON_MASS2 of three pions together; energy of neutral ones in LEFT_OVER."""
    if partners == NO_PARTNER:
        return
    if partners == TWO_CHARGED:
        _add_tracks(y, keys, detector.tracks)
        return
    _leave_energy(y, keys, row.LAB_PARTNER1_PX, draws.PARTNER1_PHOTONS, detector.photons, detector.residual)
    if partners != ONE_NEUTRAL:
        _leave_energy(y, keys, row.LAB_PARTNER2_PX, draws.PARTNER2_PHOTONS, detector.photons, detector.residual)


@kernel
def _add_tracks(y: Floats, keys: Keys, tracks: Tracks) -> None:
    for i in range(LANES):
        ax, ay, az = y[row.MEASURED_LEPTON_PX + i], y[row.MEASURED_LEPTON_PY + i], y[row.MEASURED_LEPTON_PZ + i]
        bx, by, bz = smeared_track(
            y[row.LAB_PARTNER1_PX + i], y[row.LAB_PARTNER1_PY + i], y[row.LAB_PARTNER1_PZ + i], keys[i],
            draws.PARTNER1_SMEAR, tracks,
        )  # fmt: skip
        cx, cy, cz = smeared_track(
            y[row.LAB_PARTNER2_PX + i], y[row.LAB_PARTNER2_PY + i], y[row.LAB_PARTNER2_PZ + i], keys[i],
            draws.PARTNER2_SMEAR, tracks,
        )  # fmt: skip
        energy = (
            np.sqrt(ax * ax + ay * ay + az * az + PION * PION)
            + np.sqrt(bx * bx + by * by + bz * bz + PION * PION)
            + np.sqrt(cx * cx + cy * cy + cz * cz + PION * PION)
        )
        bx, by, bz = ax + bx + cx, ay + by + cy, az + bz + cz
        together = y[row.FLAVOUR + i] == THREE_PIONS
        y[row.MEASURED_LEPTON_PX + i] = bx if together else ax
        y[row.MEASURED_LEPTON_PY + i] = by if together else ay
        y[row.MEASURED_LEPTON_PZ + i] = bz if together else az
        mass2 = energy * energy - bx * bx - by * by - bz * bz
        y[row.LEPTON_MASS2 + i] = mass2 if together else y[row.LEPTON_MASS2 + i]


@kernel
def _leave_energy(y: Floats, keys: Keys, first: int, draw: np.uint64, photons: Photons, residual: Residual) -> None:
    for i in range(LANES):
        px, py, pz, e = y[first + i], y[first + LANES + i], y[first + 2 * LANES + i], y[first + 3 * LANES + i]
        y[row.LEFT_OVER + i] += energy_left(px, py, pz, e, keys[i], draw, photons, residual)


@kernel
def known_masses(y: Floats) -> None:
    """LEPTON_MASS2 by the name of what was found."""
    for i in range(LANES):
        flavour = y[row.FLAVOUR + i]
        known = MUON_MASS if flavour == 1.0 else ELECTRON_MASS
        known = PION if flavour >= 2.0 else known
        y[row.LEPTON_MASS2 + i] = known * known
