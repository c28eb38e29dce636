"""The model of a fit: parameters, expectations, and the data that go with them."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass
from difflib import get_close_matches
from math import isfinite

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats, TemplateSet

from .data import Data, Source, read_data
from .interpolation import bend
from .layout import APPROXIMATE, EXACT_BY_COMPONENT, LIGHT, Indices, Layout, lay_out
from .likelihood import expectations, workspace

PARAMETERS_AT_MOST = 512

LIKELIHOODS = {"light": LIGHT, "approximate": APPROXIMATE, "exact": EXACT_BY_COMPONENT}
"""Names of the forms of the likelihood for finite templates (bin_statistics.py)."""

DEFAULT_LIKELIHOOD = "light"


@dataclass(frozen=True)
class Parameter:
    """One number that the likelihood depends on.

    kind : "ratio", "yield" (relative to the expectation) or "nuisance" (in standard deviations).
    group : row of the budget that a constraint belongs to: the nuisance's group, "yields" or "ratios".
    injected : the value that the templates were made with; 0 for a nuisance.
    constraint : standard deviation of the Gaussian auxiliary measurement, None if there is none.
    fixed : the value it is held at, None if it is fitted.
    """

    name: str
    label: str
    kind: str
    group: str
    injected: float
    constraint: float | None
    fixed: float | None


class Model:
    """What the data should look like, for every value of the parameters.

    templates : the template set.
    template_statistics : whether the finite number of generated events counts as an uncertainty.
    likelihood : its form for finite templates: "light", "approximate" or "exact" (bin_statistics.py).
    fixed : parameter name -> value to hold it at; for a ratio the ratio itself, for a yield relative to the
        expectation, for a nuisance in standard deviations.
    yields : scale parameter name -> standard deviation of its constraint, or None to leave it free; replaces what the
        template set says.

    Parameters are the scale parameters (ratios and yields), then the nuisances, in the order of the template set. A
    model does not change once made. Bins are numbered through all categories, in C order of their axes.

    Raises InputError for names that are not there, values that make no sense, a free parameter that nothing depends
    on, and bins whose total expectation is negative.
    """

    def __init__(
        self,
        templates: TemplateSet,
        *,
        template_statistics: bool = True,
        likelihood: str = DEFAULT_LIKELIHOOD,
        fixed: Mapping[str, float] | None = None,
        yields: Mapping[str, float | None] | None = None,
    ) -> None:
        self.templates = templates
        self.template_statistics = bool(template_statistics)
        self.likelihood = _known_likelihood(likelihood)
        self.parameters = _parameters(templates, dict(fixed or {}), dict(yields or {}))
        self.names = tuple(parameter.name for parameter in self.parameters)
        self.ratios = tuple(parameter.name for parameter in self.parameters if parameter.kind == "ratio")
        self._indices = {name: index for index, name in enumerate(self.names)}
        constraints = [parameter.constraint for parameter in self.parameters]
        weights = np.array([0.0 if sigma is None else sigma**-2 for sigma in constraints])
        form = LIKELIHOODS[self.likelihood]
        self.layout: Layout = lay_out(templates, weights, self._indices, self.template_statistics, form)
        self.free: Indices = np.array([i for i, p in enumerate(self.parameters) if p.fixed is None], dtype=np.int64)
        self.injected = _frozen([parameter.injected for parameter in self.parameters])
        self.start = _frozen([p.injected if p.fixed is None else p.fixed for p in self.parameters])
        _refuse(_useless(self))

    @property
    def bins(self) -> int:
        """Number of bins over all categories, empty ones included."""
        return int(self.layout.bin_lane.size)

    def index(self, name: str) -> int:
        """Place of a parameter in `parameters` and in every array of values. Raises InputError for an unknown name."""
        if name not in self._indices:
            raise InputError(_unknown("parameter", name, self.names))
        return self._indices[name]

    def values(self, changes: Mapping[str, float] | ArrayLike | None = None) -> Floats:
        """A (parameters,) array: the injected values with changes by name, or a whole array checked for its length."""
        if changes is None:
            return self.injected.copy()
        if isinstance(changes, Mapping):
            values = self.injected.copy()
            for name, value in changes.items():
                values[self.index(name)] = value
        else:
            values = np.array(changes, dtype=np.float64)
        if values.shape != self.injected.shape:
            raise InputError(
                Problem("wrong number of parameter values", "parameters", str(values.shape), str(self.injected.shape))
            )
        if not np.isfinite(values).all():
            raise InputError(Problem("parameter values must be finite", "parameters", got=str(values.tolist())))
        return values

    def expected_counts(self, parameters: Mapping[str, float] | ArrayLike | None = None) -> Floats:
        """Expected events, (bins,), at the given parameters (default: injected values)."""
        lanes = self.lane_expectations(self.values(parameters))
        counts = np.zeros(self.bins)
        there = self.layout.lane_bin >= 0
        counts[self.layout.lane_bin[there]] = lanes[there]
        return counts

    def expected(self, parameters: Mapping[str, float] | ArrayLike | None = None) -> dict[str, Floats]:
        """Expected events by category, each in the shape of its axes."""
        return self.by_category(self.expected_counts(parameters))

    def contributions(self, parameters: Mapping[str, float] | ArrayLike | None = None) -> dict[tuple[str, str], Floats]:
        """Expected events of each (category, component), in the shape of the category's axes, for stacked pictures.

        They add up to `expected` wherever the sum is above the floor of the protection (interpolation.py).
        """
        values = dict(zip(self.names, self.values(parameters).tolist(), strict=True))
        injected = {parameter.name: parameter.injected for parameter in self.parameters}
        out = {}
        for component in self.templates.components:
            scale = float(np.prod([values[name] / injected[name] for name in component.scales_with]))
            for category in self.templates.categories:
                template = self.templates.templates.get((category.name, component.name))
                if template is None:
                    continue
                contents = template.nominal.copy()
                for name, plus in template.plus.items():
                    minus, theta = template.minus[name], values[name]
                    contents += 0.5 * (plus - minus) * theta
                    contents += (0.5 * (plus + minus) - template.nominal) * bend(theta)[0]
                out[category.name, component.name] = scale * contents
        return out

    def template_errors(self) -> dict[str, Floats]:
        """Relative error of each bin's expectation from finite templates, by category, at the injected values."""
        lane = self.layout.bin_lane
        relative = np.where(lane >= 0, self.layout.arrays.template_variance[lane], 0.0)
        return self.by_category(np.sqrt(relative))

    def data(self, source: Source) -> Data:
        """Observed counts as the fit takes them, with every auxiliary measurement at its injected value.

        source : category name -> counts in the shape of the axes, or (bins,) counts, or a template set that holds data,
            or the path of a ROOT file that holds <category>/data, or Data as it is. Whole numbers are not demanded.

        Raises InputError for missing categories, wrong shapes, counts that are negative or not finite, and for counts
        in a bin where nothing is expected.
        """
        return read_data(self, source)

    def expected_data(self, parameters: Mapping[str, float] | ArrayLike | None = None) -> Data:
        """The expected set: counts equal to the expectation, auxiliary measurements at the given parameters.

        A fit to it returns these parameters, with the errors to be expected.
        """
        values = self.values(parameters)
        return Data(self.expected_counts(values), values, np.ones(self.bins))

    def by_category(self, counts: Floats) -> dict[str, Floats]:
        """(bins,) numbers as category name -> array in the shape of its axes."""
        out, first = {}, 0
        for category in self.templates.categories:
            size = int(np.prod(category.shape))
            out[category.name] = counts[first : first + size].reshape(category.shape)
            first += size
        return out

    def lanes(self, bins: Floats, filling: float) -> Floats:
        """(bins,) numbers in the order of the compiled arrays; lanes without a bin hold `filling`."""
        lane_bin = self.layout.lane_bin
        return np.where(lane_bin >= 0, bins[lane_bin], filling)

    def lane_expectations(self, values: Floats) -> Floats:
        """Protected expectations in the order of the compiled arrays."""
        arrays = self.layout.arrays
        plain, out = np.zeros(arrays.floor.size), np.zeros(arrays.floor.size)
        expectations(arrays, values, workspace(arrays), plain, out)
        return out

    def protected_bins(self, values: Floats) -> int:
        """Number of bins whose plain sum is below the floor of the protection at these parameters."""
        arrays = self.layout.arrays
        plain, out = np.zeros(arrays.floor.size), np.zeros(arrays.floor.size)
        expectations(arrays, values, workspace(arrays), plain, out)
        return int(((plain < arrays.floor) & (self.layout.lane_bin >= 0)).sum())


