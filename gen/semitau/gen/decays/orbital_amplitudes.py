"""Helicity amplitudes of the currents of B -> D** and of B -> continuum, from the form factors of `isgur_wise.py`."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from ..truth.kinematics import Floats, recoil
from .decay import Decay
from .isgur_wise import broad_doublet, continuum, form_factors_over_function, narrow_doublet


@dataclass(frozen=True)
class OrbitalCurrents:
    """Real parts of the amplitudes H = 2J, each of the shape of q2, GeV: H_+- = transverse -+ parity."""

    transverse: Floats
    parity: Floats
    longitudinal: Floats
    timelike: Floats
    natural_is_vector: bool


def orbital_currents(decay: Decay, q2: Floats, charm_mass: Floats) -> OrbitalCurrents:
    """The currents of `decay`, whose charmed meson is a D** or a continuum of this mass (GeV), at q2 (GeV2)."""
    state = decay.orbital
    if state is None:
        raise ValueError(f"{decay.charm} is not orbitally excited")
    M, m = decay.m_parent, charm_mass
    parameters = decay.model.parameters
    step = recoil(M, m, q2)
    w, u = step + 1.0, np.sqrt(np.maximum(step, 0.0) * (step + 2.0))
    function = continuum if state.continuum else narrow_doublet if state.narrow else broad_doublet
    f1, f2, f3, f_A = form_factors_over_function(state, parameters, step)
    scale, root = np.sqrt(M * m) * state.strength * function(parameters, M, m, q2), np.sqrt(q2)
    natural_is_vector = (state.spin == 1) == (state.parity > 0)
    if state.spin == 0:
        longitudinal = u * (m * f2 + M * f3)
        timelike = 0.5 * ((M - m) * (w + 1.0) * (f2 + f3) - (M + m) * step * (f2 - f3))  # stable at w = 1
        nothing = np.zeros(step.shape)
        return OrbitalCurrents(
            nothing, nothing, scale * longitudinal / root, scale * timelike / root, natural_is_vector
        )
    transverse, parity = scale * f1, scale * u * f_A
    longitudinal = scale * (f1 * (M * w - m) + u * u * (m * f2 + M * f3)) / root
    timelike = scale * u * (M * f1 + (M - m * w) * f2 + (M * w - m) * f3) / root
    if state.spin == 2:
        transverse, parity = transverse * u / np.sqrt(2.0), parity * u / np.sqrt(2.0)
        longitudinal, timelike = longitudinal * np.sqrt(2.0 / 3.0) * u, timelike * np.sqrt(2.0 / 3.0) * u
    return OrbitalCurrents(transverse, parity, longitudinal, timelike, natural_is_vector)
