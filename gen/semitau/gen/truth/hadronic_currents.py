"""Hadronic currents of tau -> pi pi0 nu and tau -> 3 pi nu, and the line shapes that follow from them.

Model of Z. Phys. C 48 (1990) 445. Two pions: J ~ F(s) (q1 - q2). Three pions: a1 -> rho pi, both ways with the rho,
J ~ A(Q²) [F(s2) (q1 - q3) + F(s1) (q2 - q3)], transverse to Q; q3 is the pion unlike the other two, s1 = (q2 + q3)²,
s2 = (q1 + q3)². F is the pion's vector form factor: rho(770) and a broad rho(1450) with energy-dependent widths. A is
the a1 with the width that this current itself gives it. Numbers of the fit from memory.
"""

from __future__ import annotations

from functools import lru_cache
from typing import NamedTuple

import numpy as np
import numpy.typing as npt
from semitau.core.compiled import inlined, kernel
from semitau.core.constants import MASS

from .alias import interval_table

Floats = npt.NDArray[np.float64]

TAU_MASS = MASS["tau"]
PION, NEUTRAL_PION = MASS["pi+"], MASS["pi0"]

RHO_MASS, RHO_WIDTH = 0.773, 0.145  # GeV
SECOND_RHO_MASS, SECOND_RHO_WIDTH, SECOND_RHO_SHARE = 1.370, 0.510, -0.145
A1_MASS, A1_WIDTH = 1.251, 0.599

LINE_INTERVALS = 256
_GAUSS = 64
_ROWS = 32
"""Values of Q² done at a time, so that the arrays stay in the cache of the processor."""


@inlined
def _resonance(s: float, mass: float, width: float) -> tuple[float, float]:
    """P-wave Breit-Wigner with energy-dependent width, 1 at s = 0 apart from the width: real and imaginary part.

    The division is Smith's (Comm. ACM 5 (1962) 435), by the larger part, with a choice instead of a branch, so that
    loops become SIMD code.
    """
    four = 4.0 * PION * PION
    ratio = max(s - four, 0.0) / (mass * mass - four)
    real = mass * mass - s
    imaginary = 0.0 - width * mass * mass / np.sqrt(s) * ratio * np.sqrt(ratio)
    is_real = abs(real) >= abs(imaginary)
    large, small = (real, imaginary) if is_real else (imaginary, real)
    share = small / large
    scale, part = large + small * share, mass * mass * share
    return (mass * mass if is_real else part) / scale, (0.0 - part if is_real else -(mass * mass)) / scale


@inlined
def pion_form_factor(s: float) -> complex:
    """F at a squared pair mass s (GeV², one number)."""
    first_real, first_imaginary = _resonance(s, RHO_MASS, RHO_WIDTH)
    second_real, second_imaginary = _resonance(s, SECOND_RHO_MASS, SECOND_RHO_WIDTH)
    real = (first_real + SECOND_RHO_SHARE * second_real) / (1.0 + SECOND_RHO_SHARE)
    imaginary = (first_imaginary + SECOND_RHO_SHARE * second_imaginary) / (1.0 + SECOND_RHO_SHARE)
    return real + 1j * imaginary  # type: ignore[no-any-return]


def form_factors(s: Floats) -> npt.NDArray[np.complex128]:
    """F for an array of s; the shape of s."""
    flat = np.ascontiguousarray(s, dtype=np.float64).ravel()
    values = np.empty(flat.size, dtype=np.complex128)
    _fill_form_factors(flat, values)
    return values.reshape(np.shape(s))


@kernel
def _fill_form_factors(s: Floats, out: npt.NDArray[np.complex128]) -> None:
    for i in range(s.size):
        out[i] = pion_form_factor(s[i])


def breakup2(s: Floats, one: float, other: float) -> Floats:
    """Squared momentum (GeV²) of particles of these masses in the rest frame of a pair of squared mass s."""
    return np.maximum((s - (one + other) ** 2) * (s - (one - other) ** 2), 0.0) / (4.0 * s)


