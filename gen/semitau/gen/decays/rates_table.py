"""Rates of many modes side by side, with the errors and correlations that the covariance of the form factors gives."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, fields, replace

import numpy as np

from ..truth.kinematics import Floats
from .decay import DEFAULT_SETS, LEPTONS, PARENTS, Decay, charm_name
from .exact_relations import Relation, exact_relations
from .form_factor_set import FormFactorSet
from .form_factor_set import form_factors as shipped
from .lepton_couplings import Given, LeptonCouplings
from .rates import Observables, differential_rate, observables, ratio

POINTS = 81
"""q2 values of a spectrum."""

TRANSITIONS = ("D", "Dst", "Dss")


@dataclass(frozen=True)
class ModeRates:
    """One decay: values and one standard deviation of each from the form factors (|V_cb| and lifetimes left out)."""

    decay: Decay
    values: Observables
    errors: Observables


@dataclass(frozen=True)
class RatioRates:
    """One ratio tau over the mean of e and mu, with its form-factor error.

    parent : "B+", "B0", or "mean" of both. charm : the charmed meson, or its family for "mean".
    """

    parent: str
    charm: str
    value: float
    error: float


@dataclass(frozen=True, eq=False)
class Spectrum:
    """d Gamma / d q2 of one decay with its band: arrays (points,); q2 in GeV2, rate and error in GeV^-1."""

    decay: Decay
    q2: Floats
    rate: Floats
    error: Floats


@dataclass(frozen=True, eq=False)
class RatesTable:
    """modes, ratios, spectra : as asked for, families outermost. correlation : (ratios, ratios) of their form-factor
    errors; 0 where different sets of parameters are at work. relations : of every set in use."""

    modes: tuple[ModeRates, ...]
    ratios: tuple[RatioRates, ...]
    spectra: tuple[Spectrum, ...]
    correlation: Floats
    relations: tuple[Relation, ...]


@dataclass(frozen=True)
class _Setting:
    """Everything that rates depend on but the decay."""

    sets: Mapping[str, FormFactorSet]
    couplings: LeptonCouplings

    def decay(self, parent: str, family: str, lepton: str) -> Decay:
        chosen, model = self.sets[transition_of(family)], self.couplings.model(lepton)
        return Decay(parent, charm_name(parent, family), lepton, chosen, self.couplings[lepton], model)

    def ratio(self, parent: str, family: str) -> float:
        chosen, of = self.sets[transition_of(family)], self.couplings
        return ratio(parent, charm_name(parent, family), chosen, of.tau, of.tensor, {"e": of.e, "mu": of.mu})

    def moved(self, transition: str, direction: int, n_sigma: float) -> _Setting:
        changed = self.sets[transition].along(direction, n_sigma, transition)
        moves = self.moved_together(transition)
        return replace(self, sets={name: changed if name in moves else one for name, one in self.sets.items()})

    def moved_together(self, transition: str) -> tuple[str, ...]:
        """Transitions with the same parameters."""
        pair = ("D", "Dst")
        together = transition in pair and self.sets["D"].shared and self.sets["D"] == self.sets["Dst"]
        return pair if together else (transition,)


def transition_of(family: str) -> str:
    """ "D", "Dst" or "Dss", as in the form-factor sets."""
    return {"D": "D", "D*": "Dst"}.get(family, "Dss")


def rates_table(
    charms: Iterable[str] = ("D", "D*"),
    *,
    parents: Iterable[str] = PARENTS,
    leptons: Iterable[str] = LEPTONS,
    form_factors: Mapping[str, FormFactorSet | str] | None = None,
    wilson: Given = None,
    tensor: str = "LO",
    light: Mapping[str, Given] | None = None,
) -> RatesTable:
    """Observables of every mode, the ratio of every pair of parent and charmed meson, spectra of the first parent.

    charms : families, "D", "D*", "D1(2420)" ... form_factors : "D", "Dst", "Dss" -> set, defaults where left out.
    wilson : on the tau only. light : "e", "mu" -> couplings of the decays with that lepton. tensor : of those with
    couplings. InputError for unknown names.

    Errors are linear: half the difference of both sides of each direction of a covariance, in quadrature. D** rows are
    widths from their form factors; `chains` takes their branching fractions from measurements instead.
    """
    charms, parents, leptons = tuple(charms), tuple(parents), tuple(leptons)
    given = {**DEFAULT_SETS, **(form_factors or {})}
    sets = {name: shipped(one) if isinstance(one, str) else one for name, one in given.items()}
    setting = _Setting(sets, LeptonCouplings.of(wilson, tensor, light))
    pairs = [(family, parent) for family in charms for parent in parents]
    decays = [(family, parent, lepton) for family, parent in pairs for lepton in leptons]
    drawn = [(family, lepton) for family in charms for lepton in ("mu", "tau") if lepton in leptons]
    grids = [_grid(setting.decay(parents[0], family, lepton)) for family, lepton in drawn]

    def rows(here: _Setting, within: tuple[str, ...]) -> tuple[Floats, Floats, Floats]:
        """Observables, ratios and spectra; zero where the transition is not within."""
        numbers = [
            list(_numbers(observables(here.decay(parent, family, lepton))))
            if transition_of(family) in within
            else [0.0] * len(fields(Observables))
            for family, parent, lepton in decays
        ]
        ratios = [here.ratio(parent, family) if transition_of(family) in within else 0.0 for family, parent in pairs]
        curves = [
            differential_rate(here.decay(parents[0], family, lepton), q2)
            if transition_of(family) in within
            else np.zeros(POINTS)
            for (family, lepton), q2 in zip(drawn, grids, strict=True)
        ]
        return np.array(numbers), np.array(ratios), np.array(curves)

    values = rows(setting, TRANSITIONS)
    used = dict.fromkeys(setting.moved_together(transition_of(family)) for family in charms)
    changes = [
        tuple(
            0.5 * (up - down) for up, down in zip(*(rows(setting.moved(t[0], i, s), t) for s in (1, -1)), strict=True)
        )
        for t in used
        for i in range(len(setting.sets[t[0]][t[0]].directions))
    ]
    number_errors, ratio_errors, curve_errors = (
        np.sqrt(sum((change[k] ** 2 for change in changes), np.zeros_like(values[k]))) for k in range(3)
    )
    ratios = [
        RatioRates(parent, charm_name(parent, family), float(value), float(error))
        for (family, parent), value, error in zip(pairs, values[1], ratio_errors, strict=True)
    ]
    slopes = np.array([change[1] for change in changes]).reshape(len(changes), len(pairs))
    if len(parents) > 1:
        for k, family in enumerate(charms):
            mean = slopes[:, k * len(parents) : (k + 1) * len(parents)].mean(axis=1)
            value = float(values[1][k * len(parents) : (k + 1) * len(parents)].mean())
            ratios.append(RatioRates("mean", family, value, float(np.sqrt((mean**2).sum()))))
            slopes = np.column_stack([slopes, mean])
    names = dict.fromkeys(t for together in used for t in together)
    charm_transitions = {transition_of(family) for family in charms}
    return RatesTable(
        modes=tuple(
            ModeRates(setting.decay(parent, family, lepton), Observables(*value), Observables(*error))
            for (family, parent, lepton), value, error in zip(
                decays, values[0].tolist(), number_errors.tolist(), strict=True
            )
        ),
        ratios=tuple(ratios),
        spectra=tuple(
            Spectrum(setting.decay(parents[0], family, lepton), q2, rate, error)
            for (family, lepton), q2, rate, error in zip(drawn, grids, values[2], curve_errors, strict=True)
        ),
        correlation=_correlation(slopes.T @ slopes),
        relations=tuple(
            relation
            for name in names
            if name in charm_transitions
            for relation in exact_relations(setting.sets[name], name)
        ),
    )


def _grid(decay: Decay) -> Floats:
    low, high = decay.q2_range
    t = np.linspace(0.0, 1.0, POINTS)
    grid: Floats = low + (high - low) * t * t * (3.0 - 2.0 * t)  # denser at both ends
    return grid


def _numbers(of: Observables) -> Iterator[float]:
    return (getattr(of, field.name) for field in fields(of))


def _correlation(covariance: Floats) -> Floats:
    errors = np.sqrt(np.diag(covariance))
    scale = np.outer(errors, errors)
    correlation: Floats = np.divide(covariance, scale, out=np.eye(len(errors)), where=scale > 0.0)
    return correlation
