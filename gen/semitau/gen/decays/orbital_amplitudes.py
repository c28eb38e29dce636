"""Currents of B -> D** at leading order in 1/m: Phys. Rev. D 57 (1998) 308.

For a spin-1 state v, v' are the four-velocities, e the polarisation and
<V_mu>/sqrt(Mm) = f1 e*_mu + (f2 v_mu + f3 v'_mu)(e*.v),  <A_mu>/sqrt(Mm) = i f_A epsilon_{mu e* v v'}
(V and A change places for D2*, whose polarisation tensor contracted with v is a spin-1 vector with Clebsch-Gordan
factors).
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..truth.kinematics import Floats, recoil
from .decay import Decay
from .isgur_wise import broad_doublet, narrow_doublet


@dataclass(frozen=True)
class OrbitalCurrents:
    """Real parts of the amplitudes H = 2J, each of the shape of q2, GeV: H_+- = transverse -+ parity."""

    transverse: Floats
    parity: Floats
    longitudinal: Floats
    timelike: Floats
    natural_is_vector: bool


def orbital_currents(decay: Decay, q2: Floats) -> OrbitalCurrents:
    """The currents of `decay`, whose charmed meson must be a D**, at q2 (GeV2)."""
    state = decay.orbital
    if state is None:
        raise ValueError(f"{decay.charm} is not orbitally excited")
    M, m = decay.m_parent, decay.m_charm
    parameters = decay.model.parameters
    step = recoil(M, m, q2)
    w, u = step + 1.0, np.sqrt(np.maximum(step, 0.0) * (step + 2.0))
    function = (narrow_doublet if state.narrow else broad_doublet)(parameters, M, m, q2)
    scale, root = np.sqrt(M * m) * function, np.sqrt(q2)
    if state.spin == 0:
        nothing = np.zeros(q2.shape)
        return OrbitalCurrents(
            nothing, nothing, scale * (m - M) * u / root, -scale * (M + m) * step / root, natural_is_vector=False
        )
    if state.spin == 2:
        f1, f2, f3, f_A = -(1.0 + w), np.zeros(q2.shape), np.ones(q2.shape), -np.ones(q2.shape)
    elif state.narrow:
        norm = 1.0 / np.sqrt(6.0)
        f1, f2, f3, f_A = -norm * step * (w + 1.0), np.full(q2.shape, -3.0 * norm), norm * (w - 2.0), -norm * (w + 1.0)
    else:
        f1, f2, f3, f_A = step, np.zeros(q2.shape), -np.ones(q2.shape), np.ones(q2.shape)
    transverse, parity = scale * f1, scale * u * f_A
    longitudinal = scale * (f1 * (M * w - m) + u * u * (m * f2 + M * f3)) / root
    timelike = scale * u * (M * f1 + (M - m * w) * f2 + (M * w - m) * f3) / root
    if state.spin == 2:
        transverse, parity = transverse * u / np.sqrt(2.0), parity * u / np.sqrt(2.0)
        longitudinal, timelike = longitudinal * np.sqrt(2.0 / 3.0) * u, timelike * np.sqrt(2.0 / 3.0) * u
    return OrbitalCurrents(transverse, parity, longitudinal, timelike, natural_is_vector=state.spin == 1)
