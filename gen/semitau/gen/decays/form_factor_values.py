"""Form factors at given q2: what a parametrisation returns and what the amplitudes take."""

from __future__ import annotations

from dataclasses import dataclass

from ..truth.kinematics import Floats, kallen


@dataclass(frozen=True)
class PseudoscalarFormFactors:
    """B -> D. Arrays of the shape of q2, no units.

    <D|c gamma^mu b|B> = [(p+k)^mu - (M2-m2)/q2 q^mu] f_plus + (M2-m2)/q2 q^mu f_zero.
    f_T : tensor form factor, if the parametrisation knows it; see `tensor_form_factors` otherwise.
    """

    f_plus: Floats
    f_zero: Floats
    f_T: Floats | None = None


@dataclass(frozen=True)
class VectorFormFactors:
    """B -> D*. Arrays of the shape of q2; V, A0, A1 without units, F1 in GeV2.

    V, A0, A1 as in Z. Phys. C 29 (1985) 637. In place of A2 stands what the longitudinal amplitude needs,
    F1 = [(M2-m2-q2)(M+m) A1 - lambda A2/(M+m)] / 2m, which is finite and well known where A2 is 0/0.
    T1, T2, T3 : tensor form factors, if the parametrisation knows them; see `tensor_form_factors` otherwise.
    """

    V: Floats
    A0: Floats
    A1: Floats
    F1: Floats
    T1: Floats | None = None
    T2: Floats | None = None
    T3: Floats | None = None


def longitudinal(parent_mass: float, charm_mass: float, q2: Floats, A1: Floats, A2: Floats) -> Floats:
    """F1 (GeV2) from A1 and A2."""
    total = parent_mass + charm_mass
    energy_term = parent_mass**2 - charm_mass**2 - q2
    return (energy_term * total * A1 - kallen(parent_mass, charm_mass, q2) * A2 / total) / (2.0 * charm_mass)
