"""Rates against textbook formulas, brute force with Dirac matrices, adaptive quadrature, and publications."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from semitau import gen
from semitau.core.constants import ELECTROWEAK_CORRECTION, FERMI_COUPLING, HBAR, LIFETIME, VCB, mass
from semitau.core.errors import InputError
from semitau.gen.decays.amplitudes import helicity_amplitudes
from semitau.gen.decays.decay import FAMILIES, charm_name
from semitau.gen.decays.form_factor_values import VectorFormFactors
from semitau.gen.decays.rates import differential_rates
from semitau.gen.decays.tensor_form_factors import pseudoscalar_tensor, vector_tensor

from . import dirac
from .reference import load

PUBLISHED = load("decays")
STRENGTH = (FERMI_COUPLING * ELECTROWEAK_CORRECTION * VCB) ** 2
COUPLINGS = {"SM": {}, "all": {"VL": 0.1 + 0.2j, "VR": 0.3 - 0.1j, "SL": -0.4 + 0.3j, "SR": 0.5, "T": -0.2 + 0.15j}}


def test_every_reference_has_a_source() -> None:
    for name, known in PUBLISHED.items():
        assert known.source, name
        assert known.recipe, name


def q2_inside(decay: gen.Decay, number: int = 7) -> np.ndarray:
    low, high = decay.q2_range
    return low + (high - low) * np.linspace(0.02, 0.98, number)


def masses(decay: gen.Decay, q2: np.ndarray) -> tuple[float, float, float, np.ndarray]:
    M, m = decay.m_parent, decay.m_charm
    return M, m, m / M, (M * M + m * m - q2) / (2 * M * m)


def test_massless_pseudoscalar_textbook() -> None:
    """G_F^2 V_cb^2/(48 pi^3) (M+m)^2 m^3 (w^2-1)^{3/2} G(w)^2 (Phys. Rept. 245 (1994) 259); here G = V1 of the set."""
    decay = gen.Decay("B0", "D-", "e", "CLN-2021")
    q2 = q2_inside(decay)
    M, m, _, w = masses(decay, q2)
    p = gen.form_factors("CLN-2021")["D"].parameters
    z, rho2 = (np.sqrt(w + 1) - np.sqrt(2)) / (np.sqrt(w + 1) + np.sqrt(2)), p["rho2"]
    g = p["V1(1)"] * (1 - 8 * rho2 * z + (51 * rho2 - 10) * z**2 - (252 * rho2 - 84) * z**3)
    by_w = STRENGTH / (48 * np.pi**3) * (M + m) ** 2 * m**3 * (w * w - 1) ** 1.5 * g**2
    # The electron mass enters as (m_e^2/q2) ~ 1e-6.
    np.testing.assert_allclose(gen.differential_rate(decay, q2), by_w / (2 * M * m), rtol=1e-5)


def test_massless_vector_textbook() -> None:
    """The same for D* (Phys. Rept. 245 (1994) 259 with the ratios R1, R2 of Nucl. Phys. B 530 (1998) 153)."""
    decay = gen.Decay("B0", "D*-", "e", "CLN-2021")
    q2 = q2_inside(decay)
    M, m, r, w = masses(decay, q2)
    p = gen.form_factors("CLN-2021")["Dst"].parameters
    z, rho2 = (np.sqrt(w + 1) - np.sqrt(2)) / (np.sqrt(w + 1) + np.sqrt(2)), p["rho2"]
    h = p["h(1)"] * (1 - 8 * rho2 * z + (53 * rho2 - 15) * z**2 - (231 * rho2 - 91) * z**3)
    R1 = p["R1(1)"] - 0.12 * (w - 1) + 0.05 * (w - 1) ** 2
    R2 = p["R2(1)"] + 0.11 * (w - 1) - 0.06 * (w - 1) ** 2
    transverse = 2 * (1 - 2 * w * r + r * r) / (1 - r) ** 2 * (1 + R1**2 * (w - 1) / (w + 1))
    longitudinal = (1 + (1 - R2) * (w - 1) / (1 - r)) ** 2
    by_w = STRENGTH / (48 * np.pi**3) * m**3 * (M - m) ** 2 * np.sqrt(w * w - 1) * (w + 1) ** 2 * h**2
    by_w = by_w * (transverse + longitudinal)
    np.testing.assert_allclose(gen.differential_rate(decay, q2), by_w / (2 * M * m), rtol=1e-5)


@pytest.mark.parametrize("family", FAMILIES)
@pytest.mark.parametrize("lepton", ["mu", "tau"])
def test_standard_model_closed_form(family: str, lepton: str) -> None:
    """(1 + x^2/2) sum H^2 + (3/2) x^2 H_t^2, the textbook form (Z. Phys. C 46 (1990) 93)."""
    charm = charm_name("B+", family)
    decay = gen.Decay("B+", charm, lepton, charm_mass=mass(charm))
    q2 = q2_inside(decay)
    M, m, _, w = masses(decay, q2)
    k = helicity_amplitudes(decay, q2)
    H = {name: 2 * getattr(k, name).real for name in ("J_plus", "J_minus", "J_zero", "J_t")}
    x2 = decay.m_lepton**2 / q2
    momentum = m * np.sqrt(w * w - 1)
    summed = H["J_plus"] ** 2 + H["J_minus"] ** 2 + H["J_zero"] ** 2
    expected = STRENGTH * momentum * q2 * (1 - x2) ** 2 / (96 * np.pi**3 * M**2)
    expected = expected * ((1 + x2 / 2) * summed + 1.5 * x2 * H["J_t"] ** 2)
    np.testing.assert_allclose(gen.differential_rate(decay, q2), expected, rtol=1e-12)


def brute_force(decay: gen.Decay, q2: float) -> dict[str, float]:
    """The parts of d Gamma/d q2 from Dirac matrices: cos(theta) integrated by a rule that is exact for quadratics."""
    c, q = decay.couplings, np.array([q2])
    M, m = decay.m_parent, decay.m_charm
    values = decay.model(M, m, q)
    momentum = np.sqrt(((M - m) ** 2 - q2) * ((M + m) ** 2 - q2)) / (2 * M)
    # Three-body phase space, d Gamma = |p| (1 - m_l^2/q2) / (256 pi^3 M^2) |A|^2 dq2 dcos, |A|^2 = 8 G_F^2 V_cb^2 Tr.
    factor = 8 * STRENGTH * momentum * (1 - decay.m_lepton**2 / q2) / (256 * np.pi**3 * M**2)
    found = {"total": 0.0, "positive": 0.0, "forward_minus_backward": 0.0}
    nodes, weights = np.polynomial.legendre.leggauss(3)
    for side in (-1, 1):
        for node, weight in zip(0.5 * (nodes + side), 0.5 * weights, strict=True):
            p = dirac.point(M, m, decay.m_lepton, q2, float(np.arccos(node)), 0.4)
            if isinstance(values, VectorFormFactors):
                A2 = (M * M - m * m - q2) * (M + m) * values.A1 - 2 * m * values.F1
                A2 = A2 * (M + m) / (4 * M * M * momentum**2)
                t = vector_tensor(decay.tensor, values, M, m, q)
                numbers = {
                    "V": values.V,
                    "A0": values.A0,
                    "A1": values.A1,
                    "A2": A2,
                    "T1": t.T1,
                    "T2": t.T2,
                    "T3": t.T3,
                }
                numbers = {key: float(value[0]) for key, value in numbers.items()}
                currents = dirac.vector_currents(p, dirac.polarisations(p.charm), quarks=4.18 + 0.92, **numbers)
            else:
                f_T = float(pseudoscalar_tensor(decay.tensor, values, M, m, q)[0])
                f_plus, f_zero = float(values.f_plus[0]), float(values.f_zero[0])
                currents = dirac.pseudoscalar_currents(p, f_plus, f_zero, f_T, 4.18 - 0.92)
            matrices = [dirac.lepton_operator(x, c.VL, c.VR, c.SL, c.SR, c.T) for x in currents]
            total = dirac.squared(p, matrices) * factor * weight
            found["total"] += total
            found["positive"] += dirac.squared(p, matrices, p.axes[2]) * factor * weight
            found["forward_minus_backward"] += side * total
    return found


@pytest.mark.parametrize("charm", ["D0", "D*0"])
@pytest.mark.parametrize("tensor", ["LO", "EOM"])
@pytest.mark.parametrize("coupling", COUPLINGS)
def test_parts_against_brute_force(charm: str, coupling: str, tensor: str) -> None:
    """Prefactor, phase space, helicities and forward-backward, with all operators."""
    decay = gen.Decay("B+", charm, "tau", wilson=COUPLINGS[coupling], tensor=tensor)
    for q2 in q2_inside(decay, 4):
        ours, expected = differential_rates(decay, q2), brute_force(decay, float(q2))
        for name, value in expected.items():
            assert float(getattr(ours, name)) == pytest.approx(value, rel=1e-9)


@pytest.mark.parametrize("charm", ["D-", "D*-", "D1(2420)-"])
@pytest.mark.parametrize("lepton", ["e", "mu", "tau"])
def test_integral_against_adaptive_quadrature(charm: str, lepton: str) -> None:
    """mpmath's tanh-sinh rule, which likes end-point singularities, in pieces around the turn-on above m_lepton^2."""
    decay = gen.Decay("B0", charm, lepton)
    low, high = decay.q2_range
    pieces = [low, *(low + s * (high - low) for s in (1e-7, 1e-5, 1e-3, 0.05)), high]

    def integral(f: object) -> float:
        return float(mpmath.quad(lambda q2: f(float(q2)), pieces))

    rate = integral(lambda q2: float(gen.differential_rate(decay, q2)))
    mean = integral(lambda q2: q2 * float(gen.differential_rate(decay, q2))) / rate
    found = gen.observables(decay)
    assert found.rate == pytest.approx(rate, rel=1e-7)
    assert found.mean_q2 == pytest.approx(mean, rel=1e-7)
    assert found.branching_fraction == pytest.approx(rate * LIFETIME["B0"] / HBAR, rel=1e-7)


