"""Masses, lifetimes and branching fractions against the `particle` package and numbers of the particle data tables."""

from __future__ import annotations

import numpy as np
import pytest
import scipy.constants
from particle import Particle
from semitau.core.constants import (
    BRANCHING_FRACTION,
    FERMI_COUPLING,
    HBAR,
    LIFETIME,
    MASS,
    SPEED_OF_LIGHT,
    WIDTH,
    mass,
    untagged,
)

CODES = {
    "Y(4S)": 300553, "B0": 511, "B+": 521, "D0": 421, "D+": 411, "D*0": 423, "D*+": 413,
    "D0*(2300)0": 10421, "D0*(2300)+": 10411, "D1'(2430)0": 20423, "D1(2420)0": 10423, "D1(2420)+": 10413,
    "D2*(2460)0": 425, "D2*(2460)+": 415, "K+": 321, "K0": 311, "pi+": 211, "pi0": 111, "rho+": 213, "eta": 221,
    "gamma": 22,
    "e": 11, "mu": 13, "tau": 15, "rho0": 113, "D_s+": 431, "D_s*+": 433, "K*+": 323, "K*0": 313, "K_S": 310,
    "K_L": 130, "eta'": 331, "omega": 223, "phi": 333,
}  # fmt: skip


@pytest.mark.parametrize("name", sorted(set(MASS) - {"D1'(2430)+"}))
def test_mass(name: str) -> None:
    known = Particle.from_pdgid(CODES[name])
    error = 1e-3 * (known.mass_upper or 0.0)
    # One standard deviation: editions of the tables move by less than that.
    assert MASS[name] == pytest.approx(known.mass / 1e3, abs=max(error, 1e-9))


def test_isospin_partner_that_the_tables_lack() -> None:
    assert MASS["D1'(2430)+"] == MASS["D1'(2430)0"]


@pytest.mark.parametrize("name", sorted(LIFETIME))
def test_lifetime(name: str) -> None:
    width = Particle.from_pdgid(CODES[name]).width / 1e3
    # 0.5%: averages move by one standard deviation (0.3%) between editions.
    assert LIFETIME[name] == pytest.approx(HBAR / width, rel=0.005)


@pytest.mark.parametrize("name", sorted(WIDTH))
def test_width(name: str) -> None:
    code = CODES[name] if name in CODES else CODES[name + "0"]
    assert WIDTH[name] == pytest.approx(Particle.from_pdgid(code).width / 1e3, rel=1e-3)


def test_units_against_scipy() -> None:
    """CODATA through scipy.constants."""
    value = scipy.constants.physical_constants
    assert pytest.approx(value["Planck constant over 2 pi in eV s"][0] * 1e-9 * 1e12, rel=1e-8) == HBAR
    assert pytest.approx(scipy.constants.c * 1e3 * 1e-12, rel=1e-12) == SPEED_OF_LIGHT
    assert pytest.approx(value["Fermi coupling constant"][0], rel=1e-6) == FERMI_COUPLING


@pytest.mark.parametrize(
    ("parent", "daughters", "momentum"),
    [
        ("D*+", ("D0", "pi+"), 0.039),
        ("D*+", ("D+", "pi0"), 0.038),
        ("D*+", ("D+", "gamma"), 0.136),
        ("D*0", ("D0", "pi0"), 0.043),
        ("D*0", ("D0", "gamma"), 0.137),
    ],
)
def test_momentum_of_the_soft_particle(parent: str, daughters: tuple[str, str], momentum: float) -> None:
    """Momenta of the particle data tables (MeV, whole numbers; from memory)."""
    M, (m1, m2) = MASS[parent], (MASS[d] for d in daughters)
    found = np.sqrt((M**2 - (m1 + m2) ** 2) * (M**2 - (m1 - m2) ** 2)) / (2 * M)
    assert found == pytest.approx(momentum, abs=0.0006)


def test_branching_fractions() -> None:
    """Particle data tables (from memory); the decays of a D* are complete."""
    assert sum(BRANCHING_FRACTION["D*+"].values()) == pytest.approx(1.0, abs=1e-12)
    assert sum(BRANCHING_FRACTION["D*0"].values()) == pytest.approx(1.0, abs=1e-12)
    # Lepton universality: ratio of mu to e from the phase-space function f(x) = 1 - 8x + 8x^3 - x^4 - 12 x^2 log x.
    x = (MASS["mu"] / MASS["tau"]) ** 2
    expected = 1 - 8 * x + 8 * x**3 - x**4 - 12 * x**2 * np.log(x)
    tau = BRANCHING_FRACTION["tau"]
    assert tau["mu"] / tau["e"] == pytest.approx(expected, rel=0.005)
    # Width of tau -> e nu nu with the Fermi coupling: G_F^2 m^5 / 192 pi^3 (radiative corrections -0.4%).
    width = FERMI_COUPLING**2 * MASS["tau"] ** 5 / (192 * np.pi**3)
    assert tau["e"] == pytest.approx(width * LIFETIME["tau"] / HBAR, rel=0.01)


def test_either_charge() -> None:
    assert untagged("D*-") == "D*+"
    assert untagged("D0") == "D0"
    assert mass("D-") == MASS["D+"]
    with pytest.raises(KeyError):
        mass("X")
