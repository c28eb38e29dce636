"""Heavy-quark expansion: traces of explicit Dirac matrices, Luke's theorem, equations of motion, closed forms."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import MASS
from semitau.core.errors import InputError
from semitau.gen.decays import heavy_quark
from semitau.gen.decays.form_factor_values import PseudoscalarFormFactors, VectorFormFactors
from semitau.gen.decays.heavy_quark import ALPHA_S, over_leading, subleading
from semitau.gen.decays.heavy_quark_matching import matching

from . import dirac

B, D, DST = MASS["B0"], MASS["D+"], MASS["D*+"]
SET = gen.form_factors("HQE-2021")
PARAMETERS = SET["D"].parameters
AT_REST = np.zeros(1)


def q2_at(w: float, m: float) -> np.ndarray:
    return np.array([B * B + m * m - 2 * B * m * w])


def traced(w: float, m: float, *, vector: bool) -> list[dirac.Currents]:
    """Currents over xi from traces of wave functions with their 1/m parts (Phys. Rept. 245 (1994) 259).

    H = P_+ L_+ + P_- L_-, where for 0-: L_+ = L1, L_- = L4, for 1-: L_+ = L2 e + L3 e.v', L_- = L5 e + L6 e.v'.
    """
    step = np.array([w - 1.0])
    L, C = subleading(PARAMETERS, step), matching(step, subleading(PARAMETERS, step).z)
    a = ALPHA_S / np.pi
    point = dirac.point(B, m, 0.1, float(q2_at(w, m)[0]), 0.3, 0.2)
    v, u = point.parent / B, point.charm / m
    one, sv, su = dirac.ONE, dirac.slash(v), dirac.slash(u)
    plus, minus = (one + sv) / 2, (one - sv) / 2
    l1, l2, l3, l4, l5, l6 = (float(x[0]) for x in (L.L1, L.L2, L.L3, L.L4, L.L5, L.L6))
    initial = -plus @ dirac.GAMMA5
    correction = -(plus * l1 + minus * l4) @ dirac.GAMMA5
    forward, back = (one + su) / 2, (one - su) / 2
    states = []
    if vector:
        for e in dirac.polarisations(point.charm):
            se, ev = dirac.slash(e), dirac.dot(e, v)
            states.append((-forward @ se, -forward @ (l2 * se + l3 * ev * one) - back @ (l5 * se + l6 * ev * one)))
    else:
        states.append((forward @ dirac.GAMMA5, (forward * l1 + back * l4) @ dirac.GAMMA5))

    def element(final: np.ndarray, shift: np.ndarray, tree: np.ndarray, loop: np.ndarray) -> complex:
        leading = np.trace(dirac.bar(final) @ (tree + a * loop) @ initial)
        broken = np.trace(dirac.bar(shift) @ tree @ initial) * L.charm
        broken += np.trace(dirac.bar(final) @ tree @ correction) * L.bottom
        return np.sqrt(B * m) * (leading + broken)

    found = []
    for final, shift in states:
        vectors, axials, tensors = np.zeros(4, complex), np.zeros(4, complex), np.zeros((4, 4), complex)
        for i in range(4):
            loop = C.V1[0] * dirac.GAMMA[i] + (C.V2[0] * v[i] + C.V3[0] * u[i]) * one
            vectors[i] = element(final, shift, dirac.GAMMA[i], loop)
            loop = (C.A1[0] * dirac.GAMMA[i] + (C.A2[0] * v[i] + C.A3[0] * u[i]) * one) @ dirac.GAMMA5
            axials[i] = element(final, shift, dirac.GAMMA[i] @ dirac.GAMMA5, loop)
            for j in range(4):
                loop = C.T1[0] * dirac.SIGMA[i, j]
                loop = loop + 1j * C.T2[0] * (v[i] * dirac.GAMMA[j] - v[j] * dirac.GAMMA[i])
                loop = loop + 1j * C.T3[0] * (u[i] * dirac.GAMMA[j] - u[j] * dirac.GAMMA[i])
                tensors[i, j] = element(final, shift, dirac.SIGMA[i, j], loop)
        found.append(dirac.Currents(vectors, axials, 0.0, 0.0, tensors))
    return found


def scale(w: float, m: float, *, vector: bool) -> float:
    """xi times what normalises the set at zero recoil."""
    step = np.array([w - 1.0])
    xi = heavy_quark._leading(PARAMETERS, step)[0]
    origin = over_leading(subleading(PARAMETERS, AT_REST), AT_REST)
    if vector:
        return float(xi * PARAMETERS["h(1)"] / origin.A1[0])
    r = D / B
    return float(xi * PARAMETERS["V1(1)"] / (origin.plus[0] - (1 - r) / (1 + r) * origin.minus[0]))


@pytest.mark.parametrize("w", [1.05, 1.3, 1.55])
def test_pseudoscalar_against_traces(w: float) -> None:
    q2 = q2_at(w, D)
    values = SET["D"](B, D, q2)
    assert isinstance(values, PseudoscalarFormFactors)
    assert values.f_T is not None
    point = dirac.point(B, D, 0.1, float(q2[0]), 0.3, 0.2)
    numbers = float(values.f_plus[0]), float(values.f_zero[0]), float(values.f_T[0])
    (ours,) = dirac.pseudoscalar_currents(point, *numbers, 3.26)
    (expected,) = traced(w, D, vector=False)
    factor = scale(w, D, vector=False)
    np.testing.assert_allclose(ours.vector, factor * expected.vector, rtol=1e-10, atol=1e-10)
    np.testing.assert_allclose(ours.tensor, factor * expected.tensor, rtol=1e-10, atol=1e-10)


@pytest.mark.parametrize("w", [1.05, 1.3, 1.5])
def test_vector_against_traces(w: float) -> None:
    q2 = q2_at(w, DST)
    values = SET["Dst"](B, DST, q2)
    assert isinstance(values, VectorFormFactors)
    square = (B * B - DST * DST - q2) ** 2 - 4 * DST**2 * q2
    A2 = ((B * B - DST**2 - q2) * (B + DST) * values.A1 - 2 * DST * values.F1) * (B + DST) / square
    point = dirac.point(B, DST, 0.1, float(q2[0]), 0.3, 0.2)
    given = {"V": values.V, "A0": values.A0, "A1": values.A1, "A2": A2}
    given |= {"T1": values.T1, "T2": values.T2, "T3": values.T3}
    numbers = {name: float(value[0]) for name, value in given.items() if value is not None}
    ours = dirac.vector_currents(point, dirac.polarisations(point.charm), quarks=5.1, **numbers)
    factor = scale(w, DST, vector=True)
    for mine, expected in zip(ours, traced(w, DST, vector=True), strict=True):
        for name in ("vector", "axial", "tensor"):
            found, wanted = getattr(mine, name), factor * getattr(expected, name)
            np.testing.assert_allclose(found, wanted, rtol=1e-9, atol=1e-9, err_msg=name)


def test_luke_and_normalisation() -> None:
    """At zero recoil h_+ and h_A1 have no 1/m correction (Phys. Lett. B 252 (1990) 447), whatever the parameters."""
    extreme = {**PARAMETERS, "chi2(1)": 0.7, "chi3_slope": -1.3, "eta(1)": 2.0, "chi2_slope": 3.0, "eta_slope": -2.0}
    bare = over_leading(subleading(extreme, AT_REST), AT_REST, coupling=0.0)
    assert bare.plus[0] == bare.A1[0] == bare.T1[0] == 1.0
    # Heavy-quark limit: heavy quarks leave one function.
    heavy = {**extreme, "m_b": 1e7, "m_b-m_c": 5e6}
    step = np.array([0.0, 0.2, 0.5])
    parts = subleading(heavy, step)
    parts = type(parts)(**{**vars(parts), "charm": 0.0, "bottom": 0.0})
    limit = over_leading(parts, step, coupling=0.0)
    for name in ("plus", "T", "V", "A1", "A3", "T1"):
        np.testing.assert_array_equal(getattr(limit, name), 1.0)
    for name in ("minus", "A2", "T2", "T3"):
        np.testing.assert_array_equal(getattr(limit, name), 0.0)


def test_zero_recoil_matching() -> None:
    """eta_V, eta_A in closed form: Nucl. Phys. B 371 (1992) 149, Phys. Rev. D 39 (1989) 1370."""
    for z in (0.2, 0.278, 0.6):
        C, log = matching(AT_REST, z), np.log(z)
        eta_vector = -(1 + z) / (1 - z) * log - 2.0
        assert C.V1[0] + C.V2[0] + C.V3[0] == pytest.approx(eta_vector, abs=1e-12)
        assert C.A1[0] == pytest.approx(eta_vector - 2.0 / 3.0, abs=1e-12)


def test_matching_obeys_the_equations_of_motion() -> None:
    """q_mu V^mu = (m_b - m_c) S and q_mu A^mu = -(m_b + m_c) P between quarks; pole masses in MS-bar ones (textbook,
    m_pole = m(mu) [1 + alpha_s/pi (4/3 + 2 ln(mu/m))]). Ties seven functions of w with each other."""
    step = np.array([0.0, 1e-12, 1e-6, 0.01, 0.1, 0.3, 0.55])
    for z in (0.2, 0.278, 0.4):
        C, w, log = matching(step, z), 1 + step, np.log(z)
        scalar = C.V1 + ((1 - z * w) * C.V2 + (w - z) * C.V3) / (1 - z)
        np.testing.assert_allclose(C.S, scalar + 4 / 3 + (1 + z) / (1 - z) * log, atol=1e-11)
        pseudoscalar = C.A1 - ((1 - z * w) * C.A2 + (w - z) * C.A3) / (1 + z)
        np.testing.assert_allclose(C.P, pseudoscalar + 4 / 3 + (1 - z) / (1 + z) * log, atol=1e-11)


@pytest.mark.parametrize("step", [1e-10, 1e-3, 0.3])
def test_dilogarithms(step: float) -> None:
    """S holds Omega(w) with its dilogarithms: against mpmath at 40 digits, near zero recoil too."""
    z = 0.278
    with mpmath.workdps(40):
        w = 1 + mpmath.mpf(step)
        root = mpmath.sqrt(w * w - 1)
        r = mpmath.log(w + root) / root
        y, x = mpmath.mpf(z), w + root

        def li(argument: object) -> object:
            return mpmath.polylog(2, argument)

        omega = w / (2 * root) * (2 * li(1 - y / x) - 2 * li(1 - y * x) + li(1 - x**2) - li(1 - x**-2))
        omega += 1 - w * r * mpmath.log(y)
        gap = w - (y + 1 / y) / 2
        expected = (2 * y * gap * omega - (w - 1) * (y + 1) ** 2 * r + (y * y - 1) * mpmath.log(y)) / (3 * y * gap)
        expected = float(mpmath.re(expected))
    assert matching(np.array([step]), z).S[0] == pytest.approx(expected, rel=1e-12)


def test_normalisation_of_theory() -> None:
    """V1(1) = 1.054(8) on the lattice (Phys. Rev. D 92 (2015) 034506); order 1/m and alpha_s alone must come near: what
    is left out is of order (Lambda/2m_c)^2, some 3%. h_A1(1) = 0.966 at this order (Phys. Rev. D 95 (2017) 115008)."""
    origin = over_leading(subleading(PARAMETERS, AT_REST), AT_REST)
    r = D / B
    assert origin.plus[0] - (1 - r) / (1 + r) * origin.minus[0] == pytest.approx(1.054, abs=0.03)
    assert origin.A1[0] == pytest.approx(0.966, abs=0.003)


def test_tensor_model() -> None:
    """The expansion's own tensor form factors come near the heavy-quark limit, 1/m away: T1(0) = T2(0) is exact."""
    at = SET["Dst"](B, DST, np.zeros(1))
    assert isinstance(at, VectorFormFactors)
    assert at.T1 is not None
    assert at.T2 is not None
    assert at.T1[0] == pytest.approx(at.T2[0], rel=1e-12)
    with pytest.raises(InputError, match=r"needs form factors of that kind .*CLN-2021.*HQE-2021"):
        gen.Decay("B0", "D*-", "tau", "CLN-2021", tensor="HQE")
    for charm in ("D-", "D*-"):
        limit, own = (gen.ratio("B0", charm, "HQE-2021", {"T": 0.1}, model) for model in ("LO", "HQE"))
        assert own == pytest.approx(limit, rel=0.15)
        assert own != limit


