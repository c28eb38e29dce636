"""Real and imaginary parts of Wilson coefficients as real numbers, and quadratic forms in them.

Amplitudes are linear in the coefficients C, so rates and event densities are quadratic forms in the real vector
(1, c_1, ..., c_k): f(c) = sum over i <= j of c_i c_j f_ij with c_0 = 1.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import fields, replace
from types import MappingProxyType

import numpy as np
from semitau.core.quadratic import QuadraticForm, monomials, pairs_of

from .decay import WilsonCoefficients

LARGEST: Mapping[str, float] = MappingProxyType({"VL": 2.0, "VR": 2.0, "SL": 4.0, "SR": 4.0, "T": 1.0})
"""Size up to which a coefficient makes sense. Beyond, the rate of at least one of the two modes is an order of
magnitude above the Standard Model's (own figures: rates.py), which no measurement of R leaves room for."""

IMAGINARY = "Im_"


def part_of(name: str) -> tuple[str, complex]:
    """ "SR" is ("SR", 1), "Im_SR" is ("SR", 1j)."""
    return (name.removeprefix(IMAGINARY), 1j) if name.startswith(IMAGINARY) else (name, 1.0)


def value_of(couplings: WilsonCoefficients, name: str) -> float:
    """The real number that `name` stands for."""
    coefficient, unit = part_of(name)
    value: complex = getattr(couplings, coefficient)
    return value.imag if unit == 1j else value.real


def with_values(couplings: WilsonCoefficients, values: Mapping[str, float]) -> WilsonCoefficients:
    """The couplings with these real and imaginary parts replaced."""
    changed = {field.name: complex(getattr(couplings, field.name)) for field in fields(couplings)}
    for name, value in values.items():
        coefficient, unit = part_of(name)
        old = changed[coefficient]
        changed[coefficient] = complex(old.real, value) if unit == 1j else complex(value, old.imag)
    return replace(couplings, **changed)


def label_of(name: str) -> str:
    """For pictures and tables: "Re C_SR", "Im C_SR"."""
    coefficient, unit = part_of(name)
    return f"{'Im' if unit == 1j else 'Re'} C_{coefficient}"


def quadratic_form(
    function: Callable[[WilsonCoefficients], float], couplings: WilsonCoefficients, names: Sequence[str]
) -> QuadraticForm:
    """The coefficients f_ij of a function that is quadratic in the named parts; others stay at `couplings`."""
    return form_through(lambda values: function(with_values(couplings, values)), names)


def form_through(function: Callable[[dict[str, float]], float], names: Sequence[str]) -> QuadraticForm:
    """The same of a function that is quadratic in named values.

    Evaluates it at as many points as there are coefficients, and solves for them.
    """
    points = _points(len(names))
    values = [function(dict(zip(names, point, strict=True))) for point in points.tolist()]
    solved = np.linalg.solve(np.stack([monomials(point) for point in points]), np.array(values))
    return dict(zip(pairs_of(names), solved.tolist(), strict=True))


def _points(number: int) -> np.ndarray:
    """(n (n+3)/2 + 1, n): the origin, one step to both sides of each axis, and one along each pair of axes."""
    unit = 0.5 * np.eye(number)
    across = [unit[i] + unit[j] for i in range(number) for j in range(i + 1, number)]
    return np.array([np.zeros(number), *unit, *-unit, *across]).reshape(-1, number)
