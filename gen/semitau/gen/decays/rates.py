"""Widths and what follows from them: branching fractions, ratios, polarisations, asymmetries."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from functools import lru_cache

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.constants import ELECTROWEAK_CORRECTION, FERMI_COUPLING, HBAR, VCB
from semitau.core.errors import InputError, Problem

from ..truth.kinematics import Floats, kallen
from .amplitudes import LeptonAmplitudes, lepton_amplitudes
from .decay import Decay
from .form_factor_set import FormFactorSet
from .lepton_couplings import Given, LeptonCouplings
from .line_shapes import has_line_shape, mass_at, mass_density, mass_slope

NODES = 96
"""Gauss-Legendre nodes of the q2 integral: exact to 1e-13 for mu and tau, to 3e-8 for e (turn-on above m_e^2)."""

_ROWS = 64
"""Masses done at a time, so that the arrays stay in the cache of the processor."""

MASS_NODES = 64
"""Gauss-Legendre nodes of the integral over the mass of a broad state."""


@dataclass(frozen=True)
class Observables:
    """Integrated quantities of one decay.

    rate : width, GeV, with the shipped |V_cb|. branching_fraction : of the parent.
    tau_polarisation : (rate of helicity +1/2 minus -1/2) / rate in the W* rest frame; of whichever lepton it is.
    longitudinal_fraction : share of charm helicity 0; 1 for B -> D.
    forward_backward : (forward minus backward) / rate; forward: lepton along the W* flight, away from the charm hadron.
    mean_q2 : GeV2.
    """

    rate: float
    branching_fraction: float
    tau_polarisation: float
    longitudinal_fraction: float
    forward_backward: float
    mean_q2: float


@dataclass(frozen=True)
class DifferentialRates:
    """Parts of d Gamma / d q2, GeV^-1, each of the shape of q2; zero outside the physical range.

    positive, negative : lepton helicity. longitudinal : charm helicity 0. forward_minus_backward : in cos(theta).
    """

    positive: Floats
    negative: Floats
    longitudinal: Floats
    forward_minus_backward: Floats

    @property
    def total(self) -> Floats:
        return self.positive + self.negative


def differential_rate(decay: Decay, q2: ArrayLike) -> Floats:
    """d Gamma / d q2 in GeV^-1 for the shipped |V_cb|, at q2 in GeV2 (any shape); 0 outside the physical range."""
    return differential_rates(decay, q2).total


def differential_rates(decay: Decay, q2: ArrayLike) -> DifferentialRates:
    """d Gamma / d q2 by lepton helicity, with its longitudinal part and its forward-backward difference."""
    q2 = np.asarray(q2, dtype=np.float64)
    if not has_line_shape(decay):
        return _at_mass(decay, q2, np.asarray(decay.m_charm))
    masses, weights = mass_nodes(decay)
    parts = _at_mass(decay, q2[..., None], masses)
    return DifferentialRates(**{name: value @ weights for name, value in vars(parts).items()})


def mass_nodes(decay: Decay) -> tuple[Floats, Floats]:
    """Masses (GeV) of a broad state and their weights, so that sums are integrals over rho(m) dm; (n,) each."""
    y, weights = _nodes(MASS_NODES)
    masses = mass_at(decay, y)
    return masses, weights * mass_slope(decay, y) * mass_density(decay, masses)


def _at_mass(decay: Decay, q2: Floats, m: Floats) -> DifferentialRates:
    """Differential rates with this mass of the charmed meson, GeV; m broadcasts to q2 or the other way round."""
    amplitudes, factor = _amplitudes_at(decay, q2, m)
    return _angular_integrals(amplitudes, factor)


def _total_at(decay: Decay, q2: Floats, m: Floats) -> Floats:
    """The `total` of these."""
    amplitudes, factor = _amplitudes_at(decay, q2, m)
    positive, negative, _ = _helicities(amplitudes, factor)
    return positive + negative


def _amplitudes_at(decay: Decay, q2: Floats, m: Floats) -> tuple[LeptonAmplitudes, Floats]:
    """Amplitudes, and what their squares are multiplied with; 0 outside the physical range."""
    low, high = decay.m_lepton**2, (decay.m_parent - m) ** 2
    inside = (q2 > low) & (q2 < high)
    safe = np.where(inside, q2, 0.5 * (low + high))
    amplitudes = lepton_amplitudes(decay, safe, m)
    M, square = decay.m_parent, safe - decay.m_lepton**2
    coupling = (FERMI_COUPLING * ELECTROWEAK_CORRECTION * VCB) ** 2 / (32.0 * np.pi**3 * M**2)
    momentum = np.sqrt(kallen(M, m, safe)) / (2.0 * M)
    return amplitudes, np.where(inside, coupling * momentum * square**2 / safe, 0.0)


def _angular_integrals(k: LeptonAmplitudes, factor: Floats) -> DifferentialRates:
    """Integrals over cos(theta) of the squares of the helicity table."""
    positive, negative, longitudinal = _helicities(k, factor)
    odd = _square(k.a_minus) - _square(k.a_plus) + 2.0 * np.real(k.t * np.conj(k.b_zero))
    return DifferentialRates(positive, negative, factor * longitudinal, factor * odd)


def _helicities(k: LeptonAmplitudes, factor: Floats) -> tuple[Floats, Floats, Floats]:
    """Rates of both lepton helicities, and that of charm helicity 0 without the factor."""
    zero_negative, zero_positive = _square(k.a_zero) * (4.0 / 3.0), _square(k.b_zero) * (2.0 / 3.0) + 2.0 * _square(k.t)
    positive = factor * (zero_positive + (2.0 / 3.0) * (_square(k.b_plus) + _square(k.b_minus)))
    negative = factor * (zero_negative + (4.0 / 3.0) * (_square(k.a_plus) + _square(k.a_minus)))
    return positive, negative, zero_negative + zero_positive


def _square(amplitude: np.ndarray) -> Floats:
    result: Floats = amplitude.real**2
    if np.iscomplexobj(amplitude):
        result += amplitude.imag**2
    return result


def q2_of(decay: Decay, t: Floats) -> Floats:
    """q2 (GeV2) at t in [0, 1]: q2 = low + (high - low) t^2 (3 - 2t), which tames both end points."""
    low, high = decay.q2_range
    result: Floats = low + (high - low) * t * t * (3.0 - 2.0 * t)
    return result


def q2_slope(decay: Decay, t: Floats) -> Floats:
    """d q2 / d t, GeV2."""
    low, high = decay.q2_range
    result: Floats = 6.0 * (high - low) * t * (1.0 - t)
    return result


@lru_cache(maxsize=4)
def _nodes(number: int) -> tuple[Floats, Floats]:
    points, weights = np.polynomial.legendre.leggauss(number)
    return 0.5 * (points + 1.0), 0.5 * weights


def widths_at(decay: Decay, masses: Floats) -> Floats:
    """Width in GeV at each of these masses (n,) of the charmed meson, GeV."""
    t, weights = _nodes(NODES)
    integrand = np.empty((masses.size, NODES))
    for begin in range(0, masses.size, _ROWS):
        here = slice(begin, begin + _ROWS)
        m = masses[here, None]
        low, high = decay.m_lepton**2, (decay.m_parent - m) ** 2
        q2 = low + (high - low) * t * t * (3.0 - 2.0 * t)
        integrand[here] = _total_at(decay, q2, m) * (6.0 * (high - low) * t * (1.0 - t))
    widths: Floats = integrand @ weights
    return widths


@lru_cache(maxsize=1024)
def observables(decay: Decay) -> Observables:
    """Width, branching fraction, polarisations, asymmetry and mean q2 of a decay by quadrature; see `Observables`.

    InputError if couplings or form factors leave no rate.
    """
    q2, masses, flat = _quadrature(decay)
    parts = _at_mass(decay, q2, masses)

    def integral(of: Floats) -> float:
        return float(flat @ of.ravel())

    rate = _checked(decay, integral(parts.total))
    return Observables(
        rate=rate,
        branching_fraction=rate * decay.lifetime / HBAR,
        tau_polarisation=integral(parts.positive - parts.negative) / rate,
        longitudinal_fraction=integral(parts.longitudinal) / rate,
        forward_backward=integral(parts.forward_minus_backward) / rate,
        mean_q2=integral(parts.total * q2) / rate,
    )


@lru_cache(maxsize=1024)
def width(decay: Decay) -> float:
    """The `rate` of `observables` alone, at half the cost."""
    q2, masses, flat = _quadrature(decay)
    return _checked(decay, float(flat @ _total_at(decay, q2, masses).ravel()))


def _quadrature(decay: Decay) -> tuple[Floats, Floats, Floats]:
    """q2 (masses, nodes) or (nodes,), masses that broadcast to it, and flat weights of the integral over both."""
    t, weights = _nodes(NODES)
    if has_line_shape(decay):
        masses, mass_weights = (column[:, None] for column in mass_nodes(decay))
    else:
        masses, mass_weights = np.array(decay.m_charm), np.array(1.0)
    low, high = decay.m_lepton**2, (decay.m_parent - masses) ** 2
    q2 = low + (high - low) * t * t * (3.0 - 2.0 * t)
    return q2, masses, (weights * (6.0 * (high - low) * t * (1.0 - t)) * mass_weights).ravel()


def _checked(decay: Decay, rate: float) -> float:
    if not 0.0 < rate < np.inf:
        remedy = "Look at couplings that cancel each other, and at the form factors."
        raise InputError(Problem("has no rate", str(decay), got=f"{rate:g} GeV", remedy=remedy))
    return rate


def ratio(
    parent: str,
    charm: str,
    form_factors: FormFactorSet | str | None = None,
    wilson: Given = None,
    tensor: str = "LO",
    light: Mapping[str, Given] | None = None,
) -> float:
    """R: width with a tau over the mean of the widths with an electron and a muon.

    parent, charm, form_factors, tensor : as in `Decay`. wilson : acts on the tau only. light : "e", "mu" -> couplings
    of the decays with that lepton, e.g. {"mu": {"VL": 0.02}}; those of the standard model where left out.
    """
    couplings = LeptonCouplings.of(wilson, tensor, light)
    rate = {
        lepton: observables(Decay(parent, charm, lepton, form_factors, couplings[lepton], couplings.model(lepton))).rate
        for lepton in ("e", "mu", "tau")
    }
    return 2.0 * rate["tau"] / (rate["e"] + rate["mu"])
