"""Shifts of form-factor parameters in which amplitudes are linear: templates are quadratic functions of them."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from itertools import combinations

import numpy as np

from .amplitudes import helicity_amplitudes
from .decay import Decay, WilsonCoefficients, charm_name
from .form_factor_set import FormFactorSet
from .rates import q2_of

LARGEST_SHIFT = 5.0
"""Standard deviations up to which a coefficient makes sense: beyond, the set itself would be wrong."""

SHIFTS_AT_MOST = 5
"""Of one decay: an event then has 6 · 7/2 = 21 bilinear pieces."""

SHIFTS_AT_MOST_COMPLEX = 2
"""The same with complex couplings, where real and imaginary parts count apart: (2 · 3)² = 36 pieces."""

_LINEAR = 1e-6
"""Curvature over slope, at one standard deviation, that is rounding."""


@dataclass(frozen=True)
class FormFactorShift:
    """A coefficient of templates: parameters of one set move together, in proportion to it.

    transitions : "D", "Dst" or both, if they share their parameters. shift : of each parameter for 1, which is one
    standard deviation. constraint : of the coefficient, 1 for what is independent of all else; None for a parameter
    that correlates with others. label, group : for people, row of the budget.
    """

    name: str
    transitions: tuple[str, ...]
    shift: tuple[tuple[str, float], ...]
    constraint: float | None
    label: str
    group: str


Coefficient = str | FormFactorShift
"""What templates are functions of: a part of a Wilson coefficient of the tau ("Im_T"), or a shift."""


def name_of(coefficient: Coefficient) -> str:
    """As parameter of the fit."""
    return coefficient if isinstance(coefficient, str) else coefficient.name


def unlabelled(coefficient: Coefficient) -> Coefficient:
    """Without what amplitudes do not know of."""
    if isinstance(coefficient, str):
        return coefficient
    return replace(coefficient, name="", label="", group="", constraint=None)


def acts_on(coefficient: Coefficient, decay: Decay) -> bool:
    """Whether amplitudes of the decay depend on it."""
    if isinstance(coefficient, str):
        return decay.lepton == "tau"
    return decay.transition in coefficient.transitions


def shifted_decay(decay: Decay, values: Iterable[tuple[Coefficient, float]]) -> Decay:
    """The decay with its form factors moved; couplings, and shifts of other transitions, do nothing."""
    total: dict[str, float] = {}
    for coefficient, value in values:
        if not isinstance(coefficient, str) and acts_on(coefficient, decay):
            for name, shift in coefficient.shift:
                total[name] = total.get(name, 0.0) + value * shift
    if not any(total.values()):
        return decay
    return replace(decay, form_factors=decay.form_factor_set.shifted(total, decay.transition))


def bent_pairs(
    chosen: Mapping[str, FormFactorSet], shifts: Sequence[FormFactorShift], tensor: str = "LO"
) -> Iterator[tuple[str, str]]:
    """Names of coefficients in whose product, or whose square (twice the same), amplitudes have a term.

    chosen : "D", "Dst" -> set. tensor : model of the tensor form factors.
    """
    found: dict[tuple[str, str], None] = {}
    for transition, charm in (("D", "D"), ("Dst", "D*")):
        mine = [shift for shift in shifts if transition in shift.transitions]
        for parent in ("B0", "B+") if mine else ():
            # Every current is on, so that every form factor counts.
            everything = WilsonCoefficients(SR=0.5, T=0.3)
            home = Decay(parent, charm_name(parent, charm), "tau", chosen[transition], everything, tensor)
            plain = _amplitudes(home)
            ones = {shift.name: _amplitudes(shifted_decay(home, [(shift, 1.0)])) for shift in mine}
            slopes = {name: np.abs(there - plain).max() for name, there in ones.items()}
            for shift in mine:
                twice = _amplitudes(shifted_decay(home, [(shift, 2.0)])) - 2.0 * ones[shift.name] + plain
                if np.abs(twice).max() > _LINEAR * slopes[shift.name]:
                    found[shift.name, shift.name] = None
            for first, second in combinations(mine, 2):
                both = _amplitudes(shifted_decay(home, [(first, 1.0), (second, 1.0)]))
                mixed = both - ones[first.name] - ones[second.name] + plain
                if np.abs(mixed).max() > _LINEAR * max(slopes[first.name], slopes[second.name]):
                    found[first.name, second.name] = None
    yield from found


def _amplitudes(decay: Decay) -> np.ndarray:
    q2 = q2_of(decay, np.linspace(0.05, 0.95, 10))
    return np.stack(list(vars(helicity_amplitudes(decay, q2)).values()))
