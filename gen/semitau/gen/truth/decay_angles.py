"""Angles and frames of events given as four-momenta, in any frame: the inverse of `truth_momenta.py`.

Four-momenta are float64 arrays (4, n), order px, py, pz, E, in GeV.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
import numpy.typing as npt

Floats = npt.NDArray[np.float64]


@dataclass(frozen=True)
class DecayAngles:
    """What the density of an event depends on, each (n,) float64; definitions in `amplitudes.py` and `block.py`.

    cos_v, cos_chi, sin_chi are 0, 1, 0 without a D in a charm frame; visible_* are 0 without a tau.
    """

    q2: Floats
    cos_theta: Floats
    cos_v: Floats
    cos_chi: Floats
    sin_chi: Floats
    visible_energy: Floats
    visible_x: Floats
    visible_y: Floats
    visible_z: Floats


def decay_angles(
    parent: Floats, charm: Floats, lepton: Floats, d: Floats | None = None, visible: Floats | None = None
) -> DecayAngles:
    """Angles from the momenta of the B, the charmed meson and lepton of its decay.

    d : the D from a D*, the D or D* from a D**; None where the charm decay is not looked at.
    visible : charged daughter of a tau, else None.
    """
    charm, lepton = to_rest_frame(charm, parent), to_rest_frame(lepton, parent)
    boson = -charm
    boson[3] = invariant_mass(parent) - charm[3]
    q2 = boson[3] ** 2 - np.sum(boson[:3] ** 2, axis=0)
    axis = _unit(boson[:3])
    in_boson = to_rest_frame(lepton, boson)
    n = _unit(in_boson[:3])
    cos_theta = _dot(n, axis)
    across = n - cos_theta * axis
    # x in the plane of W* and lepton; any direction will do for a lepton along the W*
    x_axis = _unit(np.where(np.sum(across**2, axis=0) > 1e-24, across, np.cross(axis, _least(axis), axis=0)))
    y_axis = np.cross(axis, x_axis, axis=0)
    count, none = q2.size, np.zeros(q2.size)
    cos_v, cos_chi, sin_chi = none, np.ones(count), none
    if d is not None:
        direction = _unit(to_rest_frame(to_rest_frame(d, parent), charm)[:3])
        cos_v = -_dot(direction, axis)
        # The lepton has azimuth 0, so chi is minus the azimuth of the D.
        side, up = _dot(direction, x_axis), -_dot(direction, y_axis)
        size = np.hypot(side, up)
        cos_chi = np.where(size > 0.0, side / np.where(size > 0.0, size, 1.0), 1.0)
        sin_chi = np.where(size > 0.0, up / np.where(size > 0.0, size, 1.0), 0.0)
    energy, across_x, across_y, along = none, none, none, none
    if visible is not None:
        in_tau = to_rest_frame(to_rest_frame(to_rest_frame(visible, parent), boson), in_boson)
        towards = _unit(in_tau[:3])
        sine = np.sqrt(np.maximum(1.0 - cos_theta**2, 0.0))
        energy = in_tau[3]
        across_x = _dot(towards, cos_theta * x_axis - sine * axis)
        across_y, along = _dot(towards, y_axis), _dot(towards, n)
    return DecayAngles(q2, cos_theta, cos_v, cos_chi, sin_chi, energy, across_x, across_y, along)


def invariant_mass(momentum: Floats) -> Floats:
    """(n,) GeV; 0 where rounding makes the square negative."""
    return np.asarray(np.sqrt(np.maximum(momentum[3] ** 2 - np.sum(momentum[:3] ** 2, axis=0), 0.0)))


def to_rest_frame(momentum: Floats, frame: Floats) -> Floats:
    """Pure boost of (4, n) momenta into the rest frame of a massive `frame` (4, n)."""
    mass = invariant_mass(frame)
    along = _dot(frame[:3], momentum[:3])
    energy = (frame[3] * momentum[3] - along) / mass
    push = (along / (frame[3] + mass) - momentum[3]) / mass
    return np.concatenate([momentum[:3] + push * frame[:3], energy[None]])


def _dot(a: Floats, b: Floats) -> Floats:
    return np.asarray(np.sum(a * b, axis=0))


def _unit(vector: Floats) -> Floats:
    """Along the vector; along z for the zero vector."""
    size = np.sqrt(_dot(vector, vector))
    z = np.array([[0.0], [0.0], [1.0]])
    return np.where(size > 0.0, vector / np.where(size > 0.0, size, 1.0), z)


def _least(axis: Floats) -> Floats:
    """Unit vectors of the coordinate axes that the given ones have least of: never parallel to them."""
    return np.asarray(np.eye(3)[np.argmin(np.abs(axis), axis=0)].T)
