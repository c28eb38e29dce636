"""Radiated photons through detector and reconstruction, event by event against the truth of a faultless detector."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from pydantic import ValidationError
from semitau.gen import block as row
from semitau.gen.block import LANES, MOST_PHOTONS, new_block
from semitau.gen.response.setup import kernel_chain
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.radiation import radiate

from .blocks import channel
from .marlow_study import PERFECT, study
from .test_reconstruction import STREAM, bench, recorded, vectors

N = 6000
QUIET = {"noise_mean": 0.1, "clean_fraction": 1.0, "wrong_tag_mean": 0.1, "lost_neutral_probability": 1.0}
SOURCES = [
    channel("B+", "D", "e"),
    channel("B+", "D", "mu"),
    channel("B0", "D*", "tau", tau_to="e", soft="charged_pion"),
]


def radiating(angle: float = 0.0, **changes: Any) -> dict[str, Any]:
    photons = {"photons": True, "minimum_energy": 0.001, "recovery_angle": angle}
    return PERFECT | {"radiation": photons, "detector__residual_energy": QUIET} | changes


def photon_energy(chain: Any) -> tuple[np.ndarray, np.ndarray]:
    """(n,) total photon energy of each decay in the B frame, and the lepton's energy: from the truth kernels alone."""
    table, radiation = channel_table(chain), kernel_chain(chain, 0.001).radiation
    energies, leptons = [], []
    for first in range(0, N, LANES):
        x = new_block()
        draw_decays(x, table, STREAM, np.uint64(first))
        radiate(x, radiation, STREAM, np.uint64(first))
        count = x[row.PHOTONS : row.PHOTONS + LANES]
        each = [x[row.PHOTON_PX + (4 * j + 3) * LANES :][:LANES] * (count > j) for j in range(MOST_PHOTONS)]
        energies.append(np.sum(each, axis=0))
        leptons.append(x[row.LEPTON_E : row.LEPTON_E + LANES].copy())
    return np.concatenate(energies)[:N], np.concatenate(leptons)[:N]


@pytest.mark.parametrize("chain", SOURCES, ids=[chain.name for chain in SOURCES])
def test_lost_photons(chain: Any) -> None:
    """None recovered: the track is what radiation left, all photon energy is in the calorimeter."""
    truth, seen = recorded(chain, bench(**radiating()), N)
    energy, lepton = photon_energy(chain)
    assert len(seen["el"]) == N
    np.testing.assert_allclose(seen["el"], lepton, atol=1e-8)
    np.testing.assert_allclose(vectors(truth, "lepton").E, lepton, atol=1e-12)
    assert 0.02 < np.mean(energy > 0.0) < 0.5
    np.testing.assert_array_equal(seen["e_res"] > 0.0, energy > 0.0)
    # a boost along the beam changes energies by at most its own factor and the motion of the B
    radiated = energy > 0.0
    ratio = seen["e_res"][radiated] / energy[radiated]
    assert 0.6 < ratio.min() < ratio.max() < 1.7
    if chain.lepton != "tau":
        assert np.all(seen["mm2"][~radiated] < 1e-8)
        assert seen["mm2"][radiated].mean() > 1e-3


def test_recovered_photons() -> None:
    """Within 1 rad nearly every photon is added to its electron: the energy is back; a muon gets nothing."""
    seen = recorded(SOURCES[0], bench(**radiating(1.0)), N)[1]
    lost = recorded(SOURCES[0], bench(**radiating(0.0)), N)[1]
    energy, lepton = photon_energy(SOURCES[0])
    back = (energy > 0.0) & (seen["e_res"] == 0.0)
    assert back.sum() > 0.7 * np.sum(energy > 0.0)
    np.testing.assert_allclose(seen["el"][back], (lepton + energy)[back], rtol=1e-7)
    np.testing.assert_allclose(seen["mm2"][back], 0.0, atol=1e-6)  # one neutrino is missing again
    assert np.mean(np.abs(seen["mm2"])) < 0.3 * np.mean(np.abs(lost["mm2"]))
    with_cone, without = (recorded(SOURCES[1], bench(**radiating(angle)), N)[1] for angle in (1.0, 0.0))
    np.testing.assert_array_equal(with_cone["el"], without["el"])


def test_efficiency_and_acceptance() -> None:
    """Photons that are never found are never added; outside of the acceptance they leave nothing."""
    photons = PERFECT["detector__photons"]
    unseen = radiating(1.0, detector__photons=photons | {"efficiency": 0.0})
    _, seen = recorded(SOURCES[0], bench(**unseen), N)
    _, lost = recorded(SOURCES[0], bench(**radiating(0.0)), N)
    for name in ("el", "e_res"):
        np.testing.assert_array_equal(seen[name], lost[name])
    blind = radiating(1.0, detector__photons=photons | {"polar_acceptance": [0.0, 1e-6]})
    _, seen = recorded(SOURCES[0], bench(**blind), N)
    np.testing.assert_array_equal(seen["el"], lost["el"])
    assert np.all(seen["e_res"] == 0.0)


def test_events_that_do_not_radiate_stay_the_same() -> None:
    plain = recorded(SOURCES[0], bench(**PERFECT, detector__residual_energy=QUIET), N)[1]
    seen = recorded(SOURCES[0], bench(**radiating()), N)[1]
    silent = photon_energy(SOURCES[0])[0] == 0.0
    for name, values in plain.items():
        np.testing.assert_array_equal(seen[name][silent], values[silent])
        if name in ("q2", "p_charm", "category", "delta_m"):
            np.testing.assert_array_equal(seen[name], values)


def test_off_by_default_and_mistakes() -> None:
    assert study().radiation.least is None
    assert study(radiation={"photons": True}).radiation.least == 0.001
    for wrong, message in (
        ({"recovery_angle": 0.1}, "recovers photons that are not made"),
        ({"photons": True, "minimum_energy": 3.0}, "is out of range"),
        ({"photons": True, "recovery_angle": 2.0}, "is out of range"),
    ):
        with pytest.raises(ValidationError, match=message):
            study(radiation=wrong)
