"""What more data would bring: expected errors by source, and the significance of a deviation, against their amount.

Everything is from expected sets, without toys: counts equal the expectation, so that a fit returns what went in with
the median error, and the growth q of -2 ln L at another value gives the median significance (G. Cowan, K. Cranmer,
E. Gross, O. Vitells, EPJC 71 (2011) 1554). What an experiment will see fluctuates about it: q then follows the
non-central chi^2 distribution with the expected q as its non-centrality (A. Wald, Trans. AMS 54 (1943) 426).
"""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from functools import partial

import numpy as np
from scipy import optimize, stats
from semitau.core.errors import InputError, Problem, RunError
from semitau.core.templates import TemplateSet

from ..averages.combination import lowest_point
from ..averages.compatibility import standard_deviations
from ..averages.input_vector import Floats
from ..fitting.model import Model
from ..fitting.newton import maximise
from .curves import Conditional
from .decomposition import STATISTICAL, TEMPLATES, Budget, budget
from .enlarged import enlarged

EVIDENCE, DISCOVERY = 3.0, 5.0
"""Standard deviations that are called evidence and discovery; common practice."""

JOINT = "together"


@dataclass(frozen=True)
class Deviation:
    """A true value that differs from what it is compared with, at one amount of data.

    growth : of -2 ln L with the ratios where they are compared, expected. sigmas : the two-sided Gaussian deviation of
        the same p-value, the median of what will be seen.
    """

    growth: float
    degrees_of_freedom: int
    sigmas: float

    def chance(self, level: float) -> float:
        """Probability to see at least `level` standard deviations, two-sided."""
        needed = stats.chi2.isf(2.0 * stats.norm.sf(level), self.degrees_of_freedom)
        return float(stats.ncx2.sf(needed, self.degrees_of_freedom, max(self.growth, 1e-12)))


@dataclass(frozen=True)
class Amount:
    """What `factor` times the data bring: ratio -> Budget; ratio (and "together", for several) -> Deviation."""

    factor: float
    budgets: Mapping[str, Budget]
    deviations: Mapping[str, Deviation]


@dataclass(frozen=True)
class Reach:
    """Expected errors and significance against the amount of data.

    amounts : in increasing order.
    walls : ratio -> (factor at which all other sources together weigh as much as the finite data, the largest other
        source there); the factor is None if it lies outside of the amounts, the source then that of the last one.
    needed : ratio or "together" -> standard deviations -> factor at which they are expected; None if outside of the
        amounts.
    """

    amounts: tuple[Amount, ...]
    true: Mapping[str, float]
    against: Mapping[str, tuple[float, float]]
    walls: Mapping[str, tuple[float | None, str]]
    needed: Mapping[str, Mapping[float, float | None]]


def reach(
    templates: TemplateSet,
    factors: Sequence[float],
    *,
    true: Mapping[str, float] | None = None,
    against: Mapping[str, tuple[float, float]] | None = None,
    make: Callable[[TemplateSet], Model] = Model,
    grows: bool = False,
    report: Callable[[str, int, int | None], None] | None = None,
) -> Reach:
    """Expected errors and significance for these multiples of the data of the templates.

    true : ratio -> its true value; default: that of the templates. against : ratio -> (value, error) to compare with;
    without it there is no significance. make : the model of a template set. grows : generated events grow with the
    data; else they stay as many as they are.

    Raises
    ------
    InputError : factors that are not positive, fewer than two, ratios that are not fitted.
    RunError : a fit that fails.
    """
    sizes = sorted({float(factor) for factor in factors})
    if len(sizes) < 2:
        raise InputError(Problem("needs at least two amounts of data", "reach", str(len(sizes))))
    true, against = dict(true or {}), dict(against or {})
    model = make(templates)
    own = (model.parameters[model.index(name)] for name in model.ratios)
    fitted = [ratio.name for ratio in own if ratio.fixed is None and ratio.function is None]
    unknown = sorted({*true, *against} - set(fitted))
    if unknown:
        raise InputError(Problem("is no fitted ratio", "reach", ", ".join(unknown), ", ".join(fitted)))

    compared = {name: (name,) for name in against} | ({JOINT: tuple(against)} if len(against) > 1 else {})

    def expected_with(factor: float) -> _Expected:
        return _Expected(make(enlarged(templates, factor, generated=factor if grows else 1.0)), true)

    def deviation(factor: float, label: str) -> float:
        expected = expected_with(factor)
        return expected.deviation({name: against[name] for name in compared[label]}).sigmas

    amounts = []
    for done, factor in enumerate(sizes, 1):
        expected = expected_with(factor)
        found = {
            label: expected.deviation({name: against[name] for name in names}) for label, names in compared.items()
        }
        amounts.append(Amount(factor, budget(expected.model, expected.result), found))
        if report is not None:
            report("amounts of data", done, len(sizes))
    levels = (EVIDENCE, DISCOVERY)
    needed = {
        label: {level: _needed(amounts, label, level, partial(deviation, label=label)) for level in levels}
        for label in compared
    }
    walls = {name: _wall(amounts, name) for name in amounts[0].budgets}
    return Reach(tuple(amounts), true, against, walls, needed)


