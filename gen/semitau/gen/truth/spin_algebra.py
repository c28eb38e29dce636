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
    incoherent: float,
    coherent: float,
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
    exp(i lambda chi) d_lambda(theta_V) K_lambda. (0, 1): D* -> D pi. (1/2, -1/2): D* -> D gamma, photon helicities
    summed. (1, 0): one state (D), or a charm spin that nobody looks at (D**).
    """
    sin_v = np.sqrt((1.0 - cos_v) * (1.0 + cos_v))
    forward = _ROOT_HALF * sin_v * (cos_chi + 1j * sin_chi)
    backward = -_ROOT_HALF * sin_v * (cos_chi - 1j * sin_chi)
    m_minus = forward * kp_minus + backward * km_minus + cos_v * k0_minus
    m_plus = forward * kp_plus + backward * km_plus + cos_v * k0_plus
    minus = coherent * square(m_minus) + incoherent * (square(kp_minus) + square(km_minus) + square(k0_minus))
    plus = coherent * square(m_plus) + incoherent * (square(kp_plus) + square(km_plus) + square(k0_plus))
    mixed = coherent * (m_minus * np.conj(m_plus)) + incoherent * (
        kp_minus * np.conj(kp_plus) + km_minus * np.conj(km_plus) + k0_minus * np.conj(k0_plus)
    )
    return plus + minus, 2.0 * mixed.real, 2.0 * mixed.imag, plus - minus


@inlined
def chain_density(
    x: float,
    incoherent: float,
    coherent: float,
    cos_theta: float,
    cos_v: float,
    cos_chi: float,
    sin_chi: float,
    even: float,
    odd_x: float,
    odd_y: float,
    odd_z: float,
    amplitudes: Any,
) -> float:
    """|M|² of a whole event up to a factor that does not depend on the amplitudes.

    x : m_lepton / sqrt(q²). even, odd_* : the tau decay is even + odd . P, with P on x', y', z'; 1, 0, 0, 0 without a
    tau.
    amplitudes : the eight of the module's docstring, real or complex.
    """
    states = helicity_states(cos_theta, *lepton_terms(x, *amplitudes))
    trace, px, py, pz = spin_density(incoherent, coherent, cos_v, cos_chi, sin_chi, *states)
    return even * trace + (odd_x * px + odd_y * py + odd_z * pz)  # type: ignore[no-any-return]