# --- tau -> pi pi0 nu -----------------------------------------------------------------------------------------------


def pair_density(s: Floats) -> Floats:
    """Unnormalised d Gamma / ds of tau -> pi pi0 nu: (m² - s)² (m² + 2 s) k³ |F|² / s^(3/2), s in GeV²."""
    m2 = TAU_MASS**2
    momentum2 = breakup2(s, PION, NEUTRAL_PION)
    density: Floats = (m2 - s) ** 2 * (m2 + 2.0 * s) * (momentum2 / s) ** 1.5 * np.abs(form_factors(s)) ** 2
    return density


def pair_range() -> tuple[float, float]:
    """Limits of s, GeV²."""
    return (PION + NEUTRAL_PION) ** 2, TAU_MASS**2


# --- tau -> 3 pi nu -------------------------------------------------------------------------------------------------


def triple_range(like: float, unlike: float) -> tuple[float, float]:
    """Limits of Q², GeV². like : mass of the two identical pions; unlike : of the third."""
    return (2.0 * like + unlike) ** 2, TAU_MASS**2


def current2(Q2: Floats, s1: Floats, s2: Floats, like: float, unlike: float) -> Floats:
    """|J|² in the rest frame of the three pions, without A; GeV². Arrays that broadcast."""
    root = np.sqrt(Q2)
    e1, e2 = (Q2 + like**2 - s1) / (2.0 * root), (Q2 + like**2 - s2) / (2.0 * root)
    square1, square2 = e1**2 - like**2, e2**2 - like**2
    square3 = (root - e1 - e2) ** 2 - unlike**2
    dot = 0.5 * (square3 - square1 - square2)
    # q1 - q3 = 2 q1 + q2, q2 - q3 = 2 q2 + q1 in this frame
    first, second = 4.0 * square1 + square2 + 4.0 * dot, 4.0 * square2 + square1 + 4.0 * dot
    mixed = 2.0 * square1 + 2.0 * square2 + 5.0 * dot
    f1, f2 = form_factors(s1), form_factors(s2)
    value: Floats = np.abs(f2) ** 2 * first + np.abs(f1) ** 2 * second + 2.0 * (f1 * f2.conj()).real * mixed
    return value


def dalitz_range(Q2: Floats, s2: Floats, like: float, unlike: float) -> tuple[Floats, Floats]:
    """Limits of s1 = (q2 + q3)² at given Q² and s2 = (q1 + q3)²."""
    root = np.sqrt(s2)
    e3 = (s2 - like**2 + unlike**2) / (2.0 * root)
    e2 = (Q2 - s2 - like**2) / (2.0 * root)
    p3, p2 = np.sqrt(np.maximum(e3**2 - unlike**2, 0.0)), np.sqrt(np.maximum(e2**2 - like**2, 0.0))
    return (e2 + e3) ** 2 - (p2 + p3) ** 2, (e2 + e3) ** 2 - (p2 - p3) ** 2


@lru_cache(maxsize=4)
def _triple_grid(like: float, unlike: float) -> tuple[Floats, Floats, Floats]:
    """Q², the integral of |J|² over the Dalitz plot, and its largest value there, at the nodes of the line shape."""
    low, high = triple_range(like, unlike)
    Q2 = np.linspace(low, high, 2 * LINE_INTERVALS + 1)
    points, weights = np.polynomial.legendre.leggauss(_GAUSS)
    half = 0.5 * (points + 1.0)
    s_low, s_high = (like + unlike) ** 2, (np.sqrt(Q2) - like) ** 2
    s2 = s_low + (s_high - s_low)[:, None] * half
    first, last = dalitz_range(Q2[:, None], s2, like, unlike)
    area = 0.25 * (s_high - s_low)[:, None] * (last - first)
    integral, most = np.empty(Q2.size), np.empty(Q2.size)
    for begin in range(0, Q2.size, _ROWS):
        here = slice(begin, begin + _ROWS)
        s1 = first[here, :, None] + (last - first)[here, :, None] * half
        values = current2(Q2[here, None, None], s1, s2[here, :, None], like, unlike)
        integral[here] = np.einsum("qij,qi,i,j->q", values, area[here], weights, weights)
        most[here] = values.max(axis=(1, 2))
    return Q2, np.maximum(integral, 0.0), most