def test_outside_the_physical_range() -> None:
    decay = gen.Decay("B0", "D*-", "tau")
    low, high = decay.q2_range
    outside = np.array([-1.0, 0.0, low * (1 - 1e-12), low, high, high + 1e-9, 100.0])
    np.testing.assert_array_equal(gen.differential_rate(decay, outside), 0.0)
    near = gen.differential_rate(decay, np.array([low * (1 + 1e-9), high * (1 - 1e-9)]))
    assert np.all(near > 0)
    assert np.all(near < 1e-3 * gen.differential_rate(decay, np.array([8.0])))


def test_zero_recoil_limits() -> None:
    """At the end point the D* is at rest: no preferred helicity, J_+ = J_- = J_0 and J_t = 0 (rotation invariance)."""
    decay = gen.Decay("B0", "D*-", "tau")
    k = helicity_amplitudes(decay, decay.q2_range[1])
    assert k.J_plus == pytest.approx(k.J_minus, rel=1e-7)
    assert k.J_zero == pytest.approx(k.J_minus, rel=1e-7)
    assert abs(k.J_t) < 1e-6


def test_massless_lepton_limit() -> None:
    """Vector and axial currents make left-handed leptons only; all follows from H_+, H_-, H_0 alone."""
    decay = gen.Decay("B0", "D*-", "e")
    found = gen.observables(decay)
    assert found.tau_polarisation == pytest.approx(-1.0, abs=2e-6)
    q2 = q2_inside(decay)
    k, parts = helicity_amplitudes(decay, q2), differential_rates(decay, q2)
    squares = {name: np.abs(getattr(k, name)) ** 2 for name in ("J_plus", "J_minus", "J_zero")}
    total = sum(squares.values())
    np.testing.assert_allclose(parts.longitudinal / parts.total, squares["J_zero"] / total, rtol=1e-5)
    # d Gamma ~ H_+^2 (1-c)^2 + H_-^2 (1+c)^2 + 2 H_0^2 (1-c^2) (massless closed form, D* decay integrated)
    asymmetry = 0.75 * (squares["J_minus"] - squares["J_plus"]) / total
    np.testing.assert_allclose(parts.forward_minus_backward / parts.total, asymmetry, atol=3e-6)


