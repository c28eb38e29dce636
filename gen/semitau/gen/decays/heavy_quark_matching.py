"""One-loop matching of the b -> c currents onto heavy-quark ones: Phys. Rept. 245 (1994) 259 and references there.

In the heavy-quark limit a current c Gamma b with gluon corrections at order alpha_s is

    c gamma^mu b         ->  C_V1 gamma^mu + C_V2 v^mu + C_V3 v'^mu             (axial: the same with gamma_5, C_A)
    c b, c gamma_5 b     ->  C_S, C_P times itself
    c sigma^mn b         ->  C_T1 sigma^mn + C_T2 i(v^m gamma^n - v^n gamma^m) + C_T3 i(v'^m gamma^n - v'^n gamma^m)

and the coefficients here are what multiplies alpha_s/pi beyond 1 (C_1, C_S, C_P) or 0. Scalar and tensor currents and
quark masses in the MS-bar scheme at mu^2 = m_b m_c. Formulas written as in Phys. Rev. D 95 (2017) 115008, from memory;
tests: closed forms at zero recoil, and the equations of motion, which tie V to S and A to P at every w.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..truth.kinematics import Floats

_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(24)


@dataclass(frozen=True)
class Matching:
    """Coefficients of alpha_s/pi, arrays of the shape of w."""

    S: Floats
    P: Floats
    V1: Floats
    V2: Floats
    V3: Floats
    A1: Floats
    A2: Floats
    A3: Floats
    T1: Floats
    T2: Floats
    T3: Floats


def matching(step: Floats, z: float) -> Matching:
    """At w = 1 + step for z = m_c/m_b < 1; w < (z + 1/z)/2, where the coefficients have a removable pole."""
    step = np.maximum(step, 0.0)  # rounding at the end point
    w = 1.0 + step
    pole = 0.5 * (z + 1.0 / z)
    gap, log = w - pole, np.log(z)
    r, omega = _angle_over_sine(step), _omega(step, z)
    return Matching(
        S=(2 * z * gap * omega - step * (z + 1) ** 2 * r + (z * z - 1) * log) / (3 * z * gap),
        P=(2 * z * gap * omega - (w + 1) * (z - 1) ** 2 * r + (z * z - 1) * log) / (3 * z * gap),
        V1=(2 * (w + 1) * ((3 * w - 1) * z - z * z - 1) * r - (12 * z * gap + (z * z - 1) * log) + 4 * z * gap * omega)
        / (6 * z * gap),
        V2=-(
            ((4 * w * w + 2 * w) * z**2 - (2 * w * w + 5 * w - 1) * z - (w + 1) * z**3 + 2) * r
            + z * (-2 * (z - 1) * gap + (z * z - (4 * w - 2) * z + 3 - 2 * w) * log)
        )
        / (6 * z * z * gap**2),
        V3=(
            ((2 * w * w + 5 * w - 1) * z**2 - (4 * w * w + 2 * w) * z - 2 * z**3 + w + 1) * r
            + (-2 * z * (z - 1) * gap + ((3 - 2 * w) * z * z + (2 - 4 * w) * z + 1) * log)
        )
        / (6 * z * gap**2),
        A1=(2 * step * ((3 * w + 1) * z - z * z - 1) * r - (12 * z * gap + (z * z - 1) * log) + 4 * z * gap * omega)
        / (6 * z * gap),
        A2=-(
            ((4 * w * w - 2 * w) * z**2 + (2 * w * w - 5 * w - 1) * z - step * z**3 + 2) * r
            + z * (-2 * (z + 1) * gap + (z * z - (4 * w + 2) * z + 2 * w + 3) * log)
        )
        / (6 * z * z * gap**2),
        A3=(
            (2 * z**3 + (2 * w * w - 5 * w - 1) * z**2 + (4 * w * w - 2 * w) * z - step) * r
            + (-2 * z * (z + 1) * gap - ((2 * w + 3) * z * z - (4 * w + 2) * z + 1) * log)
        )
        / (6 * z * gap**2),
        T1=(step * ((4 * w + 2) * z - z * z - 1) * r - (6 * z * gap + (z * z - 1) * log) + 2 * z * gap * omega)
        / (3 * z * gap),
        T2=2 * ((1 - w * z) * r + z * log) / (3 * z * gap),
        T3=2 * ((w - z) * r + log) / (3 * gap),
    )


def _angle(step: Floats) -> Floats:
    """theta of w = cosh(theta)."""
    angle: Floats = np.log1p(step + np.sqrt(step * (step + 2.0)))
    return angle


def _angle_over_sine(step: Floats) -> Floats:
    """theta / sinh(theta), 1 at zero recoil."""
    sine = np.sqrt(step * (step + 2.0))
    return np.divide(_angle(step), sine, out=np.ones_like(sine), where=sine > 0.0)


def _omega(step: Floats, z: float) -> Floats:
    """Omega(w) of the reference, its differences of dilogarithms as integrals that stay smooth at zero recoil."""
    theta = _angle(step)[..., np.newaxis] * _POINTS
    ratio = _angle_over_sine(step)
    # Li2(1 - z/e^theta) - Li2(1 - z e^theta) = -int y ln y/(1-y) dt with y = z e^t from t = -theta to theta
    y = z * np.exp(theta)
    first = -_integral(y * np.log(y) / (1.0 - y))
    # Li2(1 - e^(2 theta)) - Li2(1 - e^(-2 theta)) = int t e^t/(1 - e^t) dt from -2 theta to 2 theta
    t = 2.0 * theta
    second = 2.0 * _integral(-np.divide(t, -np.expm1(-t), out=np.ones_like(t), where=t != 0.0))
    omega: Floats = (1.0 + step) * ratio * (0.5 * (2.0 * first + second) - np.log(z)) + 1.0
    return omega


def _integral(values: Floats) -> Floats:
    """Over the last axis, for nodes of [-1, 1]; the scale theta is in `ratio`."""
    return np.asarray(values @ _WEIGHTS, dtype=np.float64)
