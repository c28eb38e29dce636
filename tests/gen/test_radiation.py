"""Photons of the charged lepton: closed forms, quadrature, four-momentum, what the decay keeps.

Statistical tests ask for p > 1e-5 with a seed that SEMITAU_TEST_SEED replaces: below 3e-4 for the file.
"""

from __future__ import annotations

import os
from functools import cache

import awkward as ak
import numpy as np
import pytest
from particle import Particle
from scipy import constants, integrate, stats
from semitau import gen
from semitau.core.errors import InputError

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5
PARTS = ("px", "py", "pz", "E")
ALPHA = constants.fine_structure
LEAST = 1e-3
MASS = {name: float(Particle.from_name(pdg).mass) / 1000 for name, pdg in (("e", "e-"), ("mu", "mu-"), ("pi", "pi-"))}


@cache
def events(lepton: str, tau_to: str = "mu", photons_above: float | None = LEAST, n: int = 100_000) -> ak.Array:
    decay = gen.Decay("B0", "D-", lepton)
    return gen.simulate(decay, n, SEED, tau_to=tau_to, photons_above=photons_above)


def vectors(sample: ak.Array, *names: str) -> list[np.ndarray]:
    return [np.stack([ak.to_numpy(sample[name][part]) for part in PARTS]) for name in names]


def photon_sum(sample: ak.Array) -> np.ndarray:
    return np.stack([ak.to_numpy(ak.sum(sample.photons[part], axis=1)) for part in PARTS])


def square(momentum: np.ndarray) -> np.ndarray:
    return np.asarray(momentum[3] ** 2 - np.sum(momentum[:3] ** 2, axis=0))


def energy_in(frame: np.ndarray, momentum: np.ndarray) -> np.ndarray:
    return np.asarray((frame[3] * momentum[3] - np.sum(frame[:3] * momentum[:3], axis=0)) / np.sqrt(square(frame)))


def soft_coefficient(energy: np.ndarray, mass: float) -> np.ndarray:
    """beta of dN = beta dw/w: a charge set in motion against a resting one (Jackson, ch. 15: beta decay)."""
    v = np.sqrt((energy - mass) * (energy + mass)) / energy
    return np.asarray(ALPHA / np.pi * (np.log((energy + np.sqrt(energy**2 - mass**2)) ** 2 / mass**2) / v - 2.0))


CASES = [("e", "mu", "e"), ("mu", "mu", "mu"), ("tau", "e", "e"), ("tau", "mu", "mu"), ("tau", "pi", "pi")]


def before(lepton: str, tau_to: str) -> tuple[np.ndarray, np.ndarray]:
    """The system that the lepton comes from, and the lepton without radiation."""
    sample = events(lepton, tau_to, None)
    B, charm, born = vectors(sample, "B", "D", "lepton")
    return (vectors(sample, "tau")[0] if lepton == "tau" else B - charm), born


@pytest.mark.parametrize(("lepton", "tau_to", "kind"), CASES)
def test_conservation_and_mass_shells(lepton: str, tau_to: str, kind: str) -> None:
    sample = events(lepton, tau_to)
    names = ["D", "lepton", "nu"] + [n for n in ("nu_tau", "nu_lepton") if n in sample.fields]
    total = np.sum(vectors(sample, *names), axis=0) + photon_sum(sample)
    np.testing.assert_allclose(total, vectors(sample, "B")[0], atol=1e-9)
    for name in names[1:]:
        (momentum,) = vectors(sample, name)
        known = MASS[kind] ** 2 if name == "lepton" else 0.0
        np.testing.assert_allclose(square(momentum), known, atol=1e-7)
    photons = ak.flatten(sample.photons)
    assert np.abs(square(np.stack([ak.to_numpy(photons[part]) for part in PARTS]))).max() < 1e-9
    assert ak.parameters(sample.photons).get("__record__") or sample.photons.fields == list(PARTS)


@pytest.mark.parametrize(("lepton", "tau_to", "kind"), CASES)
def test_decay_stays_what_it_was(lepton: str, tau_to: str, kind: str) -> None:
    """Charm, tau and direction of lepton with photons in its frame are those of the same event without radiation."""
    plain, sample = events(lepton, tau_to, None), events(lepton, tau_to)
    for name in ("D", "tau") if lepton == "tau" else ("D",):
        np.testing.assert_array_equal(*(vectors(x, name)[0] for x in (plain, sample)))
    silent = ak.to_numpy(ak.num(sample.photons)) == 0
    assert 0.3 < silent.mean() < 1.0
    np.testing.assert_array_equal(vectors(plain, "lepton")[0][:, silent], vectors(sample, "lepton")[0][:, silent])
    decay = gen.Decay("B0", "D-", lepton)
    changed = gen.Decay("B0", "D-", lepton, form_factors="CLN-2012")
    assert abs(gen.weights(sample, decay) - 1.0).max() < 1e-9
    np.testing.assert_allclose(
        gen.weights(sample, changed), gen.weights(plain, changed), rtol=2e-2 if lepton == "tau" else 1e-6
    )


@pytest.mark.parametrize(("lepton", "tau_to", "kind"), CASES)
def test_number_of_photons(lepton: str, tau_to: str, kind: str) -> None:
    """Poisson with the mean beta times the integral of (1 + (1-x)²)/2 dx/x from LEAST / T to 1, in closed form.

    Each event has its own mean; the chance of none is the mean of exp(-mean).
    """
    frame, born = before(lepton, tau_to)
    energy = energy_in(frame, born)
    lowest = LEAST / (energy - MASS[kind])
    integral = np.where(lowest < 1, -np.log(lowest) - (1 - lowest) + (1 - lowest**2) / 4, 0.0)
    mean = soft_coefficient(energy, MASS[kind]) * integral
    number = ak.to_numpy(ak.num(events(lepton, tau_to).photons))
    for found, expected in ((number, mean), (number == 0, np.exp(-mean)), (number == 2, mean**2 / 2 * np.exp(-mean))):
        pull = (found.mean() - expected.mean()) / (np.std(found) / np.sqrt(number.size))
        assert 2 * stats.norm.sf(abs(pull)) > UNLIKELY


