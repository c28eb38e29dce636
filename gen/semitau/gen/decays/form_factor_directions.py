"""Covariances as independent directions, by variance or by what they do to spectra."""

from __future__ import annotations

from dataclasses import dataclass
from functools import lru_cache
from itertools import accumulate
from typing import Literal

import numpy as np

from ..truth.kinematics import Floats
from .decay import Decay, charm_name
from .form_factor_parameters import NORMALISATIONS
from .form_factor_set import FormFactorSet
from .orbital_states import ORBITAL_STATES
from .rates import differential_rates

Order = Literal["variance", "effect"]

_POINTS, _WEIGHTS = np.polynomial.legendre.leggauss(24)
NEGLIGIBLE = 1e-9
"""Share of the effect below which a direction is the normalisation, or rounding."""


@dataclass(frozen=True, eq=False)
class Directions:
    """Shifts of the parameters for one standard deviation along independent directions, largest first.

    shifts : (d, n), with shifts.T @ shifts the covariance, up to directions that act on nothing.
    shares : (d,) of the variance or the effect; they sum to 1.
    """

    shifts: Floats
    shares: Floats

    def kept(self, keep: float) -> int:
        """How many of the first directions hold this share."""
        for count, held in enumerate(accumulate(self.shares), start=1):
            if held >= keep - 1e-9:
                return count
        return len(self.shares)


@lru_cache(maxsize=32)
def directions(chosen: FormFactorSet, transition: str, order: Order, families: tuple[str, ...] = ()) -> Directions:
    """Directions of the covariance of one transition of a set; of both, if B -> D and B -> D* share their parameters.

    order "variance": eigenvectors of the correlation matrix, all of them, as in `FormFactors.directions`; shares are
    eigenvalues, and 0 for what only normalises. "effect": those that act on the spectra independently of each other;
    the effect of a direction is the information that an event has on it,
    sum of the integrals of (change of s)^2 / s over the normalised spectra s in q2 of mu and tau, longitudinal and
    transverse apart. Normalisations have none and drop out. InputError if the set lacks the transition.

    families : of "Dss", whose spectra count; all resonances if left out.
    """
    member = chosen[transition]
    start = member.directions
    if order == "variance":
        idle = np.array([name in NORMALISATIONS for name in member.names])
        errors = np.where(np.array(member.errors) > 0.0, member.errors, 1.0)
        variances = ((start / errors) ** 2 * ~idle).sum(axis=1)
        return Directions(start, _shares(variances))
    transitions = ("D", "Dst") if chosen.shared else (transition,)
    changes = np.concatenate([_changes(chosen, name, len(start), families) for name in transitions], axis=1)
    effects, turn = np.linalg.eigh(changes @ changes.T)
    effects, turn = effects[::-1], turn[:, ::-1]
    large = effects > NEGLIGIBLE * max(float(effects.sum()), 1e-300)
    shifts = turn.T[large] @ start
    # The largest component counts upwards, so that the sign does not hang on the linear algebra.
    scaled = shifts / np.where(np.array(member.errors) > 0.0, member.errors, 1.0)
    largest = scaled[np.arange(len(shifts)), np.argmax(np.abs(scaled), axis=1)]
    return Directions(shifts * np.sign(largest)[:, np.newaxis], _shares(effects[large]))


def moved(
    chosen: FormFactorSet, transition: str, order: Order, direction: int, n_sigma: float, families: tuple[str, ...] = ()
) -> FormFactorSet:
    """The set moved by `n_sigma` along one of its directions, counted from 0. families : as in `directions`."""
    shift = n_sigma * directions(chosen, transition, order, families).shifts[direction]
    return chosen.shifted(dict(zip(chosen[transition].names, shift.tolist(), strict=True)), transition)


def _shares(sizes: Floats) -> Floats:
    total = float(sizes.sum())
    return sizes / total if total > 0.0 else np.zeros_like(sizes)


def _changes(chosen: FormFactorSet, transition: str, count: int, excited: tuple[str, ...]) -> Floats:
    """(directions, points): half the difference of both sides of each direction, over the root of the spectrum."""
    families = {"D": ("D",), "Dst": ("D*",)}.get(transition, excited or tuple(ORBITAL_STATES))
    found = []
    for family in families:
        for lepton in ("mu", "tau"):
            nominal = _spectrum(Decay("B0", charm_name("B0", family), lepton, chosen))
            for index in range(count):
                sides = [
                    _spectrum(Decay("B0", charm_name("B0", family), lepton, chosen.along(index, sign, transition)))
                    for sign in (1.0, -1.0)
                ]
                change = 0.5 * (sides[0] - sides[1])
                found.append(np.divide(change, np.sqrt(nominal), out=np.zeros_like(change), where=nominal > 0.0))
    rows = np.array(found).reshape(2 * len(families), count, -1)
    return np.concatenate(list(rows), axis=1)


def _spectrum(decay: Decay) -> Floats:
    """Shares of the rate in small intervals of q2, longitudinal ones and then transverse ones."""
    t, weights = 0.5 * (_POINTS + 1.0), 0.5 * _WEIGHTS
    low, high = decay.q2_range
    q2 = low + (high - low) * t * t * (3.0 - 2.0 * t)
    parts = differential_rates(decay, q2)
    both = np.concatenate([parts.longitudinal, parts.total - parts.longitudinal])
    both = both * np.tile(weights * t * (1.0 - t), 2)
    shares: Floats = np.maximum(both, 0.0) / both.sum()
    return shares
