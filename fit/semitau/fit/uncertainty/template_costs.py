"""Expected errors as a function of how many events the templates are made of, and how many are needed.

A sample is what one number of events generates: one component or several. With f times its events the variance of its
templates is V/f at the same expectation, so for any factors f_s the fit's relative variance of a bin is
v = Σ_s V_s/(f_s μ²), and with the derivative rows J = dμ/d(parameters) the expected information is

    I(f) = Σ_bins J Jᵀ/(μ + μ² v) + constraints,        error² = diagonal of I⁻¹.

All forms of the likelihood have this expected information at the injected point (light: decomposition.py; the others
have the same variance μ + μ²v of a bin to first order). Nothing is generated for it, and it is no expansion: a bin with
poor templates loses weight as well.

The cost of a sample is the growth of the error over that with exact templates, in quadrature and in units of it,
all other samples being exact:  cost_s² = (error²(f_s) - error²(∞))/error²(∞).  To first order

    error² = error²(∞) + Σ_s A_s/f_s,    A_s = Σ_bins (r·J)² V_s/μ²,    r = row of I(∞)⁻¹,
    f_s = A_s/(cost² error²(∞)).

This is an upper bound, not only an approximation: A_s/f_s is what the weights of exact templates would make of the
noise, and weights that know of it do at least as well (Gauss and Markov: A. C. Aitken, Proc. R. Soc. Edinb. 55 (1935)
42; from memory).

Not in it: noise of the templates in the derivatives J (docs/sizing.md), which toys with new templates see.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import ArrayLike
from scipy import optimize
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.templates import Floats

from ..fitting.algebra import SINGULAR
from ..fitting.model import Model
from .bin_derivatives import bin_derivatives

NEVER = 1e-9
"""Times the first-order number: a sample that costs less than its share even then has no number to ask for."""


@dataclass(frozen=True, eq=False)
class EventNumbers:
    """What the expected errors depend on, at the injected point of a model.

    ratios : the fitted ratios. samples : names.
    expected : (bins,) events. rows : (bins, free) their derivatives in the free parameters. known : (free, free)
    information of the constraints. asked : (ratios, free) derivatives of the ratios.
    variances : (samples, bins) relative variance of a bin's expectation from each sample at factor 1; kept : (bins,)
    that of components of no sample, which no factor changes.
    fluctuation : (samples, bins) variance of that estimate of the variance.
    """

    ratios: tuple[str, ...]
    samples: tuple[str, ...]
    expected: Floats
    rows: Floats
    known: Floats
    asked: Floats
    variances: Floats
    fluctuation: Floats
    kept: Floats

    def errors(self, factors: ArrayLike) -> Floats:
        """(ratios,) expected errors with `factors`, (samples,) or one for all, times today's events; inf is exact."""
        reach = self.reach(factors)
        found: Floats = np.sqrt(np.sum(reach * self.asked.T, axis=0))
        return found

    def parts(self, factors: ArrayLike) -> Floats:
        """(ratios, samples) part of each error, by quadrature: squares add up to the row "template statistics"."""
        return np.sqrt(self._variances_of(factors, self._per_event(factors)))

    def first_order(self) -> Floats:
        """(ratios, samples): A, the variance that each sample adds at factor 1 to first order; it falls as 1/factor."""
        return self._variances_of(np.inf, np.ones(len(self.samples)))

    def first_order_errors(self) -> Floats:
        """(ratios, samples): error of A from the finite numbers of events that the variances are known from."""
        levers = self._levers(np.inf)
        found: Floats = np.sqrt(levers**2 @ self.fluctuation.T)
        return found

    def part_errors(self, factors: ArrayLike) -> Floats:
        """(ratios, samples): errors of `parts` from the same."""
        share = self._per_event(factors)
        levers = self._levers(factors)
        of_square = np.sqrt(levers**2 @ self.fluctuation.T) * share
        parts = self.parts(factors)
        return np.where(parts > 0, of_square / (2.0 * np.where(parts > 0, parts, 1.0)), 0.0)

    def costs(self, factors: ArrayLike) -> Floats:
        """(ratios, samples): growth of the error over exact templates, in quadrature, from each sample alone."""
        each = self._factors(factors)
        exact = self.errors(np.inf)
        found = np.zeros((len(self.ratios), len(self.samples)))
        for place, factor in enumerate(each):
            alone = np.full(each.size, np.inf)
            alone[place] = factor
            found[:, place] = np.sqrt(np.maximum((self.errors(alone) / exact) ** 2 - 1.0, 0.0))
        return found

    def needed_first_order(self, costs: ArrayLike) -> Floats:
        """(ratios, samples) factors at which each sample costs `costs`, (samples,) or one for all, by the formula."""
        wanted = self._wanted(costs)
        exact = self.errors(np.inf)[:, None]
        found: Floats = self.first_order() / (wanted * exact) ** 2
        return found

    def needed(self, costs: ArrayLike) -> Floats:
        """The same from the whole expected error; 0 where no number of events is too few."""
        wanted, first = self._wanted(costs), self.needed_first_order(costs)
        found = np.zeros(first.shape)
        for (ratio, sample), start in np.ndenumerate(first):
            if start > 0.0:
                found[ratio, sample] = self._needed(ratio, sample, float(wanted[sample]), float(start))
        return found

    def _needed(self, ratio: int, sample: int, cost: float, start: float) -> float:
        exact = self.errors(np.inf)[ratio]
        alone = np.full(len(self.samples), np.inf)

        def excess(log_factor: float) -> float:
            alone[sample] = np.exp(log_factor)
            return float((self.errors(alone)[ratio] / exact) ** 2 - 1.0 - cost**2)

        # The first-order number is an upper bound; rounding may leave it an ulp short.
        high, low = np.log(start) + 1e-6, np.log(start) + np.log(NEVER)
        if excess(high) > 0.0:
            return start
        if excess(low) < 0.0:
            return 0.0
        return float(np.exp(optimize.brentq(excess, low, high, xtol=1e-10, rtol=1e-12)))

    def information(self, relative: Floats) -> Floats:
        """(free, free) expected information where the templates' relative variances are `relative`, (bins,)."""
        weights = 1.0 / (self.expected * (1.0 + self.expected * relative))
        found: Floats = (self.rows.T * weights) @ self.rows + self.known
        return found

    def _relative(self, factors: ArrayLike) -> Floats:
        found: Floats = self._per_event(factors) @ self.variances + self.kept
        return found

    def reach(self, factors: ArrayLike) -> Floats:
        """(free, ratios): what a unit of information about each free parameter does to each ratio."""
        relative = self._relative(factors)
        information = self.information(relative)
        scale = 1.0 / np.sqrt(np.diag(information))
        found: Floats = scale[:, None] * np.linalg.solve(
            information * np.outer(scale, scale), scale[:, None] * self.asked.T
        )
        return found

    def _levers(self, factors: ArrayLike) -> Floats:
        """(ratios, bins): what a unit of relative variance of a bin adds to the variance of each ratio."""
        relative = self._relative(factors)
        found: Floats = ((self.rows @ self.reach(factors)) / (1.0 + self.expected * relative)[:, None]).T ** 2
        return found

    def _variances_of(self, factors: ArrayLike, shares: Floats) -> Floats:
        found: Floats = self._levers(factors) @ self.variances.T * shares
        return found

    def _factors(self, factors: ArrayLike) -> Floats:
        found = np.broadcast_to(np.asarray(factors, dtype=np.float64), (len(self.samples),))
        if not (found > 0.0).all():  # NaN is not, either
            raise InputError(Problem("must be positive", "multiples of the generated events", str(found.tolist())))
        return found

    def _per_event(self, factors: ArrayLike) -> Floats:
        found: Floats = 1.0 / self._factors(factors)
        return found

    def _wanted(self, costs: ArrayLike) -> Floats:
        found = np.broadcast_to(np.asarray(costs, dtype=np.float64), (len(self.samples),))
        if not ((found > 0.0) & np.isfinite(found)).all():
            raise InputError(Problem("must be positive and finite", "share of the error", str(found.tolist())))
        return found


