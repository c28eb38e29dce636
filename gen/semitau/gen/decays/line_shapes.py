"""Masses of broad charmed states: relativistic Breit-Wigner with an energy-dependent width, or phase space.

A decay whose `charm_mass` is None has the mass distribution rho(m) of this module; at each mass the weak decay has its
own width, so that the spectrum of events is rho(m) Gamma(m). It is cut at the threshold of the strong decay and at M -
m_lepton. Resonances (particle data tables, review of resonances), with breakup momentum p and S waves:

    rho(m) ~ m Gamma(m) m0 / [(m0^2 - m^2)^2 + m0^2 Gamma(m)^2],   Gamma(m) = Gamma0 (p/p0) (m0/m).

A continuum follows the phase space of its two or three particles times exp(-m/scale): rho(m) ~ p(m) for two particles,
the integral of p(m; m_D, mu) p(mu; pi, pi) over the pair mass mu for three.

Positions y in [0, 1] stand for masses, crowded where rho is large. The map does not depend on parameters that may be
varied, so a variation is a weight at the same position.
"""

from __future__ import annotations

from functools import lru_cache

import numpy as np
from semitau.core.constants import MASS

from ..truth.kinematics import Floats
from .decay import Decay
from .orbital_states import CONTINUUM_SCALE, CharmState

_END = 0.01
"""GeV below M - m_lepton, where tables end: the phase space that is left is below 1e-6 of the whole."""

_SPREAD = 3.0
"""Nominal widths that the map of a resonance takes for its width, so that the tails have enough points."""

_NORM_NODES = 200


@lru_cache(maxsize=8)
def legendre_nodes(number: int) -> tuple[Floats, Floats]:
    """Nodes and weights of Gauss-Legendre quadrature on [0, 1]."""
    points, weights = np.polynomial.legendre.leggauss(number)
    return 0.5 * (points + 1.0), 0.5 * weights


def has_line_shape(decay: Decay) -> bool:
    """Whether the mass of the charmed state is drawn; a `charm_mass` fixes it."""
    return decay.charm_mass is None and decay.orbital is not None and decay.orbital.broad


def breakup(m: float | Floats, one: float | Floats, other: float | Floats) -> Floats:
    """Momentum of two daughters in the rest frame of m (GeV); 0 below threshold."""
    product = (m - one - other) * (m + one + other) * (m - one + other) * (m + one - other)
    return np.asarray(np.sqrt(np.maximum(product, 0.0)) / (2.0 * m))


def pair_phase_space(m: float | Floats, charm: float, first: float, second: float, x: Floats) -> Floats:
    """Density in x, unnormalised, of the pair mass mu = m_1 + m_2 + (m - m_D - m_1 - m_2) x in flat phase space."""
    low = first + second
    span = np.maximum(m - charm - low, 0.0)
    mu = low + span * x
    return np.asarray(breakup(m, charm, mu) * breakup(mu, first, second) * span)


def mass_range(decay: Decay) -> tuple[float, float]:
    """Lowest and highest mass of the tables, GeV."""
    return _state(decay).threshold, decay.m_parent - decay.m_lepton - _END


def mass_at(decay: Decay, y: Floats) -> Floats:
    """Mass (GeV) at positions y in [0, 1]."""
    return _map(decay, np.asarray(y, dtype=np.float64))[0]


def mass_slope(decay: Decay, y: Floats) -> Floats:
    """dm/dy, GeV."""
    return _map(decay, np.asarray(y, dtype=np.float64))[1]


def mass_density(decay: Decay, m: Floats) -> Floats:
    """rho(m), GeV^-1, normalised from the threshold to the mass of the parent whatever the lepton."""
    shape = _unnormalised(decay, np.asarray(m, dtype=np.float64))
    return shape / _norm(decay.parent, _state(decay), _shape_parameters(decay), decay.m_parent)


def _state(decay: Decay) -> CharmState:
    state = decay.orbital
    if state is None:
        raise ValueError(f"{decay.charm} has no line shape")
    return state


def _map(decay: Decay, y: Floats) -> tuple[Floats, Floats]:
    state = _state(decay)
    low, high = mass_range(decay)
    if state.continuum:
        return low + (high - low) * y * y, 2.0 * (high - low) * y
    width = _SPREAD * state.width * state.mass
    start, end = (float(np.arctan((m * m - state.mass**2) / width)) for m in (low, high))
    angle = start + (end - start) * y
    m = np.sqrt(state.mass**2 + width * np.tan(angle))
    return m, (end - start) * width / np.cos(angle) ** 2 / (2.0 * m)


def _shape_parameters(decay: Decay) -> tuple[float, ...]:
    """Mass and width of a resonance, scale of a continuum: from the form-factor set if it has them."""
    state, known = _state(decay), decay.model.parameters
    if state.continuum:
        return (known.get("continuum_scale", CONTINUUM_SCALE),)
    short = state.family[: state.family.index("(")]
    return known.get(f"{short}_mass", state.mass), known.get(f"{short}_width", state.width)


def _unnormalised(decay: Decay, m: Floats) -> Floats:
    return _shape(_state(decay), _shape_parameters(decay), m)


def _shape(state: CharmState, parameters: tuple[float, ...], m: Floats) -> Floats:
    charm, light = _parts(state)
    if state.continuum:
        (scale,) = parameters
        falling = np.exp(-(m - state.threshold) / scale)
        if state.light == "pi pi":
            t, weights = legendre_nodes(48)
            x, dx = t * t * (3.0 - 2.0 * t), 6.0 * weights * t * (1.0 - t)
            return np.asarray(falling * (pair_phase_space(m[..., None], charm, 0.5 * light, 0.5 * light, x) @ dx))
        return np.asarray(falling * breakup(m, charm, light))
    mass, width = parameters
    running = width * breakup(m, charm, light) / breakup(np.asarray(mass), charm, light) * mass / m
    return np.asarray(m * running * mass / ((mass**2 - m**2) ** 2 + (mass * running) ** 2))


def _parts(state: CharmState) -> tuple[float, float]:
    """Mass of the D or D*, and of what goes with it, in the heaviest charge state."""
    charm = MASS["D*+" if state.to_vector > 0.0 else "D+"]
    return charm, state.threshold - charm


@lru_cache(maxsize=256)
def _norm(parent: str, state: CharmState, parameters: tuple[float, ...], end: float) -> float:
    t, weights = legendre_nodes(_NORM_NODES)
    m = state.threshold + (end - state.threshold) * t * t
    return 2.0 * float(weights @ (_shape(state, parameters, m) * t)) * (end - state.threshold)
