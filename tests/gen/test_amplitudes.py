"""Helicity amplitudes against brute force with explicit Dirac matrices (dirac.py), point by point, all operators.

Nothing here is statistical: the random points are a fixed set unless SEMITAU_TEST_SEED says otherwise, and the
agreement asked for is that of double precision.
"""

from __future__ import annotations

import os
from collections.abc import Iterator

import numpy as np
import pytest
from semitau.core.constants import BOTTOM_MASS, CHARM_MASS, mass
from semitau.gen.decays import tensor_form_factors
from semitau.gen.decays.amplitudes import (
    HelicityAmplitudes,
    LeptonAmplitudes,
    helicity_amplitudes,
    lepton_amplitudes,
    pseudoscalar_amplitudes,
    vector_amplitudes,
)
from semitau.gen.decays.decay import FAMILIES, Decay, WilsonCoefficients, charm_name
from semitau.gen.decays.form_factor_values import PseudoscalarFormFactors, VectorFormFactors, longitudinal
from semitau.gen.decays.tensor_form_factors import (
    VectorTensorFormFactors,
    pseudoscalar_tensor,
    vector_tensor,
)

from . import dirac

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
POINTS = 12
PRECISION = 1e-10
COUPLINGS = {
    "none": WilsonCoefficients(),
    "VL": WilsonCoefficients(VL=0.3 - 0.4j),
    "VR": WilsonCoefficients(VR=-0.5 + 0.2j),
    "SL": WilsonCoefficients(SL=0.8 - 0.6j),
    "SR": WilsonCoefficients(SR=-0.7 + 0.9j),
    "T": WilsonCoefficients(T=0.25 + 0.35j),
    "all": WilsonCoefficients(VL=0.1 + 0.2j, VR=0.3 - 0.1j, SL=-0.4 + 0.3j, SR=0.5 + 0.6j, T=-0.2 + 0.15j),
}
Table = dict[str, tuple[complex, complex]]


def table(k: LeptonAmplitudes, index: int, theta: float) -> Table:
    """K- and K+ for each charm helicity: the table in the docstring of decays.amplitudes, without the factor N."""
    s, c = np.sin(theta), np.cos(theta)
    return {
        "+": (k.a_plus[index] * (1 - c) / np.sqrt(2), -k.b_plus[index] * s / np.sqrt(2)),
        "-": (k.a_minus[index] * (1 + c) / np.sqrt(2), k.b_minus[index] * s / np.sqrt(2)),
        "0": (-k.a_zero[index] * s, k.t[index] + k.b_zero[index] * c),
    }


def density(amplitudes: list[np.ndarray]) -> np.ndarray:
    """Spin density matrix (h, h') of the lepton, h = +1/2 first, from vectors (M_+, M_-) added incoherently."""
    return sum(np.outer(m, m.conj()) for m in amplitudes)


def by_helicity(entries: Table) -> list[np.ndarray]:
    return [np.array([plus, minus]) for minus, plus in entries.values()]


def to_pion(entries: Table, theta_v: float, chi: float) -> np.ndarray:
    d = {"+": np.sin(theta_v) / np.sqrt(2), "-": -np.sin(theta_v) / np.sqrt(2), "0": np.cos(theta_v)}
    phase = {"+": np.exp(1j * chi), "-": np.exp(-1j * chi), "0": 1.0}
    return np.sqrt(3.0) * sum(phase[l] * d[l] * np.array([plus, minus]) for l, (minus, plus) in entries.items())


def spin_components(rho: np.ndarray) -> np.ndarray:
    """Weights of (spin summed, spin along x', y', z'): tr and (tr + projection)/2."""
    pauli = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]])
    trace = np.trace(rho).real
    return np.array([trace, *((trace + np.trace(rho @ p).real) / 2 for p in pauli)])


def brute(p: dirac.Point, operators: list[np.ndarray]) -> np.ndarray:
    return np.array([dirac.squared(p, operators), *(dirac.squared(p, operators, axis) for axis in p.axes)])


