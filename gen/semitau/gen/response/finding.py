"""Which events are found: all tracks of the D and the lepton (or pions of a tau) seen, and what these are taken for.

Only true momenta are needed here, so this comes before any smearing, and only the events that pass are smeared.
"""

from __future__ import annotations

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import kernel
from semitau.core.streams import uniform

from .. import block as row
from ..block import LANES
from .charm_decay import LAB_D, decay_to_three, decay_to_two
from .collider import draw_pair, to_laboratory
from .detector import Chain, Detector, Leptons, Tracks
from .draw_numbers import LEPTON_IDENTIFIED, LEPTON_SEEN, TRACK1_SEEN, TRACK2_SEEN, TRACK3_SEEN
from .efficiency import evaluate
from .others import has_others, see_others
from .tau_pions import identify_pions, see_pions
from .tracks import in_track_acceptance

Floats = npt.NDArray[np.float64]
Keys = npt.NDArray[np.uint64]
Counts = npt.NDArray[np.int64]

CHARM_SEEN = row.SCRATCH_5
LEPTON_SEEN_TOO = row.SCRATCH_6
IDENTIFIED = row.SCRATCH_7
"""Rows of 1.0 and 0.0 after `find`; each includes the ones before it."""

_MOMENTUM = row.SCRATCH_4
_CHANCE = row.SCRATCH_8
_OTHER_CHANCE = row.SCRATCH_9
_PION_CHANCE = row.SCRATCH_10


@kernel
def find(x: Floats, keys: Keys, chain: Chain, detector: Detector, quantiles: Floats) -> None:
    """From the truth rows to the laboratory: fill BOOST_*, TRACK*, LAB_LEPTON_*, FLAVOUR, and the rows named above.

    quantiles : of the pair mass in D+ -> K pi pi; unused for a D0.
    """
    draw_pair(x, keys, detector.beams, chain.parent_mass)
    to_laboratory(x, row.D_PX, LAB_D, detector.beams)
    if chain.charged_d == 1:
        decay_to_three(x, keys, chain.d_mass, quantiles)
    else:
        decay_to_two(x, keys, chain.d_mass)
    see_charm(x, keys, chain.charged_d, detector.tracks)
    to_laboratory(x, row.LEPTON_PX, row.LAB_LEPTON_PX, detector.beams)
    if chain.tau_pion == 1:
        see_pions(x, keys, chain.partners, detector, CHARM_SEEN, LEPTON_SEEN_TOO, _MOMENTUM)
        identify_pions(x, keys, detector.leptons, LEPTON_SEEN_TOO, _MOMENTUM, IDENTIFIED)
    else:
        see_lepton(x, keys, detector.tracks)
        identify_lepton(x, keys, chain.muon, detector.leptons)
        if detector.leptons.hadrons == 1:
            take_for_pion(x, keys, chain.muon, detector.leptons)
    if has_others(chain):
        see_others(x, keys, IDENTIFIED, chain, detector)


@kernel
def see_charm(x: Floats, keys: Keys, charged_d: int, tracks: Tracks) -> None:
    """CHARM_SEEN: all charged daughters of the D within acceptance and seen by the tracking."""
    momentum = x[_MOMENTUM : _MOMENTUM + LANES]
    chance = x[_CHANCE : _CHANCE + LANES]
    for i in range(LANES):
        px, py, pz = x[row.TRACK1_PX + i], x[row.TRACK1_PY + i], x[row.TRACK1_PZ + i]
        x[CHARM_SEEN + i] = in_track_acceptance(px, py, pz, tracks)
        x[_MOMENTUM + i] = np.sqrt(px * px + py * py + pz * pz)
    evaluate(tracks.efficiency, momentum, chance)
    for i in range(LANES):
        x[CHARM_SEEN + i] *= 1.0 if uniform(keys[i], TRACK1_SEEN) < x[_CHANCE + i] else 0.0
        px, py, pz = x[row.TRACK2_PX + i], x[row.TRACK2_PY + i], x[row.TRACK2_PZ + i]
        x[CHARM_SEEN + i] *= in_track_acceptance(px, py, pz, tracks)
        x[_MOMENTUM + i] = np.sqrt(px * px + py * py + pz * pz)
    evaluate(tracks.efficiency, momentum, chance)
    for i in range(LANES):
        x[CHARM_SEEN + i] *= 1.0 if uniform(keys[i], TRACK2_SEEN) < x[_CHANCE + i] else 0.0
    if charged_d == 1:
        for i in range(LANES):
            px, py, pz = x[row.TRACK3_PX + i], x[row.TRACK3_PY + i], x[row.TRACK3_PZ + i]
            x[CHARM_SEEN + i] *= in_track_acceptance(px, py, pz, tracks)
            x[_MOMENTUM + i] = np.sqrt(px * px + py * py + pz * pz)
        evaluate(tracks.efficiency, momentum, chance)
        for i in range(LANES):
            x[CHARM_SEEN + i] *= 1.0 if uniform(keys[i], TRACK3_SEEN) < x[_CHANCE + i] else 0.0