def ratios(w: float, **changes: float) -> tuple[float, float]:
    """R1 = h_V/h_A1 and R2 = (h_A3 + r h_A2)/h_A1 with the quark masses of the source."""
    parameters = {**PARAMETERS, "m_b": 4.71, "m_b-m_c": 3.40, "chi2(1)": 0.0, "chi2_slope": 0.0, "chi3_slope": 0.0}
    parameters = {**parameters, "eta(1)": 0.0, "eta_slope": 0.0, **changes}
    step = np.array([w - 1.0])
    h = over_leading(subleading(parameters, step), step)
    # To first order in 1/m and alpha_s, as the source has it.
    R1 = h.V - h.A1 + 1.0
    R2 = h.A3 + DST / B * h.A2 - h.A1 + 1.0
    return float(R1[0]), float(R2[0])


def test_ratios_at_zero_recoil() -> None:
    """Phys. Rev. D 95 (2017) 115008, from memory, to the last digit there:

    R1(1) = 1.34 - 0.12 eta, R2(1) = 0.98 - 0.42 eta - 0.54 chi2, R1'(1) = -0.15 + 0.06 eta - 0.12 eta',
    R2'(1) = 0.01 - 0.54 chi2' + 0.21 eta - 0.42 eta'. The source also expands the 1S mass in alpha_s, which lowers the
    binding energy by 0.07 GeV in the constants alone: 0.07 (1/2m_c + 1/2m_b) = 0.034 in R1, half of it in its slope.
    """
    h = 1e-4

    def both(**changes: float) -> np.ndarray:
        at, near = (np.array(ratios(w, **changes)) for w in (1.0, 1.0 + h))
        return np.concatenate([at, (near - at) / h])

    plain = both()
    np.testing.assert_allclose(plain, [1.34 + 0.034, 0.98, -0.15 - 0.017, 0.01], atol=0.02)
    for name, expected in (
        ("eta(1)", [-0.12, -0.42, 0.06, 0.21]),
        ("eta_slope", [0.0, 0.0, -0.12, -0.42]),
        ("chi2(1)", [0.0, -0.54, 0.0, 0.0]),
        ("chi2_slope", [0.0, 0.0, 0.0, -0.54]),
    ):
        change = both(**{name: 1.0}) - plain
        compared = np.abs(expected) > 0
        np.testing.assert_allclose(change[compared], np.array(expected)[compared], atol=0.008, err_msg=name)


def test_hyperfine_pattern() -> None:
    """chi_3 is the chromomagnetic term within one meson: 3 for spin 0, -1 for spin 1, as in the mass splitting."""
    parts = subleading({**PARAMETERS, "chi2(1)": 0.0, "chi2_slope": 0.0}, np.array([0.1, 0.4]))
    np.testing.assert_allclose(parts.L1, -3.0 * parts.L2, rtol=1e-13)
    np.testing.assert_allclose(parts.L2, -4.0 * PARAMETERS["chi3_slope"] * np.array([0.1, 0.4]), rtol=1e-13)