def mean_ratio(family: str, name: str) -> float:
    return 0.5 * sum(gen.ratio(parent, charm_name(parent, family), name) for parent in ("B+", "B0"))


def form_factor_error(family: str, name: str) -> float:
    """Of the ratio, linear, from the covariance of the set (half the difference of both sides, in quadrature)."""
    transition = {"D": "D", "D*": "Dst"}[family]
    chosen, charm = gen.form_factors(name), charm_name("B0", family)
    sides = [
        [gen.ratio("B0", charm, chosen.along(i, sign, transition=transition)) for sign in (-1.0, 1.0)]
        for i in range(len(chosen[transition].directions))
    ]
    return float(np.sqrt(sum(((up - down) / 2) ** 2 for down, up in sides)))


def test_ratio_is_over_the_mean_of_both_light_leptons() -> None:
    """For D it matters at 0.4%: the muon mode has less phase space."""
    rates = {lepton: gen.observables(gen.Decay("B0", "D-", lepton)).rate for lepton in ("e", "mu", "tau")}
    assert gen.ratio("B0", "D-") == pytest.approx(rates["tau"] / (0.5 * (rates["e"] + rates["mu"])), rel=1e-12)
    assert rates["mu"] / rates["e"] == pytest.approx(0.996, abs=0.001)