def event_numbers(model: Model, samples: Mapping[str, Sequence[str]] | None = None) -> EventNumbers:
    """The expected errors of a model's ratios as a function of the events of its samples.

    samples : name -> components that are generated together; default: every component by itself. Components of no
        sample keep the templates that they have.

    Raises
    ------
    InputError : a component that is not there, or in two samples; no fitted ratio.
    RunError : the expected information is singular, as where two parameters do the same.
    """
    templates = model.templates
    components = [component.name for component in templates.components]
    samples = {name: (name,) for name in components} if samples is None else samples
    _check(samples, components)
    ratios = tuple(name for name in model.ratios if model.parameters[model.index(name)].fixed is None)
    if not ratios:
        raise InputError(Problem("no ratio is fitted: there is no error to judge events by", "fit"))
    values = model.holding(model.injected)
    found = bin_derivatives(model, values)
    size = found.expected.size
    nominal, spread, unsure = (np.zeros((len(components), size)) for _ in range(3))
    for place, name in enumerate(components):
        contents = [_flat(model, name, what)[found.bins] for what in ("nominal", "variance")]
        nominal[place], spread[place] = contents
        # Events of one weight w: contents n w with variance n w², whose own variance is n w⁴.
        weight = contents[1] / np.where(contents[0] != 0.0, np.abs(contents[0]), np.sqrt(contents[1]) + 1e-300)
        unsure[place] = weight**2 * contents[1]
    total = nominal.sum(axis=0)
    safe = np.where(total > 0, total, 1.0)
    members = np.array([[float(c in own) for c in components] for own in samples.values()])
    members = members.reshape(len(samples), len(components))  # perhaps without samples
    variances = np.where(total > 0, members @ spread / safe**2, 0.0)
    fluctuation = np.where(total > 0, members @ unsure / safe**4, 0.0)
    free, through = model.free, model.jacobian(values)
    known = (through.T @ model.precision(values) @ through)[np.ix_(free, free)]
    asked = through[np.ix_(np.array([model.index(name) for name in ratios]), free)]
    kept = np.where(total > 0, (1.0 - members.sum(axis=0)) @ spread / safe**2, 0.0)
    numbers = EventNumbers(
        ratios, tuple(samples), found.expected, found.rows[:, free], known, asked, variances, fluctuation, kept
    )
    _refuse_singular(numbers.information(kept), ratios)
    return numbers