def assert_same(ours: np.ndarray, expected: np.ndarray) -> None:
    """Spin along an axis may nearly cancel in the brute force: rounding is relative to the first entry, the sum."""
    np.testing.assert_allclose(ours, expected, rtol=PRECISION, atol=1e-11 * expected[0])


def points(decay: Decay) -> Iterator[tuple[float, float, float]]:
    rng = np.random.default_rng(SEED)
    low, high = decay.q2_range
    for _ in range(POINTS):
        share, cosine, phi = rng.uniform([0.001, -1, 0], [0.999, 1, 2 * np.pi])
        yield low + share * (high - low), float(np.arccos(cosine)), float(phi)


def operators(currents: list[dirac.Currents], c: WilsonCoefficients) -> list[np.ndarray]:
    return [dirac.lepton_operator(x, c.VL, c.VR, c.SL, c.SR, c.T) for x in currents]


def vector_numbers(decay: Decay, q2: float) -> tuple[VectorFormFactors, VectorTensorFormFactors, dict[str, float]]:
    """Arbitrary form factors, the same for the amplitude and for the brute force."""
    numbers = {"V": 0.71, "A0": 0.63, "A1": 0.52, "A2": 0.58, "T1": 0.69, "T2": 0.44, "T3": -0.37}
    wrapped = {name: np.array([value]) for name, value in numbers.items()}
    f1 = longitudinal(decay.m_parent, decay.m_charm, np.array([q2]), wrapped["A1"], wrapped["A2"])
    values = VectorFormFactors(V=wrapped["V"], A0=wrapped["A0"], A1=wrapped["A1"], F1=f1)
    return values, VectorTensorFormFactors(wrapped["T1"], wrapped["T2"], wrapped["T3"]), numbers


def test_sigma_gamma5_identity() -> None:
    """The brute force itself: sigma^{mn} g5 = -(i/2) eps^{mnab} sigma_ab for eps^{0123} = -1 (handbook identity)."""
    product = dirac.SIGMA @ dirac.GAMMA5
    for i, j in np.ndindex(4, 4):
        np.testing.assert_allclose(dirac.sigma_gamma5(dirac.SIGMA[:, :, i, j]), product[:, :, i, j], atol=1e-15)


@pytest.mark.parametrize("lepton", ["tau", "mu"])
@pytest.mark.parametrize("coupling", COUPLINGS)
def test_pseudoscalar(coupling: str, lepton: str) -> None:
    decay = Decay("B0", "D-", lepton, wilson=COUPLINGS[coupling])
    for q2, theta, phi in points(decay):
        f_plus, f_zero, f_T = 0.83, 0.69, 0.91
        values = PseudoscalarFormFactors(np.array([f_plus]), np.array([f_zero]))
        amplitudes = pseudoscalar_amplitudes(decay, np.array([q2]), values, np.array([f_T]))
        entries = table(amplitudes.with_lepton(decay.m_lepton / np.sqrt(q2)), 0, theta)
        ours = (q2 - decay.m_lepton**2) * spin_components(density(by_helicity({"0": entries["0"]})))
        p = dirac.point(decay.m_parent, decay.m_charm, decay.m_lepton, q2, theta, phi)
        currents = dirac.pseudoscalar_currents(p, f_plus, f_zero, f_T, BOTTOM_MASS - CHARM_MASS)
        assert_same(ours, brute(p, operators(currents, decay.couplings)))