def _parameters(
    templates: TemplateSet, fixed: dict[str, float], yields: dict[str, float | None]
) -> tuple[Parameter, ...]:
    scales = [parameter.name for parameter in templates.parameters]
    names = [*scales, *(nuisance.name for nuisance in templates.nuisances)]
    _refuse(
        [
            *(_unknown("parameter", name, names) for name in fixed if name not in names),
            *(_unknown("scale parameter", name, scales) for name in yields if name not in scales),
            *(
                Problem("a parameter must be fixed to a finite number", f"fixed: {name}", got=repr(value))
                for name, value in fixed.items()
                if not _is_number(value)
            ),
            *(
                Problem("a constraint must be a positive number, or None", f"yields: {name}", got=repr(sigma))
                for name, sigma in yields.items()
                if sigma is not None and not (_is_number(sigma) and sigma > 0)
            ),
        ]
    )
    parameters = []
    for scale in templates.parameters:
        sigma = yields.get(scale.name, scale.constraint)
        group = "ratios" if scale.kind == "ratio" else "yields"
        held = fixed.get(scale.name)
        parameters.append(Parameter(scale.name, scale.label, scale.kind, group, scale.injected, sigma, held))
    for nuisance in templates.nuisances:
        held = fixed.get(nuisance.name)
        parameters.append(Parameter(nuisance.name, nuisance.label, "nuisance", nuisance.group, 0.0, 1.0, held))
    if len(parameters) > PARAMETERS_AT_MOST:
        raise InputError(
            Problem("too many parameters", "templates", got=str(len(parameters)), wanted=f"up to {PARAMETERS_AT_MOST}")
        )
    return tuple(parameters)


