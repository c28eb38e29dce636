"""Relations that hold exactly between form factors, and the bounds of unitarity, checked for a set.

B -> D: f_plus(0) = f_zero(0). B -> D*: A0(0) = A3(0), which is F1(0) = (M2-m2) A0(0), and F1 = (M-m) f with
f = (M+m) A1 at zero recoil. BGL: sums of squared coefficients up to 1 in each channel (Phys. Rev. D 56 (1997) 6895).
A parametrisation may have a relation built in, or leave it to the numbers, which then have errors.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass

import numpy as np
from semitau.core.constants import MASS

from ..truth.kinematics import Floats
from .bgl import first_longitudinal
from .form_factor_set import FormFactors, FormFactorSet
from .form_factor_values import PseudoscalarFormFactors, VectorFormFactors

EXACT = 1e-9
FAR = 3.0
"""Standard deviations at which a relation counts as broken."""

SMALL = 0.01
"""Relative difference that is no worry, however small its error: printed digits, masses of another year."""


@dataclass(frozen=True)
class Relation:
    """One relation of a set for one transition.

    kind : "equality", where value is left/right - 1, or "bound", where it is a sum that must not pass 1.
    error : one standard deviation of value from the covariance.
    """

    transition: str
    name: str
    kind: str
    value: float
    error: float

    @property
    def status(self) -> str:
        """ "exact", "holds" (within errors, or below 1), or "broken"."""
        if self.kind == "bound":
            return "holds" if self.value <= 1.0 else "broken"
        if abs(self.value) < EXACT:
            return "exact"
        return "holds" if abs(self.value) <= max(SMALL, FAR * self.error) else "broken"


def exact_relations(chosen: FormFactorSet, transition: str) -> tuple[Relation, ...]:
    """Every relation that a set has for "D", "Dst" or "Dss" (which has none), with the masses of B0 decays."""
    member = chosen[transition]
    found = []
    for name, kind, value in _checks(member):
        sides = [
            [value(chosen.along(index, sign, transition)[transition]) for sign in (1.0, -1.0)]
            for index in range(len(member.directions))
        ]
        error = float(np.sqrt(sum((0.5 * (up - down)) ** 2 for up, down in sides)))
        found.append(Relation(transition, name, kind, value(member), error))
    return tuple(found)


Value = Callable[[FormFactors], float]


def _checks(member: FormFactors) -> list[tuple[str, str, Value]]:
    if member.transition == "D":
        checks: list[tuple[str, str, Value]] = [("f+(0) = f0(0)", "equality", _pseudoscalar_at_origin)]
    elif member.transition == "Dst":
        checks = [
            ("A0(0) = A3(0)", "equality", _vector_at_origin),
            ("F1 = (M-m) f at zero recoil", "equality", _vector_at_rest),
        ]
    else:
        return []
    if member.parametrisation == "BGL":
        channels: dict[str, dict[str, tuple[str, ...]]] = {
            "D": {"1-": ("plus",), "0+": ("zero",)},
            "Dst": {"1-": ("g",), "1+": ("f", "F1"), "0-": ("F2",)},
        }
        for channel, stems in channels[member.transition].items():
            checks.append((f"unitarity sum {channel}", "bound", _sum_of_squares(stems)))
    return checks


def _pseudoscalar_at_origin(member: FormFactors) -> float:
    values = member(MASS["B0"], MASS["D+"], np.zeros(1))
    return _relative(values.f_plus, values.f_zero) if isinstance(values, PseudoscalarFormFactors) else np.nan


def _vector_at_origin(member: FormFactors) -> float:
    M, m = MASS["B0"], MASS["D*+"]
    values = member(M, m, np.zeros(1))
    return _relative((M * M - m * m) * values.A0, values.F1) if isinstance(values, VectorFormFactors) else np.nan


def _vector_at_rest(member: FormFactors) -> float:
    M, m = MASS["B0"], MASS["D*+"]
    values = member(M, m, np.array([(M - m) ** 2]))
    return _relative(values.F1, (M * M - m * m) * values.A1) if isinstance(values, VectorFormFactors) else np.nan


def _relative(left: Floats, right: Floats) -> float:
    return float(left[0] / right[0]) - 1.0


def _sum_of_squares(stems: tuple[str, ...]) -> Value:
    def value(member: FormFactors) -> float:
        parameters: Mapping[str, float] = member.parameters
        total = sum(value**2 for name, value in parameters.items() if name.rsplit("_", 1)[0] in stems)
        if "F1" in stems:
            total += first_longitudinal(parameters) ** 2
        return float(total)

    return value
