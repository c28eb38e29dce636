"""Decays by brute force: Dirac matrices, polarisation vectors, spin projectors. Shares no formula with semitau.

Conventions: metric (+,-,-,-), gamma5 = i g0 g1 g2 g3, sigma^{mn} = (i/2)[g^m, g^n], epsilon_{0123} = +1. Dirac
representation. Four-vectors are arrays (E, px, py, pz) with upper index.

The hadron side of an amplitude is a list of currents, one for each final hadron state that is summed over incoherently.
`lepton_operator` turns one into the matrix X of ubar(lepton) X v(antineutrino), without the factor 4 G_F/sqrt(2) V_cb.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import permutations

import numpy as np

METRIC = np.diag([1.0, -1.0, -1.0, -1.0])
ONE = np.eye(4, dtype=complex)


def _matrices() -> np.ndarray:
    sigma = np.array([[[0, 1], [1, 0]], [[0, -1j], [1j, 0]], [[1, 0], [0, -1]]], dtype=complex)
    unit, nothing = np.eye(2), np.zeros((2, 2))
    return np.array(
        [np.block([[unit, nothing], [nothing, -unit]])] + [np.block([[nothing, s], [-s, nothing]]) for s in sigma]
    )


GAMMA = _matrices()
GAMMA5 = 1j * GAMMA[0] @ GAMMA[1] @ GAMMA[2] @ GAMMA[3]
LEFT, RIGHT = (ONE - GAMMA5) / 2, (ONE + GAMMA5) / 2
SIGMA = np.array([[0.5j * (a @ b - b @ a) for b in GAMMA] for a in GAMMA])


def _levi_civita() -> np.ndarray:
    tensor = np.zeros((4, 4, 4, 4))
    for p in permutations(range(4)):
        tensor[p] = np.linalg.det(np.eye(4)[list(p)])
    return tensor


EPSILON = _levi_civita()
"""All indices down, epsilon_{0123} = +1; upper indices have the opposite sign."""


def lower(vector: np.ndarray) -> np.ndarray:
    return METRIC @ vector


def dot(a: np.ndarray, b: np.ndarray) -> complex:
    return a @ METRIC @ b


def slash(vector: np.ndarray) -> np.ndarray:
    """gamma^mu v_mu of a vector with upper index."""
    return np.einsum("m,mij->ij", lower(vector), GAMMA)


def bar(matrix: np.ndarray) -> np.ndarray:
    return GAMMA[0] @ matrix.conj().T @ GAMMA[0]


def boost(vector: np.ndarray, frame: np.ndarray) -> np.ndarray:
    """From the rest frame of `frame` (a four-momentum) to where it has that momentum."""
    mass = np.sqrt(dot(frame, frame).real)
    along = (vector[1:] @ frame[1:]) / (frame[0] + mass)
    energy = (vector[0] * frame[0] + vector[1:] @ frame[1:]) / mass
    return np.concatenate([[energy], vector[1:] + frame[1:] * (along + vector[0]) / mass])


def direction(theta: float, phi: float) -> np.ndarray:
    return np.array([np.sin(theta) * np.cos(phi), np.sin(theta) * np.sin(phi), np.cos(theta)])


@dataclass(frozen=True)
class Point:
    """A point of B -> X l nu phase space in the B rest frame, W* along +z.

    axes : three spin four-vectors of the lepton, rest-frame axes x' = theta-hat, y' = phi-hat, z' = direction in the W*
        frame, carried to the B frame through the W* frame.
    """

    parent: np.ndarray
    charm: np.ndarray
    lepton: np.ndarray
    neutrino: np.ndarray
    axes: np.ndarray
    m_lepton: float

    @property
    def q(self) -> np.ndarray:
        return self.parent - self.charm


def point(M: float, m: float, m_lepton: float, q2: float, theta: float, phi: float) -> Point:
    momentum = np.sqrt(((M - m) ** 2 - q2) * ((M + m) ** 2 - q2)) / (2 * M)
    w_boson = np.array([(M * M + q2 - m * m) / (2 * M), 0, 0, momentum])
    parent = np.array([M, 0, 0, 0])
    size = (q2 - m_lepton**2) / (2 * np.sqrt(q2))
    energy = (q2 + m_lepton**2) / (2 * np.sqrt(q2))
    n = direction(theta, phi)
    lepton = np.concatenate([[energy], size * n])
    across = np.array([direction(theta + np.pi / 2, phi), direction(np.pi / 2, phi + np.pi / 2), n])
    axes = np.array([boost(boost(np.concatenate([[0.0], axis]), lepton), w_boson) for axis in across])
    neutrino = np.concatenate([[size], -size * n])
    return Point(parent, parent - w_boson, boost(lepton, w_boson), boost(neutrino, w_boson), axes, m_lepton)


def polarisations(charm: np.ndarray) -> np.ndarray:
    """(3, 4): any orthonormal basis of real polarisation vectors of a massive spin-1 particle."""
    return np.array([boost(np.concatenate([[0.0], axis]), charm) for axis in np.eye(3)])


def tensor_polarisations(charm: np.ndarray) -> np.ndarray:
    """(5, 4, 4): orthonormal basis of real polarisation tensors of spin 2: symmetric, traceless, transverse."""
    x, y, z = polarisations(charm)
    pairs = [np.outer(a, b) + np.outer(b, a) for a, b in ((x, y), (y, z), (z, x))]
    diagonal = [np.outer(x, x) - np.outer(y, y)]
    last = (2 * np.outer(z, z) - np.outer(x, x) - np.outer(y, y)) / np.sqrt(6)
    return np.array([t / np.sqrt(2) for t in pairs + diagonal] + [last])


def pion_polarisation(charm: np.ndarray, momentum: np.ndarray) -> np.ndarray:
    """(1, 4): what stands for e* in D* -> D pi, D with this momentum; its square averages to 1 over the D direction."""
    mass2 = dot(charm, charm)
    vector = -momentum + charm * dot(charm, momentum) / mass2
    return np.sqrt(3.0) * vector[None] / np.sqrt(-dot(vector, vector))


def photon_polarisations(charm: np.ndarray, momentum: np.ndarray) -> np.ndarray:
    """(2, 4): the same for D* -> D gamma, one for each photon polarisation."""
    photon = charm - momentum
    n = photon[1:] / np.linalg.norm(photon[1:])
    first = np.cross(n, [0.3, -0.4, 0.8])
    first /= np.linalg.norm(first)
    found = []
    for transverse in (first, np.cross(n, first)):
        field = np.concatenate([[0.0], transverse])
        omega = np.einsum("mnrs,n,r,s->m", EPSILON, field, photon, momentum)
        found.append(sum(e * (e @ omega) for e in polarisations(charm)))
    norm = sum(-dot(vector, vector) for vector in found) / 2
    return np.sqrt(1.5) * np.array(found) / np.sqrt(norm)


@dataclass(frozen=True)
class Currents:
    """Matrix elements <X|c Gamma b|B> of one final state: vector, axial (4,) and tensor (4, 4) with upper indices."""

    vector: np.ndarray
    axial: np.ndarray
    scalar: complex
    pseudoscalar: complex
    tensor: np.ndarray


def pseudoscalar_currents(p: Point, f_plus: float, f_zero: float, f_T: float, quarks: float) -> list[Currents]:
    """B -> D; `quarks` = m_b - m_c. Definitions as in Phys. Rev. D 88 (2013) 094012."""
    M2, m2, q2 = dot(p.parent, p.parent), dot(p.charm, p.charm), dot(p.q, p.q)
    gap, total = M2 - m2, np.sqrt(M2) + np.sqrt(m2)
    vector = (p.parent + p.charm - p.q * gap / q2) * f_plus + p.q * gap / q2 * f_zero
    antisymmetric = np.outer(p.parent, p.charm) - np.outer(p.charm, p.parent)
    nothing = np.zeros(4)
    return [Currents(vector, nothing, gap / quarks * f_zero, 0.0, -2j * antisymmetric * f_T / total)]


def vector_currents(
    p: Point,
    polarisation: np.ndarray,
    *,
    V: float,
    A0: float,
    A1: float,
    A2: float,
    T1: float,
    T2: float,
    T3: float,
    quarks: float,
) -> list[Currents]:
    """B -> D*, one entry for each row of `polarisation` (which stands for e*); `quarks` = m_b + m_c."""
    M, m, q2 = np.sqrt(dot(p.parent, p.parent)), np.sqrt(dot(p.charm, p.charm)), dot(p.q, p.q)
    A3 = ((M + m) * A1 - (M - m) * A2) / (2 * m)
    gap, summed = M * M - m * m, p.parent + p.charm
    found = []
    for e in polarisation:
        eq = dot(e, p.q)
        vector = METRIC @ np.einsum("mnrs,n,r,s->m", EPSILON, e, p.parent, p.charm) * (-2j * V / (M + m))
        axial = (M + m) * A1 * e - A2 * eq * summed / (M + m) - 2 * m / q2 * (A3 - A0) * eq * p.q
        inner = (
            -np.outer(e, summed) * T1
            + np.outer(e, p.q) * gap / q2 * (T1 - T2)
            + 2 * eq / q2 * np.outer(p.parent, p.charm) * (T1 - T2 - q2 / gap * T3)
        )
        tensor = METRIC @ np.einsum("mnrs,rs->mn", EPSILON, inner) @ METRIC
        found.append(Currents(vector, axial, 0.0, -2 * m / quarks * eq * A0, tensor))
    return found


def heavy_quark_currents(p: Point, final: list[np.ndarray]) -> list[Currents]:
    """Currents in the heavy-quark limit: sqrt(Mm) Tr[ Fbar Gamma H ] for each matrix F of a final state.

    Trace formalism, Phys. Lett. B 264 (1991) 455 and Phys. Rev. D 57 (1998) 308. Universal function = 1. The scalar
    currents obey the equations of motion with m_b = M, m_c = m.
    """
    M, m = np.sqrt(dot(p.parent, p.parent)), np.sqrt(dot(p.charm, p.charm))
    initial = -(ONE + slash(p.parent / M)) / 2 @ GAMMA5
    found = []
    for matrix in final:

        def element(gamma: np.ndarray, matrix: np.ndarray = matrix) -> complex:
            return np.sqrt(M * m) * np.trace(bar(matrix) @ gamma @ initial)

        found.append(
            Currents(
                np.array([element(g) for g in GAMMA]),
                np.array([element(g @ GAMMA5) for g in GAMMA]),
                element(ONE),
                element(GAMMA5),
                np.array([[element(s) for s in row] for row in SIGMA]),
            )
        )
    return found


def heavy_states(p: Point, family: str) -> list[np.ndarray]:
    """Matrices of the final states of `heavy_quark_currents`, one for each spin state of the charmed meson.

    Those of the doublet (D1, D2*) are contracted with the velocity of the B.
    """
    M, m = np.sqrt(dot(p.parent, p.parent)), np.sqrt(dot(p.charm, p.charm))
    v, velocity = p.parent / M, p.charm / m
    project = (ONE + slash(velocity)) / 2
    if family == "D":
        return [-project @ GAMMA5]
    if family == "D*":
        return [project @ slash(e) for e in polarisations(p.charm)]
    if family == "D0*(2300)":
        return [project]
    if family == "D1'(2430)":
        return [project @ GAMMA5 @ slash(e) for e in polarisations(p.charm)]
    if family == "D2*(2460)":
        return [project @ slash(tensor @ lower(v)) for tensor in tensor_polarisations(p.charm)]
    if family == "D1(2420)":
        shape = slash(v) - dot(v, velocity) * ONE
        return [
            -np.sqrt(1.5) * project @ GAMMA5 @ (dot(v, e) * ONE - slash(e) @ shape / 3) for e in polarisations(p.charm)
        ]
    raise ValueError(family)


def lepton_operator(
    c: Currents, VL: complex = 0, VR: complex = 0, SL: complex = 0, SR: complex = 0, T: complex = 0
) -> np.ndarray:
    """X of the amplitude ubar X v for the couplings."""
    tensor_left = 0.5 * (c.tensor - sigma_gamma5(c.tensor))
    current = 0.5 * ((1 + VL + VR) * c.vector - (1 + VL - VR) * c.axial)
    scalar = 0.5 * ((SL + SR) * c.scalar + (SR - SL) * c.pseudoscalar)
    lowered = METRIC @ tensor_left @ METRIC
    return (slash(current) + scalar * ONE + T * np.einsum("mn,mnij->ij", lowered, SIGMA)) @ LEFT


def sigma_gamma5(tensor: np.ndarray) -> np.ndarray:
    """<c sigma^{mn} gamma5 b> from <c sigma^{mn} b>, both with upper indices."""
    upper = -EPSILON  # raising four indices multiplies by the determinant of the metric
    return -0.5j * np.einsum("mnab,ab->mn", upper, METRIC @ tensor @ METRIC)


def squared(p: Point, operators: list[np.ndarray], spin: np.ndarray | None = None) -> float:
    """Sum over hadron states of |amplitude|^2; for lepton spin along the four-vector `spin`, or summed over it."""
    projector = slash(p.lepton) + p.m_lepton * ONE
    if spin is not None:
        projector = projector @ (ONE + GAMMA5 @ slash(spin)) / 2
    total = sum(np.trace(projector @ x @ slash(p.neutrino) @ bar(x)) for x in operators)
    return float(np.real(total))