def _known_likelihood(name: str) -> str:
    if name not in LIKELIHOODS:
        raise InputError(
            Problem(
                "there is no such form of the likelihood", "likelihood", got=repr(name), wanted=", ".join(LIKELIHOODS)
            )
        )
    return name


def _is_number(value: object) -> bool:
    return isinstance(value, int | float | np.number) and not isinstance(value, bool) and isfinite(value)


def _useless(model: Model) -> Iterator[Problem]:
    """A free parameter without constraint that no bin depends on cannot be fitted."""
    used = set(model.layout.arrays.rows.tolist())
    for index in model.free.tolist():
        parameter = model.parameters[index]
        if index not in used and parameter.constraint is None:
            yield Problem(
                "no template depends on this free parameter",
                where=f"parameter {parameter.name}",
                remedy="Fix it, or leave it out of the template set.",
            )
    if model.free.size == 0:
        yield Problem("every parameter is fixed: there is nothing to fit", where="fixed")


def _unknown(kind: str, name: object, known: Iterable[str]) -> Problem:
    known = list(known)
    close = get_close_matches(str(name), known, n=1)
    remedy = f"Did you mean {close[0]!r}?" if close else ""
    return Problem(f"there is no such {kind}", got=repr(name), wanted=", ".join(known) or "none", remedy=remedy)


def _refuse(problems: Iterable[Problem]) -> None:
    found = tuple(problems)
    if found:
        raise InputError(*found)


def _frozen(values: list[float]) -> Floats:
    array = np.array(values, dtype=np.float64)
    array.flags.writeable = False
    return array