def triple_width(Q2: Floats, like: float, unlike: float) -> Floats:
    """Running of the a1 width: |J|² over three-body phase space, ~ 1/Q² times the Dalitz integral."""
    nodes, integral, _ = _triple_grid(like, unlike)
    return np.asarray(np.interp(Q2, nodes, integral / nodes))


def triple_density(Q2: Floats, like: float, unlike: float) -> Floats:
    """Unnormalised d Gamma / dQ² of tau -> 3 pi nu: (m² - Q²)² (m² + 2 Q²) / Q⁴ |A|² times the Dalitz integral."""
    nodes, integral, _ = _triple_grid(like, unlike)
    m2 = TAU_MASS**2
    at_peak = triple_width(np.array(A1_MASS**2), PION, PION)
    width = A1_MASS * A1_WIDTH * triple_width(Q2, PION, PION) / at_peak
    shape = A1_MASS**4 / ((A1_MASS**2 - Q2) ** 2 + width**2)
    density: Floats = (m2 - Q2) ** 2 * (m2 + 2.0 * Q2) / Q2**2 * shape * np.interp(Q2, nodes, integral)
    return density


@lru_cache(maxsize=4)
def triple_bounds(like: float, unlike: float) -> Floats:
    """(257,) bound of |J|² by interval of the line shape: largest at its nodes, with 5% for what lies between."""
    most = _triple_grid(like, unlike)[2]
    bounds = np.maximum.reduce([most[:-2:2], most[1:-1:2], most[2::2]])
    return np.asarray(1.05 * np.append(bounds, bounds[-1]))


class HadronTable(NamedTuple):
    """What the kernel needs of a tau that gives several pions.

    pions : 2, 3, or 0 for another decay. low, span : of their squared mass, GeV². Masses in GeV, in the order of the
    rows LEPTON, PARTNER1, PARTNER2; 0 if absent. odd : place of the pion unlike the other two, 0 to 2.
    like, unlike : mass of the identical pions and of the odd one. line (256, 3) : of the squared mass, for
    `draw_position`; bounds (257,) : of |J|² by its position.
    """

    pions: int
    low: float
    span: float
    first_mass: float
    second_mass: float
    third_mass: float
    odd: int
    like: float
    unlike: float
    line: Floats
    bounds: Floats


@lru_cache(maxsize=8)
def hadron_table(tau_to: str | None) -> HadronTable:
    """Table of tau -> "rho", "a1" or "a1_1prong"; an empty one for other decays."""
    if tau_to == "rho":
        low, high = pair_range()
        line = interval_table(lambda u: pair_density(low + (high - low) * u), LINE_INTERVALS)
        return HadronTable(2, low, high - low, PION, NEUTRAL_PION, 0.0, 0, 0.0, 0.0, line, np.zeros(1))
    if tau_to not in ("a1", "a1_1prong"):
        return HadronTable(0, 0.0, 0.0, 0.0, 0.0, 0.0, 0, 0.0, 0.0, np.zeros((1, 3)), np.zeros(1))
    one_prong = tau_to == "a1_1prong"
    like, unlike = (NEUTRAL_PION, PION) if one_prong else (PION, PION)
    low, high = triple_range(like, unlike)
    line = interval_table(lambda u: triple_density(low + (high - low) * u, like, unlike), LINE_INTERVALS)
    masses = (unlike, like, like) if one_prong else (like, like, unlike)
    bounds = triple_bounds(like, unlike)
    return HadronTable(3, low, high - low, *masses, 0 if one_prong else 2, like, unlike, line, bounds)
