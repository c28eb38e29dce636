"""Spin of one event: helicity amplitudes at given angles, and the spin density matrix of the lepton.

Frames and phases are those of `amplitudes.py`. Lepton spinors are quantised along x' = theta-hat, y' = phi-hat, z' =
n of the lepton direction n in the W* frame, so the amplitudes of both helicities combine into a density matrix.

Everything is generic in the type of the amplitudes: real in the standard model, complex with Wilson coefficients.
The eight amplitudes are those of `amplitudes.py` (J_+, J_-, J_0, J_t, S, T_+, T_-, T_0); a common factor drops out.
"""

from __future__ import annotations

from typing import Any

import numpy as np
from semitau.core.compiled import inlined

from .charm_spin import CharmSpin, first_wave, second_wave

_ROOT_HALF = float(np.sqrt(0.5))


@inlined
def square(z: Any) -> float:
    """|z|² of a real or complex number."""
    return z.real * z.real + z.imag * z.imag  # type: ignore[no-any-return]


@inlined
def lepton_terms(x: float, jp: Any, jm: Any, j0: Any, jt: Any, s: Any, tp: Any, tm: Any, t0: Any) -> tuple[Any, ...]:
    """(a_+, a_-, a_0, b_+, b_-, b_0, t): without and with a flip of the lepton helicity; x = m_lepton / sqrt(q²)."""
    return jp + x * tp, jm + x * tm, j0 + x * t0, x * jp + tp, x * jm + tm, x * j0 + t0, x * jt + s


@inlined
def helicity_states(
    cos_theta: float, ap: Any, am: Any, a0: Any, bp: Any, bm: Any, b0: Any, t: Any
) -> tuple[Any, Any, Any, Any, Any, Any]:
    """K of lepton helicity -1/2 for lambda = +, -, 0, then of helicity +1/2."""
    c = cos_theta
    sine = np.sqrt((1.0 - c) * (1.0 + c))
    return (
        ap * (_ROOT_HALF * (1.0 - c)),
        am * (_ROOT_HALF * (1.0 + c)),
        a0 * -sine,
        bp * (-_ROOT_HALF * sine),
        bm * (_ROOT_HALF * sine),
        t + b0 * c,
    )


@inlined
def spin_density(
    spin: CharmSpin,
    cos_v: float,
    cos_chi: float,
    sin_chi: float,
    kp_minus: Any,
    km_minus: Any,
    k0_minus: Any,
    kp_plus: Any,
    km_plus: Any,
    k0_plus: Any,
) -> tuple[float, float, float, float]:
    """Trace of the lepton's density matrix, and the trace times its polarisation along x', y', z'.

    The matrix is incoherent * sum over lambda of K K+ plus coherent * M M+, with M the sum over lambda of
    exp(i lambda chi) d_lambda(theta_V) K_lambda: see `charm_spin.py`. Without the second wave: see `both_waves`.
    """
    plus, zero = first_wave(spin.wave, cos_v)
    minus, up, mixed = _coherent(
        plus, zero, -plus, cos_chi, sin_chi, kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus
    )
    minus = spin.coherent * minus + spin.incoherent * (square(kp_minus) + square(km_minus) + square(k0_minus))
    up = spin.coherent * up + spin.incoherent * (square(kp_plus) + square(km_plus) + square(k0_plus))
    mixed = spin.coherent * mixed + spin.incoherent * (
        kp_minus * np.conj(kp_plus) + km_minus * np.conj(km_plus) + k0_minus * np.conj(k0_plus)
    )
    return up + minus, 2.0 * mixed.real, 2.0 * mixed.imag, up - minus


@inlined
def both_waves(
    spin: CharmSpin,
    cos_v: float,
    cos_chi: float,
    sin_chi: float,
    kp_minus: Any,
    km_minus: Any,
    k0_minus: Any,
    kp_plus: Any,
    km_plus: Any,
    k0_plus: Any,
) -> tuple[float, float, float, float]:
    """As `spin_density`, for any decay of the charmed meson."""
    trace, x, y, z = spin_density(
        spin, cos_v, cos_chi, sin_chi, kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus
    )
    side = second_wave(spin.wave, cos_v)
    minus, plus, mixed = _coherent(
        side, 0.0, side, cos_chi, sin_chi, kp_minus, km_minus, k0_minus, kp_plus, km_plus, k0_plus
    )
    scale = spin.coherent
    return (
        trace + scale * (plus + minus),
        x + 2.0 * scale * mixed.real,
        y + 2.0 * scale * mixed.imag,
        z + scale * (plus - minus),
    )


@inlined
def _coherent(
    plus: float,
    zero: float,
    minus: float,
    cos_chi: float,
    sin_chi: float,
    kp_minus: Any,
    km_minus: Any,
    k0_minus: Any,
    kp_plus: Any,
    km_plus: Any,
    k0_plus: Any,
) -> tuple[float, float, Any]:
    """|M_-|², |M_+|², M_- conj(M_+) of one wave, with its d of helicities +, 0 and -."""
    forward = plus * (cos_chi + 1j * sin_chi)
    backward = minus * (cos_chi - 1j * sin_chi)
    m_minus = forward * kp_minus + backward * km_minus + zero * k0_minus
    m_plus = forward * kp_plus + backward * km_plus + zero * k0_plus
    return square(m_minus), square(m_plus), m_minus * np.conj(m_plus)


@inlined
def chain_density(
    x: float,
    spin: CharmSpin,
    cos_theta: float,
    cos_v: float,
    cos_chi: float,
    sin_chi: float,
    odd_x: float,
    odd_y: float,
    odd_z: float,
    amplitudes: Any,
    density: Any,
) -> float:
    """|M|² of a whole event up to a factor that does not depend on the amplitudes.

    x : m_lepton / sqrt(q²). odd_* : the tau decay is 1 + odd . P, with P on x', y', z'; 0, 0, 0 without a tau.
    amplitudes : the eight of the module's docstring, real or complex. density : `spin_density` or `both_waves`.
    """
    states = helicity_states(cos_theta, *lepton_terms(x, *amplitudes))
    trace, px, py, pz = density(spin, cos_v, cos_chi, sin_chi, *states)
    return trace + (odd_x * px + odd_y * py + odd_z * pz)  # type: ignore[no-any-return]
