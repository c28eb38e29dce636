"""Rates of many modes side by side, with the errors that the covariance of the form factors gives them."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator, Mapping
from dataclasses import dataclass, fields

import numpy as np

from ..truth.kinematics import Floats
from .decay import DEFAULT_SETS, LEPTONS, PARENTS, Decay, WilsonCoefficients, charm_name
from .form_factor_set import FormFactorSet
from .form_factor_set import form_factors as shipped
from .rates import Observables, observables, ratio


@dataclass(frozen=True)
class ModeRates:
    """One decay: values and one standard deviation of each from the form factors (|V_cb| and lifetimes left out)."""

    decay: Decay
    values: Observables
    errors: Observables


@dataclass(frozen=True)
class RatioRates:
    """One ratio tau over the mean of e and mu, with its form-factor error."""

    parent: str
    charm: str
    value: float
    error: float


@dataclass(frozen=True)
class RatesTable:
    modes: tuple[ModeRates, ...]
    ratios: tuple[RatioRates, ...]


def rates_table(
    charms: Iterable[str] = ("D", "D*"),
    *,
    parents: Iterable[str] = PARENTS,
    leptons: Iterable[str] = LEPTONS,
    form_factors: Mapping[str, FormFactorSet | str] | None = None,
    wilson: WilsonCoefficients | Mapping[str, complex] | None = None,
    tensor: str = "LO",
) -> RatesTable:
    """Observables of every mode and the ratio of every pair of parent and charmed meson.

    charms : families, "D", "D*", "D1(2420)" ... form_factors : "D", "Dst", "Dss" -> set, defaults where left out.
    wilson, tensor : on the tau only. InputError for unknown names.

    D** rows are leading-order widths; `chains` takes their branching fractions from measurements instead.
    """
    parents, leptons = tuple(parents), tuple(leptons)
    modes, ratios = [], []
    for family in charms:
        transition = {"D": "D", "D*": "Dst"}.get(family, "Dss")
        chosen = (form_factors or {}).get(transition, DEFAULT_SETS[transition])
        one_set = shipped(chosen) if isinstance(chosen, str) else chosen
        for parent in parents:
            charm = charm_name(parent, family)
            for lepton in leptons:
                couplings, model = (wilson, tensor) if lepton == "tau" else (None, "LO")
                modes.append(_mode(Decay(parent, charm, lepton, one_set, couplings, model)))

            def of_set(varied: FormFactorSet, parent: str = parent, charm: str = charm) -> Floats:
                return np.array([ratio(parent, charm, varied, wilson, tensor)])

            error = _error(of_set, one_set, transition)
            ratios.append(RatioRates(parent, charm, float(of_set(one_set)[0]), float(error[0])))
    return RatesTable(tuple(modes), tuple(ratios))


def _mode(decay: Decay) -> ModeRates:
    def of_set(varied: FormFactorSet) -> Floats:
        changed = Decay(decay.parent, decay.charm, decay.lepton, varied, decay.couplings, decay.tensor)
        return np.array(list(_numbers(observables(changed))))

    error = _error(of_set, decay.form_factor_set, decay.transition)
    return ModeRates(decay, observables(decay), Observables(*map(float, error)))


def _numbers(of: Observables) -> Iterator[float]:
    return (getattr(of, field.name) for field in fields(of))


def _error(of_set: Callable[[FormFactorSet], Floats], chosen: FormFactorSet, transition: str) -> Floats:
    """Half the difference of both sides of each direction of the covariance, in quadrature."""
    total = np.zeros_like(of_set(chosen))
    for index in range(len(chosen[transition].directions)):
        up, down = (of_set(chosen.along(index, side, transition)) for side in (1.0, -1.0))
        total += (0.5 * (up - down)) ** 2
    error: Floats = np.sqrt(total)
    return error