def test_ratio_published_with_the_same_parameters() -> None:
    known = PUBLISHED["R_Dst_CLN-2012"]
    # 0.252 in the source rests on masses of its time: one unit of its last digit.
    assert mean_ratio("D*", "CLN-2012") == pytest.approx(known.value, abs=2 * known.last_digit)
    # Its error, 0.003, is nearly all from R0(1) = 1.14(7).
    assert form_factor_error("D*", "CLN-2012") == pytest.approx(known.error, abs=0.001)
    for family, key in (("D", "R_D_BGL-2021"), ("D*", "R_Dst_BGL-2021")):
        lattice = PUBLISHED[key]
        assert mean_ratio(family, "BGL-2021") == pytest.approx(lattice.value, abs=lattice.error / 5)


@pytest.mark.parametrize(
    ("family", "name"), [("D", "CLN-2021"), ("D", "BCL-2021"), ("D", "CLN-2012"), ("D*", "CLN-2021")]
)
def test_ratio_published_by_others(family: str, name: str) -> None:
    known = PUBLISHED[f"R_{'Dst' if family == 'D*' else family}_{name}"]
    error = np.hypot(known.error, form_factor_error(family, name))
    assert mean_ratio(family, name) == pytest.approx(known.value, abs=2 * error)


@pytest.mark.parametrize("name", ["BCL-2021", "BGL-2021", "CLN-2012", "CLN-2021"])
def test_polarisation_of_d(name: str) -> None:
    known = PUBLISHED["P_tau_D"]
    found = gen.observables(gen.Decay("B0", "D-", "tau", name)).tau_polarisation
    assert found == pytest.approx(known.value, abs=known.error)


@pytest.mark.parametrize("name", ["CLN-2012", "CLN-2021"])
def test_polarisations_of_dst(name: str) -> None:
    found = gen.observables(gen.Decay("B0", "D*-", "tau", name))
    for value, known in (
        (found.tau_polarisation, PUBLISHED["P_tau_Dst"]),
        (found.longitudinal_fraction, PUBLISHED["F_L_Dst"]),
    ):
        assert value == pytest.approx(known.value, abs=known.error)


@pytest.mark.parametrize(
    ("key", "parent", "charm"),
    [
        ("BF_B0_D_light", "B0", "D-"),
        ("BF_Bp_D_light", "B+", "D0"),
        ("BF_B0_Dst_light", "B0", "D*-"),
        ("BF_Bp_Dst_light", "B+", "D*0"),
    ],
)
def test_light_branching_fractions(key: str, parent: str, charm: str) -> None:
    known = PUBLISHED[key]
    found = np.mean([gen.observables(gen.Decay(parent, charm, l)).branching_fraction for l in ("e", "mu")])
    error = np.hypot(known.error, 2 * 0.02 * known.value)
    assert found == pytest.approx(known.value, abs=2 * error)


