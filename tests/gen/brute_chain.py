"""Densities of whole chains by Dirac matrices (dirac.py): B -> X l nu, D* -> D pi or D gamma, tau -> l nu nu or pi nu.

Shares no formula with semitau beyond the form factors. Vectors are arrays (E, px, py, pz), in any frame.
"""

from __future__ import annotations

import numpy as np
from semitau.core.constants import BOTTOM_MASS, CHARM_MASS, MASS
from semitau.gen import Decay
from semitau.gen.decays.form_factor_values import VectorFormFactors
from semitau.gen.decays.tensor_form_factors import pseudoscalar_tensor, vector_tensor

from . import dirac
from .dirac import GAMMA, LEFT, METRIC, ONE, RIGHT, bar, boost, dot, slash


def operators(decay: Decay, p: dirac.Point, d: np.ndarray | None = None, photon: bool = False) -> list[np.ndarray]:
    """Lepton-side matrices of every final hadron state; `d` is the D from a D*."""
    M, m, c = decay.m_parent, decay.m_charm, decay.couplings
    q2 = np.array([dot(p.q, p.q).real])
    values = decay.model(M, m, q2)
    if isinstance(values, VectorFormFactors):
        tensor = vector_tensor(decay.tensor, values, M, m, q2)
        size2 = ((M - m) ** 2 - q2) * ((M + m) ** 2 - q2)
        # the definition of F1, solved for A2
        A2 = ((M * M - m * m - q2) * (M + m) * values.A1 - 2 * m * values.F1) * (M + m) / size2
        numbers = {"V": values.V, "A0": values.A0, "A1": values.A1, "A2": A2}
        numbers |= {"T1": tensor.T1, "T2": tensor.T2, "T3": tensor.T3}
        if d is None:
            states = dirac.polarisations(p.charm)
        else:
            states = (dirac.photon_polarisations if photon else dirac.pion_polarisation)(p.charm, d)
        currents = dirac.vector_currents(
            p, states, **{k: float(v[0]) for k, v in numbers.items()}, quarks=BOTTOM_MASS + CHARM_MASS
        )
    else:
        f_T = float(pseudoscalar_tensor(decay.tensor, values, M, m, q2)[0])
        currents = dirac.pseudoscalar_currents(
            p, float(values.f_plus[0]), float(values.f_zero[0]), f_T, BOTTOM_MASS - CHARM_MASS
        )
    return [dirac.lepton_operator(x, c.VL, c.VR, c.SL, c.SR, c.T) for x in currents]


def spin_weights(p: dirac.Point, found: list[np.ndarray]) -> np.ndarray:
    """(4,): |M|² summed over the lepton spin, and this times the polarisation along x', y', z'."""
    total = dirac.squared(p, found)
    return np.array([total, *(2.0 * dirac.squared(p, found, axis) - total for axis in p.axes)])


# Directions whose average integrates polynomials of degree 3 over the sphere exactly: corners of an octahedron.
_OCTAHEDRON = np.concatenate([np.eye(3), -np.eye(3)])


def leptonic_tau(p: dirac.Point, found: list[np.ndarray], visible: np.ndarray) -> float:
    """|M|² with tau -> l nu nu, the neutrinos integrated at fixed momentum of the l.

    Every spin sum is an explicit trace over the whole chain with the tau as a propagator on its mass shell. |M|² is of
    second degree in the direction of one neutrino in the pair's rest frame, so six directions are an exact integral.
    """
    pair = p.lepton - visible
    half = np.sqrt(dot(pair, pair).real) / 2
    total = 0.0
    for axis in _OCTAHEDRON:
        first = boost(half * np.concatenate([[1.0], axis]), pair)
        total += _leptonic_trace(p, found, visible, first, pair - first)
    return total / len(_OCTAHEDRON)


def _leptonic_trace(
    p: dirac.Point, found: list[np.ndarray], visible: np.ndarray, first: np.ndarray, second: np.ndarray
) -> float:
    """first: antineutrino of the l. second: neutrino of the tau. The mass of the l drops out of its chiral trace."""
    on_shell = slash(p.lepton) + p.m_lepton * ONE
    charged = np.array([[np.trace(slash(visible) @ a @ LEFT @ slash(first) @ RIGHT @ b) for b in GAMMA] for a in GAMMA])
    charged = METRIC @ charged @ METRIC
    middle = sum(on_shell @ x @ slash(p.neutrino) @ bar(x) @ on_shell for x in found)
    neutral = np.array([[np.trace(slash(second) @ a @ LEFT @ middle @ RIGHT @ b) for b in GAMMA] for a in GAMMA])
    return float(np.sum(charged * neutral).real)


def pion_tau(p: dirac.Point, found: list[np.ndarray], visible: np.ndarray) -> float:
    """|M|² with tau -> pi nu: the current is the pion momentum."""
    on_shell = slash(p.lepton) + p.m_lepton * ONE
    middle = sum(on_shell @ x @ slash(p.neutrino) @ bar(x) @ on_shell for x in found)
    vertex = slash(visible) @ LEFT
    return float(np.trace(slash(p.lepton - visible) @ vertex @ middle @ RIGHT @ slash(visible)).real)


def angular_point(decay: Decay, q2: float, cos_theta: float) -> dirac.Point:
    """Lepton at azimuth 0."""
    return dirac.point(decay.m_parent, decay.m_charm, decay.m_lepton, q2, float(np.arccos(cos_theta)), 0.0)


def daughter(p: dirac.Point, d_name: str, soft_mass: float, cos_v: float, chi: float) -> np.ndarray:
    """The D of a D* at these angles: theta_V against the flight of the D* (along -z), chi = phi(lepton) - phi(D)."""
    m = float(np.sqrt(dot(p.charm, p.charm).real))
    energy = (m * m + MASS[d_name] ** 2 - soft_mass**2) / (2 * m)
    size, sine = np.sqrt(energy**2 - MASS[d_name] ** 2), np.sqrt(1 - cos_v**2)
    axis = np.array([sine * np.cos(-chi), sine * np.sin(-chi), -cos_v])
    return boost(np.concatenate([[energy], size * axis]), p.charm)