@pytest.mark.parametrize("lepton", ["tau", "mu"])
@pytest.mark.parametrize("coupling", COUPLINGS)
@pytest.mark.parametrize("final", ["summed", "pion", "photon"])
def test_vector(coupling: str, lepton: str, final: str) -> None:
    """B -> D* with the D* summed over, or followed by D pi or D gamma (photon polarisations summed)."""
    decay = Decay("B+", "D*0", lepton, wilson=COUPLINGS[coupling])
    rng = np.random.default_rng(SEED + 1)
    for q2, theta, phi in points(decay):
        theta_v, phi_d = np.arccos(rng.uniform(-1, 1)), rng.uniform(0, 2 * np.pi)
        values, tensor, numbers = vector_numbers(decay, q2)
        amplitudes = vector_amplitudes(decay, np.array([q2]), values, tensor)
        entries = table(amplitudes.with_lepton(decay.m_lepton / np.sqrt(q2)), 0, theta)
        coherent = to_pion(entries, theta_v, phi - phi_d)
        rho = {
            "summed": density(by_helicity(entries)),
            "pion": density([coherent]),
            "photon": 1.5 * density(by_helicity(entries)) - 0.5 * density([coherent]),
        }[final]
        ours = (q2 - decay.m_lepton**2) * spin_components(rho)

        p = dirac.point(decay.m_parent, decay.m_charm, decay.m_lepton, q2, theta, phi)
        n = dirac.direction(np.pi - theta_v, phi_d)  # the D* flies along -z
        daughter, soft = {"photon": (1.86484, 0.0)}.get(final, (1.86484, 0.13498))
        m = decay.m_charm
        energy = (m * m + daughter**2 - soft**2) / (2 * m)
        momentum = dirac.boost(np.concatenate([[energy], np.sqrt(energy**2 - daughter**2) * n]), p.charm)
        polarisation = {
            "summed": dirac.polarisations(p.charm),
            "pion": dirac.pion_polarisation(p.charm, momentum),
            "photon": dirac.photon_polarisations(p.charm, momentum) if final == "photon" else None,
        }[final]
        currents = dirac.vector_currents(p, polarisation, quarks=BOTTOM_MASS + CHARM_MASS, **numbers)
        assert_same(ours, brute(p, operators(currents, decay.couplings)))


def heavy_quark_pseudoscalar(M: float, m: float, q2: np.ndarray) -> PseudoscalarFormFactors:
    """B -> D in the heavy-quark limit, Isgur-Wise function 1 (Phys. Rept. 245 (1994) 259)."""
    r, w = m / M, (M * M + m * m - q2) / (2 * M * m)
    return PseudoscalarFormFactors((1 + r) / (2 * np.sqrt(r)) + 0 * q2, np.sqrt(r) * (w + 1) / (1 + r))


def heavy_quark_vector(M: float, m: float, q2: np.ndarray) -> VectorFormFactors:
    """The same for B -> D*."""
    d = heavy_quark_pseudoscalar(M, m, q2)
    return VectorFormFactors(V=d.f_plus, A0=d.f_plus, A1=d.f_zero, F1=longitudinal(M, m, q2, d.f_zero, d.f_plus))


def heavy_quark_amplitudes(decay: Decay, q2: float) -> HelicityAmplitudes:
    """D and D* in the heavy-quark limit, with the tensor form factors of the package's LO model."""
    M, m, q = decay.m_parent, decay.m_charm, np.array([q2])
    if decay.family == "D":
        values = heavy_quark_pseudoscalar(M, m, q)
        return pseudoscalar_amplitudes(decay, q, values, pseudoscalar_tensor("LO", values, M, m, q))
    vector = heavy_quark_vector(M, m, q)
    return vector_amplitudes(decay, q, vector, vector_tensor("LO", vector, M, m, q))