def test_couplings_act_as_they_must() -> None:
    """VL scales every rate by |1+VL|^2 (exact), VR that of B -> D by |1+VR|^2; parity for the scalar ones."""
    plain = gen.ratio("B0", "D*-")
    assert gen.ratio("B0", "D*-", wilson={"VL": 0.1 + 0.3j}) == pytest.approx(plain * abs(1.1 + 0.3j) ** 2, rel=1e-12)
    d = gen.ratio("B0", "D-")
    assert gen.ratio("B0", "D-", wilson={"VR": -0.4j}) == pytest.approx(d * abs(1 - 0.4j) ** 2, rel=1e-12)
    # Scalar operators: B -> D sees SL + SR only, B -> D* sees SR - SL only (parity).
    assert gen.ratio("B0", "D-", wilson={"SL": 0.3, "SR": -0.3}) == pytest.approx(d, rel=1e-12)
    assert gen.ratio("B0", "D*-", wilson={"SL": 0.3, "SR": 0.3}) == pytest.approx(plain, rel=1e-12)


@pytest.mark.parametrize(("charm", "sign"), [("D-", +1), ("D*-", -1)])
def test_tensor_interference(charm: str, sign: int) -> None:
    """C_T > 0 interferes constructively in D and destructively in D* (Phys. Rev. D 88 (2013) 094012)."""
    slope = gen.ratio("B0", charm, wilson={"T": 0.001}) - gen.ratio("B0", charm, wilson={"T": -0.001})
    assert np.sign(slope) == sign


def test_couplings_that_leave_nothing() -> None:
    """VR = -1 cancels the vector current, the only one of B -> D."""
    with pytest.raises(InputError, match=r"B0 -> D- tau nu: has no rate .*cancel"):
        gen.ratio("B0", "D-", wilson={"VR": -1.0})


def test_bad_decays() -> None:
    with pytest.raises(InputError) as caught:
        gen.Decay("B", "D+", "taon", tensor="NLO")
    text = str(caught.value)
    assert all(piece in text for piece in ("no such parent", "no such lepton", "no such tensor model"))
    with pytest.raises(InputError, match=r"B0 has no such charmed meson .*got 'D\+'.*D-, D\*-"):
        gen.Decay("B0", "D+", "tau")
    with pytest.raises(InputError, match=r"no such Wilson coefficient .*got CT.*VL, VR, SL, SR, T"):
        gen.Decay("B0", "D-", "tau", wilson={"CT": 0.1})
    with pytest.raises(InputError, match=r"must be a mapping of names to numbers .*got list"):
        gen.Decay("B0", "D-", "tau", wilson=[0.1])  # type: ignore[arg-type]
    with pytest.raises(InputError, match="must be a finite number"):
        gen.Decay("B0", "D-", "tau", wilson={"T": float("nan")})
    with pytest.raises(InputError, match="does not describe"):
        gen.Decay("B0", "D*-", "tau", form_factors="BCL-2021")
    with pytest.raises(InputError, match="name of a set or a FormFactorSet"):
        gen.Decay("B0", "D*-", "tau", form_factors=3)  # type: ignore[arg-type]
    with pytest.raises(InputError, match="too heavy"):
        gen.Decay("B0", "D0*(2300)-", "tau", charm_mass=3.6)
    with pytest.raises(InputError, match="singular at small q2"):
        gen.Decay("B0", "D-", "mu", wilson={"T": 0.1}, tensor="EOM")


def test_decays_are_values() -> None:
    first = gen.Decay("B0", "D*-", "tau", wilson={"T": 0.1})
    same = gen.Decay("B0", "D*-", "tau", "CLN-2021", gen.WilsonCoefficients(T=0.1))
    assert first == same
    assert hash(first) == hash(same)
    assert first != gen.Decay("B0", "D*-", "tau")
    assert str(first) == "B0 -> D*- tau nu"