class _Expected:
    """The fit to the expected set of a model with true ratios."""

    def __init__(self, model: Model, true: Mapping[str, float]) -> None:
        values = model.values(true)
        self.model, self.data = model, model.expected_data(values)
        self.result = maximise(model, self.data, values)
        if not self.result.valid:
            raise RunError(*(self.result.reasons or (Problem("the fit to the expected set failed", "reach"),)))

    def deviation(self, compared: Mapping[str, tuple[float, float]]) -> Deviation:
        """Growth of -2 ln L where the ratios fit what they are compared with, within its own errors."""
        names = list(compared)
        conditional = Conditional(self.model, self.data, names, self.result)
        values, widths = np.array(list(compared.values())).T
        loose = widths > 1e-6 * np.array([self.result.error(name) for name in names])

        def height(pulls: Floats) -> float:
            point = values.copy()
            point[loose] += widths[loose] * pulls
            conditional.back()
            found = conditional.height(*point.tolist())
            if not np.isfinite(found):
                shown = ", ".join(f"{name} = {value:.4g}" for name, value in zip(names, point, strict=True))
                raise RunError(Problem("the fit with held ratios failed", "reach", shown))
            return found + float((pulls**2).sum())

        if loose.sum() == 1:  # faster than the general search
            along = optimize.minimize_scalar(lambda pull: height(np.array([pull])), (-1.0, 1.0), tol=1e-4)
            growth = float(along.fun)
        else:
            growth = lowest_point(height, np.zeros(int(loose.sum())), close=1e-2, flat=1e-5)[1]
        growth = max(growth, 0.0)
        return Deviation(growth, len(names), standard_deviations(growth, len(names)))


def _needed(amounts: Sequence[Amount], name: str, level: float, deviation: Callable[[float], float]) -> float | None:
    """Factor at which `level` standard deviations are expected. deviation : what is expected at any factor."""
    sigmas = [amount.deviations[name].sigmas for amount in amounts]
    above = [place for place, value in enumerate(sigmas) if value >= level]
    if not above or above[0] == 0:
        return None
    low, high = (np.log(amounts[place].factor) for place in (above[0] - 1, above[0]))
    found = optimize.brentq(lambda x: deviation(float(np.exp(x))) - level, low, high, xtol=1e-3)
    return float(np.exp(found))


def _wall(amounts: Sequence[Amount], name: str) -> tuple[float | None, str]:
    balance = []
    for amount in amounts:
        split = amount.budgets[name]
        rest = float(np.hypot(split.systematic, split.rows[TEMPLATES]))
        balance.append(np.log(max(rest, 1e-300) / split.rows[STATISTICAL]))
    crossing = next((k for k in range(1, len(balance)) if balance[k - 1] < 0.0 <= balance[k]), None)
    place = len(balance) - 1 if crossing is None else crossing
    others = {source: error for source, error in amounts[place].budgets[name].rows.items() if source != STATISTICAL}
    largest = max(others, key=lambda source: others[source])
    if crossing is None:
        return None, largest
    logs = [np.log(amounts[k].factor) for k in (crossing - 1, crossing)]
    share = -balance[crossing - 1] / (balance[crossing] - balance[crossing - 1])
    return float(np.exp(logs[0] + share * (logs[1] - logs[0]))), largest
