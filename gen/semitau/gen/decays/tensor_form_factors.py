"""Tensor form factors from the vector and axial ones, for the Wilson coefficient of the tensor operator.

Three models, named in `Decay(tensor=...)`:
"LO"   heavy-quark limit: f_T = f_plus, h_T1 = h_A1, h_T2 = h_T3 = 0. Respects T1(0) = T2(0); good at any q2.
"EOM"  equations of motion with quark pole masses (Phys. Rev. D 88 (2013) 094012); singular at q2 -> 0, so for tau only.
"HQE"  what a heavy-quark expansion gives at the order of its other form factors; for sets of that parametrisation.
Definitions of T1, T2, T3 and f_T as in that reference; epsilon_{0123} = +1.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from semitau.core.constants import BOTTOM_POLE_MASS, CHARM_POLE_MASS
from semitau.core.errors import InputError, Problem

from ..truth.kinematics import Floats, kallen, recoil
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors

TENSOR_MODELS = ("LO", "EOM", "HQE")


@dataclass(frozen=True)
class VectorTensorFormFactors:
    """B -> D*; arrays of the shape of q2, no units."""

    T1: Floats
    T2: Floats
    T3: Floats


def pseudoscalar_tensor(
    model: str, values: PseudoscalarFormFactors, parent_mass: float, charm_mass: float, q2: Floats
) -> Floats:
    """f_T of B -> D, no units."""
    if model == "HQE":
        return _known(values.f_T)
    if model == "LO":
        return values.f_plus
    quarks = BOTTOM_POLE_MASS + CHARM_POLE_MASS
    return quarks * (parent_mass + charm_mass) * (values.f_plus - values.f_zero) / q2


def vector_tensor(
    model: str, values: VectorFormFactors, parent_mass: float, charm_mass: float, q2: Floats
) -> VectorTensorFormFactors:
    """T1, T2, T3 of B -> D*."""
    if model == "HQE":
        return VectorTensorFormFactors(_known(values.T1), _known(values.T2), _known(values.T3))
    total, difference = parent_mass + charm_mass, parent_mass - charm_mass
    if model == "LO":
        ratio = charm_mass / parent_mass
        root = np.sqrt(ratio)
        h = values.A1 * (1.0 + ratio) / (root * (recoil(parent_mass, charm_mass, q2) + 2.0))
        return VectorTensorFormFactors(
            T1=(1.0 + ratio) * h / (2.0 * root),
            T2=root * (recoil(parent_mass, charm_mass, q2) + 2.0) * h / (1.0 + ratio),
            T3=(1.0 - ratio) * h / (2.0 * root),
        )
    size = kallen(parent_mass, charm_mass, q2)
    A2 = ((parent_mass**2 - charm_mass**2 - q2) * total * values.A1 - 2.0 * charm_mass * values.F1) * total
    A2 = np.divide(A2, size, out=np.zeros_like(A2), where=size > 0.0)  # only enters with a factor lambda at zero recoil
    A3 = (total * values.A1 - difference * A2) / (2.0 * charm_mass)
    minus = BOTTOM_POLE_MASS - CHARM_POLE_MASS
    return VectorTensorFormFactors(
        T1=(BOTTOM_POLE_MASS + CHARM_POLE_MASS) * values.V / total,
        T2=minus * values.A1 / difference,
        T3=minus * (2.0 * charm_mass / q2) * (values.A0 - A3),
    )


def _known(values: Floats | None) -> Floats:
    if values is None:
        remedy = 'Choose a set with the parametrisation HQE, or tensor="LO".'
        raise InputError(Problem("these form factors have no tensor ones of their own", remedy=remedy))
    return values