def _refuse_singular(information: Floats, ratios: Sequence[str]) -> None:
    diagonal = np.diag(information)
    scale = 1.0 / np.sqrt(np.where(diagonal > 0.0, diagonal, 1.0))
    if not np.linalg.eigvalsh(information * np.outer(scale, scale))[0] > SINGULAR:
        raise RunError(
            Problem(
                "the expected set does not determine the ratios",
                where=", ".join(ratios),
                remedy="Fix or constrain a parameter that does the same as another.",
            )
        )


def _flat(model: Model, component: str, what: str) -> Floats:
    """(bins,) contents of a component in all categories."""
    parts = []
    for category in model.templates.categories:
        template = model.templates.templates.get((category.name, component))
        parts.append(np.zeros(int(np.prod(category.shape))) if template is None else getattr(template, what).ravel())
    return np.concatenate(parts)


def _check(samples: Mapping[str, Sequence[str]], components: Sequence[str]) -> None:
    seen: dict[str, str] = {}
    problems = []
    for sample, own in samples.items():
        for name in own:
            if name not in components:
                problems.append(
                    Problem("there is no such component", f"sample {sample}", repr(name), ", ".join(components))
                )
            elif name in seen:
                problems.append(Problem(f"component {name} is in two samples", f"{seen[name]} and {sample}"))
            seen[name] = sample
    if problems:
        raise InputError(*problems)