def test_radiated_share_in_the_leading_logarithm() -> None:
    """Electrons keep exp(-beta ∫ (1 + (1-x)²)/2 dx) = exp(-2 beta / 3) of their energy: the second moment of the
    evolution equation in closed form. Photons below LEAST and the recoil change it by less than 2%."""
    frame, born = before("e", "mu")
    energy = energy_in(frame, born)
    radiated = energy_in(frame, photon_sum(events("e"))) / energy
    expected = 1.0 - np.exp(-2.0 * soft_coefficient(energy, MASS["e"]) / 3.0)
    error = np.std(radiated) / np.sqrt(radiated.size)
    assert error < 0.02 * expected.mean()
    assert abs(radiated.mean() - expected.mean()) < 0.02 * expected.mean() + 4.5 * error


@pytest.mark.parametrize(("lepton", "kind"), [("e", "e"), ("mu", "mu")])
def test_energy_spectrum_of_single_photons(lepton: str, kind: str) -> None:
    """(1 + (1-x)²)/x for the share of the kinetic energy, to which the recoil adds at most a few per mille where the
    photon is soft: x up to 0.1, against the integral in closed form."""
    frame, born = before(lepton, "mu")
    sample = events(lepton)
    one = ak.to_numpy(ak.num(sample.photons)) == 1
    kinetic = energy_in(frame, born)[one] - MASS[kind]
    share = energy_in(frame, photon_sum(sample))[one] / kinetic
    low = LEAST / kinetic

    def integral(x: np.ndarray) -> np.ndarray:
        return np.asarray(2 * np.log(x) - 2 * x + x**2 / 2)

    # a little above LEAST: the recoil moves the edge
    chosen = (share > 2 * low) & (share < 0.1)
    at = (integral(share) - integral(2 * low)) / (integral(np.full(share.size, 0.1)) - integral(2 * low))
    assert stats.kstest(at[chosen], "uniform").pvalue > UNLIKELY


@pytest.mark.parametrize(("lepton", "kind"), [("mu", "mu"), ("e", "e")])
def test_angles_of_soft_photons(lepton: str, kind: str) -> None:
    """v² sin² / (1 - v cos)² to the lepton, in the W* frame; soft photons (below 5 MeV), whose recoil is small."""
    frame, born = before(lepton, "mu")
    sample = events(lepton)
    total = photon_sum(sample)
    soft = (ak.to_numpy(ak.num(sample.photons)) == 1) & (energy_in(frame, total) < 0.005)
    energy = energy_in(frame, born)[soft]
    momentum = np.sqrt(energy**2 - MASS[kind] ** 2)
    v = momentum / energy
    # k.l = w E (1 - v c), without a difference of large numbers for electrons only to 1e-3 of the mean
    (after,) = vectors(sample, "lepton")
    product = (after[3] * total[3] - np.sum(after[:3] * total[:3], axis=0))[soft]
    q = product / (energy_in(frame, total)[soft] * energy_in(frame, after)[soft])
    low, high = MASS[kind] ** 2 / (energy * (energy + momentum)), 1 + v

    def below(q: np.ndarray) -> np.ndarray:
        """Integral of (1 - c²) / q² dq with c = (1 - q) / v: of (-(1 - v²)/q² + 2/q - 1) / v²."""
        return np.asarray(((1 - v**2) / q + 2 * np.log(q) - q) / v**2)

    at = (below(np.clip(q, low, high)) - below(low)) / (below(high) - below(low))
    assert stats.kstest(at, "uniform").pvalue > UNLIKELY
    # and the closed form against quadrature, at one velocity
    x = float(v[0])
    area = integrate.quad(
        lambda c: x * x * (1 - c * c) / (1 - x * c) ** 2, -1, 1, points=[1 - 1e-6, 1 - 1e-4], limit=500
    )[0]
    expected = float(soft_coefficient(energy[:1], MASS[kind])[0]) * 2 * np.pi / ALPHA
    assert area == pytest.approx(expected, rel=1e-4)


def test_same_events_and_bad_input() -> None:
    longer, shorter = events("e"), gen.simulate(gen.Decay("B0", "D-", "e"), 500, SEED, photons_above=LEAST)
    assert ak.array_equal(longer[:500], shorter)
    for wrong in (0.0, 2.0, "low"):
        with pytest.raises(InputError, match=r"photons_above.*1e-05 to 1 GeV, or None"):
            gen.simulate(gen.Decay("B0", "D-", "e"), 5, SEED, photons_above=wrong)  # type: ignore[arg-type]


def test_several_pions_do_not_radiate() -> None:
    sample = gen.simulate(gen.Decay("B0", "D-", "tau"), 300, SEED, tau_to="rho", photons_above=LEAST)
    assert ak.sum(ak.num(sample.photons)) == 0


def test_frame() -> None:
    """In the Upsilon frame the photons are boosted like everything else."""
    sample = gen.simulate(gen.Decay("B+", "D*0", "e"), 3000, SEED, frame="Upsilon", photons_above=LEAST)
    total = np.sum(vectors(sample, "D", "soft", "lepton", "nu"), axis=0) + photon_sum(sample)
    np.testing.assert_allclose(total, vectors(sample, "B")[0], atol=1e-9)
