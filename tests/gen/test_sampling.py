"""The sampling of single quantities against closed forms and integrals that share no code with it.

Kolmogorov-Smirnov and chi² tests with a fixed seed, which SEMITAU_TEST_SEED replaces; each asks for a p-value above
1e-5, so a fresh seed fails somewhere in this file with a chance below 1e-3.
"""

from __future__ import annotations

import os
from collections.abc import Callable

import numpy as np
import pytest
from scipy import integrate, stats
from semitau import gen
from semitau.core.constants import MASS
from semitau.core.streams import stream_key, uniforms
from semitau.gen.block import LANES, NODE, Q2, VISIBLE_E, new_block
from semitau.gen.decays.chains import chains_of
from semitau.gen.truth.alias import alias_tables, draw_position, interval_table
from semitau.gen.truth.channel_table import Q2_INTERVALS, channel_table
from semitau.gen.truth.cosines import even_cosine
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.momenta import rotation
from semitau.gen.truth.tau_decay import emission, energy_range

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
UNLIKELY = 1e-5


def random(draw: int, n: int) -> np.ndarray:
    return uniforms(stream_key(SEED, "sampling"), 0, n, draw)


def cumulative(density: Callable[[np.ndarray], np.ndarray], grid: np.ndarray) -> Callable[[np.ndarray], np.ndarray]:
    """Distribution function from a density on a fine grid."""
    values = integrate.cumulative_simpson(density(grid), x=grid, initial=0.0)
    return lambda x: np.interp(x, grid, values / values[-1])


def test_alias_table_holds_the_weights() -> None:
    """What stays at an index plus what is sent there gives back the weights exactly."""
    weights = np.random.default_rng(SEED).exponential(size=100)
    weights[[3, 50]] = 0.0
    table = alias_tables(weights[None])[0]
    back = table[:, 0].copy()
    np.add.at(back, table[:, 1].astype(int), 1.0 - table[:, 0])
    np.testing.assert_allclose(back / 100, weights / weights.sum(), atol=1e-15)
    np.testing.assert_array_equal(alias_tables(np.ones((1, 4)))[0, :, 0], 1.0)


def test_interval_table_follows_its_density() -> None:
    """Triangle 2x: linear inside every interval, so the draws are exact whatever the number of intervals."""
    table = interval_table(lambda x: 2.0 * x, 4)
    position = np.array(
        [draw_position(table, *u) / 4 for u in zip(*(random(k, 50_000) for k in range(3)), strict=True)]
    )
    assert position.min() >= 0.0
    assert position.max() <= 1.0
    assert stats.kstest(position, lambda x: x**2).pvalue > UNLIKELY


@pytest.mark.parametrize("bad", [-1.0, np.nan, 0.0])
def test_no_density(bad: float) -> None:
    with pytest.raises(ValueError, match="finite and not negative"):
        interval_table(lambda x: np.full(x.shape, bad), 4)


@pytest.mark.parametrize(("sin2", "cos2"), [(1.0, 0.0), (0.0, 1.0), (1.0, 1.0), (0.3, 2.0)])
def test_cosine(sin2: float, cos2: float) -> None:
    """Distribution function of sin2 (1 - c²) + cos2 c², integrated by hand."""
    draws = zip(*(random(k, 50_000) for k in range(4)), strict=True)
    c = np.array([even_cosine(*u, sin2, cos2) for u in draws])
    total = 4 / 3 * sin2 + 2 / 3 * cos2
    assert stats.kstest(c, lambda x: (sin2 * (x - x**3 / 3 + 2 / 3) + cos2 * (x**3 + 1) / 3) / total).pvalue > UNLIKELY


def test_rotation_is_uniform() -> None:
    """Orthogonal matrices with determinant 1 whose angle has the density (1 - cos a)/pi of the Haar measure."""
    matrices = np.reshape([rotation(*u) for u in zip(*(random(k, 20_000) for k in range(3)), strict=True)], (-1, 3, 3))
    np.testing.assert_allclose(
        matrices @ matrices.transpose(0, 2, 1), np.broadcast_to(np.eye(3), matrices.shape), atol=1e-14
    )
    np.testing.assert_allclose(np.linalg.det(matrices), 1.0, atol=1e-14)
    angle = np.arccos(np.clip((np.trace(matrices, axis1=1, axis2=2) - 1) / 2, -1, 1))
    assert stats.kstest(angle, lambda a: (a - np.sin(a)) / np.pi).pvalue > UNLIKELY
    for row, column in np.ndindex(3, 3):
        assert stats.kstest(matrices[:, row, column], "uniform", args=(-1, 2)).pvalue > UNLIKELY


