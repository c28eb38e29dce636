"""Photons that a lepton radiated, in the detector: added to an electron nearby, left in the calorimeter, or lost."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.streams import uniform

from .. import block as row
from ..block import LANES, MOST_PHOTONS
from . import draw_numbers as draws
from .collider import to_laboratory
from .detector import Detector
from .efficiency import evaluate
from .tracks import in_photon_acceptance, smeared_photon

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]

_ENERGY = row.SCRATCH_0
_CHANCE = row.SCRATCH_1


@kernel
def keep_photons(x: Floats, lanes: Keys, first: int, count: int, y: Floats, filled: int) -> None:
    """Copy PHOTONS and the photons' rows of some lanes, as `compaction.move` does with rows that all channels have."""
    start, place, n = np.uint64(first), np.uint64(filled), np.uint64(count)
    for number in range(1 + 4 * MOST_PHOTONS):
        offset = np.uint64(row.PHOTONS + number * LANES)
        for k in range(n):
            y[offset + place + k] = x[offset + lanes[start + k]]


@kernel
def measure_photons(y: Floats, keys: Keys, detector: Detector) -> None:
    """Recovered photons into MEASURED_LEPTON and LEPTON_MASS2, energy of the others into LEFT_OVER.

    The PHOTON rows end in the laboratory.
    """
    most = 0
    for i in range(LANES):
        most = max(most, int(y[row.PHOTONS + i]))
    for j in range(most):
        first = row.PHOTON_PX + 4 * LANES * j
        to_laboratory(y, first, first, detector.beams)
        energy, chance = y[_ENERGY : _ENERGY + LANES], y[_CHANCE : _CHANCE + LANES]
        for i in range(LANES):
            energy[i] = y[first + 3 * LANES + i]
        evaluate(detector.soft.photon, energy, chance)
        draw = draws.RADIATED_FIRST + np.uint64(8 * j)
        for i in range(LANES):
            if y[row.PHOTONS + i] > j:
                px, py, pz = y[first + i], y[first + LANES + i], y[first + 2 * LANES + i]
                lx, ly, lz = y[row.LAB_LEPTON_PX + i], y[row.LAB_LEPTON_PY + i], y[row.LAB_LEPTON_PZ + i]
                inside = in_photon_acceptance(px, py, pz, detector.photons)
                size = np.sqrt((px * px + py * py + pz * pz) * (lx * lx + ly * ly + lz * lz))
                # 1 - cos of a small angle, without a difference of numbers near 1
                cx, cy, cz = py * lz - pz * ly, pz * lx - px * lz, px * ly - py * lx
                ahead = px * lx + py * ly + pz * lz
                sine = np.sqrt(cx * cx + cy * cy + cz * cz)
                near = (ahead > 0.0) & (sine < detector.recovery_sine * size)
                found = inside == 1.0 and uniform(keys[i], draw) < chance[i]
                if near and found and y[row.FLAVOUR + i] == 0.0:
                    qx, qy, qz = smeared_photon(px, py, pz, energy[i], keys[i], draw + draws.TWO, detector.photons)
                    lx, ly, lz = (
                        y[row.MEASURED_LEPTON_PX + i],
                        y[row.MEASURED_LEPTON_PY + i],
                        y[row.MEASURED_LEPTON_PZ + i],
                    )
                    together = np.sqrt(lx * lx + ly * ly + lz * lz + y[row.LEPTON_MASS2 + i])
                    together += np.sqrt(qx * qx + qy * qy + qz * qz)
                    lx, ly, lz = lx + qx, ly + qy, lz + qz
                    y[row.MEASURED_LEPTON_PX + i], y[row.MEASURED_LEPTON_PY + i] = lx, ly
                    y[row.MEASURED_LEPTON_PZ + i] = lz
                    y[row.LEPTON_MASS2 + i] = max(together * together - lx * lx - ly * ly - lz * lz, 0.0)
                elif uniform(keys[i], draw + draws.ONE) < detector.residual.lost_neutral:
                    y[row.LEFT_OVER + i] += inside * energy[i]
