"""Helicity amplitudes of B -> X_c l nu: the one formula that rates, sampling and weights share.

Conventions. B rest frame with +z along the W* (so the charmed meson flies along -z); theta is the polar angle of the
lepton in the W* rest frame, cos(theta) = +1 along the W* flight, opposite to the charmed meson; theta_V is the angle of
the D in the D* rest frame to the D* flight; chi = phi(lepton) - phi(D). With x = m_lepton / sqrt(q2),
N = sqrt(q2 - m_lepton^2) and

    a = J + x T,   b = x J + T  for each charm helicity,   t = x J_t + S,

the amplitude for lepton helicity -1/2 is N K- and for +1/2 it is N K+, where

    charm helicity   K-                       K+                      d
    +                a_+ (1-cos th)/sqrt 2    -b_+ sin th / sqrt 2    + sin th_V / sqrt 2
    -                a_- (1+cos th)/sqrt 2    +b_- sin th / sqrt 2    - sin th_V / sqrt 2
    0                -a_0 sin th              t + b_0 cos th          cos th_V

B -> D has helicity 0 only. B -> D* -> D pi: sqrt(3) N sum e^{i lambda chi} d K, coherent; how the helicities of other
charmed mesons add is in truth/charm_spin.py. |amplitude|^2 is in units where

    d Gamma / d q2 d cos(theta) = G_F^2 V_cb^2 / (32 pi^3 M^2) |p| (1 - m_lepton^2/q2) sum |amplitude|^2.

Checked point by point against products of explicit Dirac matrices (tests/gen/test_amplitudes.py).
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import NamedTuple

import numpy as np
from numpy.typing import ArrayLike, NDArray
from semitau.core.constants import BOTTOM_MASS, CHARM_MASS

from ..truth.kinematics import Floats, kallen
from .decay import Decay, WilsonCoefficients
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors
from .orbital_amplitudes import orbital_currents
from .tensor_form_factors import VectorTensorFormFactors, pseudoscalar_tensor, vector_tensor

Complexes = NDArray[np.complex128]
Amplitude = NDArray[np.float64] | NDArray[np.complex128]
"""Real where no coupling is complex, which the arithmetic is several times faster for."""


@dataclass(frozen=True)
class HelicityAmplitudes:
    """Amplitudes of the hadron current, each of the shape of q2, in GeV; float64 if all couplings are real.

    J : vector and axial current for charm helicity +, -, 0 and timelike. S : scalar. T : tensor.
    """

    J_plus: Amplitude
    J_minus: Amplitude
    J_zero: Amplitude
    J_t: Amplitude
    S: Amplitude
    T_plus: Amplitude
    T_minus: Amplitude
    T_zero: Amplitude

    def with_lepton(self, x: ArrayLike) -> LeptonAmplitudes:
        """Combinations for a lepton of x = m_lepton / sqrt(q2)."""
        x = np.asarray(x, dtype=np.float64)
        if not any(np.any(one) for one in (self.S, self.T_plus, self.T_minus, self.T_zero)):
            plus, minus, zero = self.J_plus, self.J_minus, self.J_zero
            return LeptonAmplitudes(plus, minus, zero, x * plus, x * minus, x * zero, x * self.J_t)
        return LeptonAmplitudes(
            a_plus=self.J_plus + x * self.T_plus,
            a_minus=self.J_minus + x * self.T_minus,
            a_zero=self.J_zero + x * self.T_zero,
            b_plus=x * self.J_plus + self.T_plus,
            b_minus=x * self.J_minus + self.T_minus,
            b_zero=x * self.J_zero + self.T_zero,
            t=x * self.J_t + self.S,
        )


@dataclass(frozen=True)
class LeptonAmplitudes:
    """a (lepton helicity -1/2) and b, t (+1/2) of the table above; of the shape of q2, GeV."""

    a_plus: Amplitude
    a_minus: Amplitude
    a_zero: Amplitude
    b_plus: Amplitude
    b_minus: Amplitude
    b_zero: Amplitude
    t: Amplitude


def helicity_amplitudes(decay: Decay, q2: ArrayLike, charm_mass: ArrayLike | None = None) -> HelicityAmplitudes:
    """Amplitudes of the hadron current at q2 (GeV2, any shape, 0 < q2 <= (M-m)^2).

    charm_mass : GeV, of the shape of q2 or one that broadcasts to it, for a D** or a continuum; the decay's own if left
        out.
    """
    q2 = np.asarray(q2, dtype=np.float64)
    if decay.orbital is not None:
        return _orbital(decay, q2, np.asarray(decay.m_charm if charm_mass is None else charm_mass, dtype=np.float64))
    values = decay.model(decay.m_parent, decay.m_charm, q2)
    if isinstance(values, VectorFormFactors):
        tensor = vector_tensor(decay.tensor, values, decay.m_parent, decay.m_charm, q2)
        return vector_amplitudes(decay, q2, values, tensor)
    f_T = pseudoscalar_tensor(decay.tensor, values, decay.m_parent, decay.m_charm, q2)
    return pseudoscalar_amplitudes(decay, q2, values, f_T)


def lepton_amplitudes(decay: Decay, q2: ArrayLike, charm_mass: ArrayLike | None = None) -> LeptonAmplitudes:
    """Amplitudes for both lepton helicities at q2 (GeV2, any shape); charm_mass as in `helicity_amplitudes`."""
    q2 = np.asarray(q2, dtype=np.float64)
    return helicity_amplitudes(decay, q2, charm_mass).with_lepton(decay.m_lepton / np.sqrt(q2))


class _Strengths(NamedTuple):
    """Couplings as they multiply amplitudes: real numbers if none is complex."""

    VL: float | complex
    VR: float | complex
    SL: float | complex
    SR: float | complex
    T: float | complex

    @classmethod
    def of(cls, couplings: WilsonCoefficients) -> _Strengths:
        values = [complex(getattr(couplings, name)) for name in cls._fields]
        return cls(*(values if any(value.imag for value in values) else [value.real for value in values]))


def _amplitudes(q2: Floats, couplings: _Strengths, **given: ArrayLike) -> HelicityAmplitudes:
    """The given amplitudes as arrays of one type, the others zero."""
    dtype: type = np.complex128 if isinstance(couplings.T, complex) else np.float64
    names = (field.name for field in fields(HelicityAmplitudes))
    return HelicityAmplitudes(
        **{name: np.asarray(given[name], dtype) if name in given else np.zeros(q2.shape, dtype) for name in names}
    )


# Divisions below are products with a reciprocal, which real and complex numbers round alike.


def pseudoscalar_amplitudes(
    decay: Decay, q2: Floats, values: PseudoscalarFormFactors, f_T: Floats
) -> HelicityAmplitudes:
    """B -> D from given form factors; masses and couplings of `decay`."""
    M, m, c = decay.m_parent, decay.m_charm, _Strengths.of(decay.couplings)
    size, gap, over_root = np.sqrt(kallen(M, m, q2)), M**2 - m**2, 1.0 / np.sqrt(q2)
    vector = 1.0 + c.VL + c.VR
    found = {
        "J_zero": -0.5 * vector * size * over_root * values.f_plus,
        "J_t": 0.5 * vector * gap * over_root * values.f_zero,
    }
    if c.SL or c.SR:
        found["S"] = 0.5 * (c.SL + c.SR) * gap * values.f_zero * (1.0 / (BOTTOM_MASS - CHARM_MASS))
    if c.T:
        found["T_zero"] = -2.0 * c.T * size * f_T * (1.0 / (M + m))
    return _amplitudes(q2, c, **found)


def vector_amplitudes(
    decay: Decay, q2: Floats, values: VectorFormFactors, tensor: VectorTensorFormFactors
) -> HelicityAmplitudes:
    """B -> D* from given form factors; masses and couplings of `decay`."""
    M, m, c = decay.m_parent, decay.m_charm, _Strengths.of(decay.couplings)
    square = kallen(M, m, q2)
    size, over_root, gap = np.sqrt(square), 1.0 / np.sqrt(q2), M**2 - m**2
    axial, vector = 1.0 + c.VL - c.VR, 1.0 + c.VL + c.VR
    transverse, parity = axial * (M + m) * values.A1, vector * size * values.V * (1.0 / (M + m))
    found = {
        "J_plus": 0.5 * (transverse - parity),
        "J_minus": 0.5 * (transverse + parity),
        "J_zero": 0.5 * axial * values.F1 * over_root,
        "J_t": -0.5 * axial * size * over_root * values.A0,
    }
    if c.SL or c.SR:
        found["S"] = -0.5 * (c.SR - c.SL) * size * values.A0 * (1.0 / (BOTTOM_MASS + CHARM_MASS))
    if c.T:
        T_even, T_odd = gap * tensor.T2, size * tensor.T1
        found["T_plus"] = -2.0 * c.T * (T_even + T_odd) * over_root
        found["T_minus"] = -2.0 * c.T * (T_even - T_odd) * over_root
        found["T_zero"] = -(c.T / m) * ((M**2 + 3.0 * m**2 - q2) * tensor.T2 - square * tensor.T3 / gap)
    return _amplitudes(q2, c, **found)


def _orbital(decay: Decay, q2: Floats, m: Floats) -> HelicityAmplitudes:
    """B -> D**. Scalar and tensor currents follow from the equations of motion, exact at leading order in 1/m."""
    currents = orbital_currents(decay, q2, m)
    M, c = decay.m_parent, _Strengths.of(decay.couplings)
    axial, vector = 1.0 + c.VL - c.VR, 1.0 + c.VL + c.VR
    timelike = -0.5 * currents.timelike  # the helicity table has J_t and J_0 of opposite sign
    # The current that carries the polarisation vector of the charmed meson is the vector one in 1+ states, the axial
    # one in 0+ and 2+; the other one has the epsilon tensor.
    if currents.natural_is_vector:
        even, odd, scalar = vector, axial, (c.SL + c.SR) / (BOTTOM_MASS - CHARM_MASS)
        tensor, with_even, with_odd = -c.T, M + m, M - m
    else:
        even, odd, scalar = axial, vector, (c.SR - c.SL) / (BOTTOM_MASS + CHARM_MASS)
        tensor, with_even, with_odd = c.T, M - m, M + m
    found = {
        "J_plus": 0.5 * (even * currents.transverse - odd * currents.parity),
        "J_minus": 0.5 * (even * currents.transverse + odd * currents.parity),
        "J_zero": 0.5 * even * currents.longitudinal,
        "J_t": even * timelike,
    }
    if scalar:
        found["S"] = scalar * np.sqrt(q2) * timelike
    if tensor:
        over_root, drag = 1.0 / np.sqrt(q2), np.sqrt(kallen(M, m, q2)) * currents.timelike
        whole, part = with_even * currents.transverse, with_odd * currents.parity
        found["T_plus"] = -2.0 * tensor * (whole + part) * over_root
        found["T_minus"] = -2.0 * tensor * (whole - part) * over_root
        found["T_zero"] = -2.0 * tensor * (with_even * currents.longitudinal - drag / with_odd) * over_root
    return _amplitudes(q2, c, **found)