@pytest.mark.parametrize("coupling", COUPLINGS)
@pytest.mark.parametrize("family", FAMILIES)
def test_heavy_quark_limit(family: str, coupling: str) -> None:
    """Signs of V/A and T/(V-A), and all of D**, from the trace formalism of the heavy-quark limit."""
    c = COUPLINGS[coupling]
    charm = charm_name("B0", family)
    decay = Decay("B0", charm, "tau", wilson=c, charm_mass=mass(charm))
    for q2, theta, phi in points(decay):
        if decay.orbital is None:
            k = heavy_quark_amplitudes(decay, q2).with_lepton(decay.m_lepton / np.sqrt(q2))
            universal = 1.0
        else:
            k = lepton_amplitudes(decay, np.array([q2]))
            parameters = decay.model.parameters
            function = "tau" if decay.orbital.narrow else "zeta"
            step = ((decay.m_parent - decay.m_charm) ** 2 - q2) / (2 * decay.m_parent * decay.m_charm)
            universal = parameters[f"{function}(1)"] * (1 + parameters[f"{function}_slope"] * step)
        entries = table(k, 0, theta)
        ours = (q2 - decay.m_lepton**2) * spin_components(density(by_helicity(entries)))
        p = dirac.point(decay.m_parent, decay.m_charm, decay.m_lepton, q2, theta, phi)
        currents = dirac.heavy_quark_currents(p, dirac.heavy_states(p, family))
        # Scalar currents: quark masses of the package in place of those of the heavy-quark limit.
        minus = (decay.m_parent - decay.m_charm) / (BOTTOM_MASS - CHARM_MASS)
        plus = (decay.m_parent + decay.m_charm) / (BOTTOM_MASS + CHARM_MASS)
        scaled = [
            dirac.Currents(x.vector, x.axial, x.scalar * minus, x.pseudoscalar * plus, x.tensor) for x in currents
        ]
        expected = universal**2 * brute(p, operators(scaled, c))
        assert_same(ours, expected)


def test_tensor_models_agree_in_the_heavy_quark_limit(monkeypatch: pytest.MonkeyPatch) -> None:
    """With quark masses = hadron masses the equations of motion hold exactly there, so EOM = LO."""
    M, m = 5.28, 2.01
    monkeypatch.setattr(tensor_form_factors, "BOTTOM_POLE_MASS", M)
    monkeypatch.setattr(tensor_form_factors, "CHARM_POLE_MASS", m)
    q2 = np.linspace(3.2, 10.6, 9)
    d, dst = heavy_quark_pseudoscalar(M, m, q2), heavy_quark_vector(M, m, q2)
    models = [(pseudoscalar_tensor(name, d, M, m, q2), vector_tensor(name, dst, M, m, q2)) for name in ("LO", "EOM")]
    np.testing.assert_allclose(models[0][0], models[1][0], rtol=1e-9)
    for name in ("T1", "T2", "T3"):
        np.testing.assert_allclose(getattr(models[0][1], name), getattr(models[1][1], name), rtol=1e-9)


def test_tensor_at_zero_q2() -> None:
    """T_+- ~ gap T2 +- sqrt(lambda) T1 over sqrt(q2): T_- stays finite only if T1(0) = T2(0), which is exact."""
    near_zero = helicity_amplitudes(Decay("B0", "D*-", "tau", wilson={"T": 1.0}), np.array([1e-9]))
    assert abs(near_zero.T_minus[0]) < 1e-4 * abs(near_zero.T_plus[0])


@pytest.mark.parametrize("coupling", ["none", "VL"])
def test_left_handed_dominance(coupling: str) -> None:
    """With a right-handed antineutrino the negative D* helicity dominates."""
    q2 = np.linspace(3.2, 10.6, 50)
    k = helicity_amplitudes(Decay("B0", "D*-", "tau", wilson=COUPLINGS[coupling]), q2)
    assert np.all(np.abs(k.J_minus) > np.abs(k.J_plus))


@pytest.mark.parametrize("charm", ["D-", "D*-", "D1(2420)-", "D2*(2460)-", "D0*(2300)-", "D1'(2430)-"])
@pytest.mark.parametrize("lepton", ["e", "mu", "tau"])
def test_end_points_are_finite(charm: str, lepton: str) -> None:
    decay = Decay("B0", charm, lepton)
    low, high = decay.q2_range
    for q2 in (low, np.nextafter(low, high), np.nextafter(high, low), high):
        k = helicity_amplitudes(decay, q2)
        assert all(np.isfinite(getattr(k, name)) for name in k.__dataclass_fields__)