def draw_rows(decay: gen.Decay, tau_to: str, blocks: int, *rows: int) -> np.ndarray:
    """(rows, events) of the first chain of a decay."""
    table = channel_table(next(chains_of(decay, (tau_to,))))
    x, found = new_block(), []
    for block in range(blocks):
        draw_decays(x, table, stream_key(SEED, "rows"), np.uint64(block * LANES))
        found.append([x[row : row + LANES].copy() for row in rows])
    return np.concatenate(found, axis=1)


@pytest.mark.parametrize(
    ("parent", "charm", "lepton"),
    [
        ("B0", "D-", "tau"),
        ("B+", "D0", "mu"),
        ("B0", "D*-", "tau"),
        ("B+", "D*0", "e"),
        ("B0", "D1(2420)-", "tau"),
        ("B0", "D2*(2460)-", "mu"),
        ("B0", "D0*(2300)-", "e"),
        ("B0", "D1'(2430)-", "tau"),
    ],
)
def test_q2(parent: str, charm: str, lepton: str) -> None:
    """Against the integral of the rate, which is tested against publications on its own (test_rates.py)."""
    decay = gen.Decay(parent, charm, lepton)
    low, high = decay.q2_range
    q2, node = draw_rows(decay, "mu", 400, Q2, NODE)
    assert q2.min() >= low
    assert q2.max() <= high
    # a grid that is fine at both end points, where the rate turns on sharply
    grid = low + (high - low) * (1 - np.cos(np.pi * np.linspace(0, 1, 20_001))) / 2
    assert stats.kstest(q2, cumulative(lambda x: gen.differential_rate(decay, x), grid)).pvalue > UNLIKELY
    if decay.charm_mass is None:  # tables at many masses
        return
    t = node / Q2_INTERVALS
    np.testing.assert_allclose(q2, low + (high - low) * t * t * (3 - 2 * t), rtol=1e-12)


@pytest.mark.parametrize("tau_to", ["e", "mu"])
def test_energy_of_the_tau_daughter(tau_to: str) -> None:
    """Michel spectrum with the mass of the daughter, d Gamma/dx ~ sqrt(x²-x0²) [x(1-x) + (2/9)(3/4)(4x²-3x-x0²)].

    Particle data tables, review "Muon decay parameters", rho = 3/4, eta = 0, x = E/E_max, x0 = m/E_max; integrated over
    direction, so the polarisation drops out.
    """
    mass, tau = MASS[tau_to], MASS["tau"]
    top = (tau**2 + mass**2) / (2 * tau)
    (energy,) = draw_rows(gen.Decay("B0", "D-", "tau"), tau_to, 400, VISIBLE_E)
    assert energy.min() >= mass
    assert energy.max() <= top * (1 + 1e-15)

    def michel(e: np.ndarray) -> np.ndarray:
        x, x0 = e / top, mass / top
        return np.sqrt(np.maximum(x * x - x0 * x0, 0)) * (x * (1 - x) + (4 * x * x - 3 * x - x0 * x0) / 6)

    assert stats.kstest(energy, cumulative(michel, np.linspace(mass, top, 20_001))).pvalue > UNLIKELY


def test_tau_daughter_against_integrals_over_neutrinos() -> None:
    """A and B of the tau decay: |M|² = [(p - m s).k1][l.k2] averaged over the neutrino direction by quadrature."""
    tau, mass = MASS["tau"], MASS["mu"]
    nodes, weights = np.polynomial.legendre.leggauss(4)
    azimuth = 2 * np.pi * np.arange(4) / 4
    for energy in np.linspace(*energy_range(mass), 7)[1:-1]:
        size = np.sqrt(energy**2 - mass**2)
        pair_energy, pair = tau - energy, np.array([0.0, 0.0, -size])
        pair_mass = np.sqrt(pair_energy**2 - size**2)
        integral = {-1: 0.0, 0: 0.0, 1: 0.0}  # polarisation along the lepton
        for c, weight in zip(nodes, weights, strict=True):
            for phi in azimuth:
                k = pair_mass / 2 * np.array([np.sqrt(1 - c * c) * np.cos(phi), np.sqrt(1 - c * c) * np.sin(phi), c])
                k_energy = (pair_energy * pair_mass / 2 + pair @ k) / pair_mass
                k = k + pair * (pair @ k / (pair_energy + pair_mass) + pair_mass / 2) / pair_mass
                other, other_energy = pair - k, pair_energy - k_energy
                for spin in integral:
                    value = tau * (k_energy + spin * k[2]) * (energy * other_energy - size * other[2])
                    integral[spin] += weight * value / 8
        _, even, odd = emission(energy, mass)
        # with both neutrinos integrated the bracket becomes A/12 and -B/12
        np.testing.assert_allclose([12 * integral[0], 12 * integral[1]], [even, even - odd], rtol=1e-12)
        assert abs(odd) <= even