@kernel
def see_lepton(x: Floats, keys: Keys, tracks: Tracks) -> None:
    """LEPTON_SEEN_TOO: the charm was seen and the lepton made a track. Leaves its momentum for `identify_lepton`."""
    for i in range(LANES):
        px, py, pz = x[row.LAB_LEPTON_PX + i], x[row.LAB_LEPTON_PY + i], x[row.LAB_LEPTON_PZ + i]
        x[LEPTON_SEEN_TOO + i] = x[CHARM_SEEN + i] * in_track_acceptance(px, py, pz, tracks)
        x[_MOMENTUM + i] = np.sqrt(px * px + py * py + pz * pz)
    evaluate(tracks.efficiency, x[_MOMENTUM : _MOMENTUM + LANES], x[_CHANCE : _CHANCE + LANES])
    for i in range(LANES):
        x[LEPTON_SEEN_TOO + i] *= 1.0 if uniform(keys[i], LEPTON_SEEN) < x[_CHANCE + i] else 0.0


@kernel
def identify_lepton(x: Floats, keys: Keys, muon: int, leptons: Leptons) -> None:
    """IDENTIFIED and FLAVOUR: one draw decides between the right name, the wrong one, and none."""
    momentum = x[_MOMENTUM : _MOMENTUM + LANES]
    right, wrong = x[_CHANCE : _CHANCE + LANES], x[_OTHER_CHANCE : _OTHER_CHANCE + LANES]
    if muon == 1:
        evaluate(leptons.muon, momentum, right)
        evaluate(leptons.muon_as_electron, momentum, wrong)
    else:
        evaluate(leptons.electron, momentum, right)
        evaluate(leptons.electron_as_muon, momentum, wrong)
    true, other = float(muon), 1.0 - float(muon)
    for i in range(LANES):
        u = uniform(keys[i], LEPTON_IDENTIFIED)
        named = u < x[_CHANCE + i] + x[_OTHER_CHANCE + i]
        x[IDENTIFIED + i] = x[LEPTON_SEEN_TOO + i] if named else 0.0
        x[row.FLAVOUR + i] = true if u < x[_CHANCE + i] else other


@kernel
def take_for_pion(x: Floats, keys: Keys, muon: int, leptons: Leptons) -> None:
    """A third name for a lepton, right after `identify_lepton` and with its draw."""
    chance = x[_PION_CHANCE : _PION_CHANCE + LANES]
    if muon == 1:
        evaluate(leptons.muon_as_pion, x[_MOMENTUM : _MOMENTUM + LANES], chance)
    else:
        evaluate(leptons.electron_as_pion, x[_MOMENTUM : _MOMENTUM + LANES], chance)
    for i in range(LANES):
        u = uniform(keys[i], LEPTON_IDENTIFIED)
        named = x[_CHANCE + i] + x[_OTHER_CHANCE + i]
        pion = (u >= named) & (u < named + x[_PION_CHANCE + i])
        x[IDENTIFIED + i] = x[LEPTON_SEEN_TOO + i] if pion else x[IDENTIFIED + i]
        x[row.FLAVOUR + i] = 2.0 if pion else x[row.FLAVOUR + i]


@kernel
def list_found(x: Floats, events: int, counts: Counts, lanes: Keys) -> int:
    """List the lanes (below `events`) that were found in `lanes` (256,), and count the steps on the way.

    counts (3,) grows by the events with the charm seen, the lepton seen too, and the lepton identified. Returns how
    many lanes were found.
    """
    charm, lepton = 0.0, 0.0
    for i in range(events):
        charm += x[CHARM_SEEN + i]
        lepton += x[LEPTON_SEEN_TOO + i]
    found = np.uint64(0)
    for i in range(np.uint64(events)):
        lanes[found] = i
        found += np.uint64(x[IDENTIFIED + i])
    counts[0] += np.int64(charm)
    counts[1] += np.int64(lepton)
    counts[2] += np.int64(found)
    return int(found)
