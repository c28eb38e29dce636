"""The model of a fit: parameters, expectations, and the data that go with them."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass
from math import inf

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.errors import InputError, Problem
from semitau.core.quadratic import injected_values
from semitau.core.templates import Coefficient, Floats, TemplateSet

from ..likelihood.constraints import BLOCK, LOG_NORMAL, Constraint, Correlated
from ..likelihood.constraints import arrays_of as constraint_arrays
from ..likelihood.functions import arrays_of as function_arrays
from ..likelihood.functions import jacobian, read_function, set_functions
from ..likelihood.layout import APPROXIMATE, EXACT_BY_COMPONENT, LIGHT, Indices, Layout, lay_out
from ..likelihood.likelihood import expectations, workspace
from ..likelihood.scaled_parts import parts_of
from .coefficients import SIZE, floated, followed_rates, kept_sizes, set_twice, starting_shifts
from .component_expectations import component_expectations
from .data import Data, Source, read_data
from .knowledge import Knowledge, refuse, unknown

PARAMETERS_AT_MOST = 512

LIKELIHOODS = {"light": LIGHT, "approximate": APPROXIMATE, "exact": EXACT_BY_COMPONENT}
"""Names of the forms of the likelihood for finite templates (bin_statistics.py)."""

DEFAULT_LIKELIHOOD = "light"


@dataclass(frozen=True)
class Parameter:
    """One number that the likelihood depends on.

    kind : "ratio", "yield" (relative to the expectation), "coefficient", "nuisance" (in standard deviations; of
        coefficients those that change shapes and have a constraint), or "size": what keeps the size of a component
        while such coefficients change, a function of them.
    group : row of the budget that a constraint belongs to: the nuisance's group, "yields", "ratios" or "coefficients".
    injected : the value that the templates were made with; 0 for a nuisance.
    constraint : standard deviation of the Gaussian auxiliary measurement, None if there is none.
    fixed : the value it is held at, None if it is fitted.
    law : of the constraint: "gaussian", "log-normal", "correlated", "uniform" or "none". For a log-normal one
        `constraint` is the relative error times the injected value, for a correlated one the error of its own.
    bounds : the fit keeps it inside.
    function : the formula that sets it from others, None if it is a parameter of its own.
    """

    name: str
    label: str
    kind: str
    group: str
    injected: float
    constraint: float | None
    fixed: float | None
    law: str = "none"
    bounds: tuple[float, float] = (-inf, inf)
    function: str | None = None


class Model:
    """What the data should look like, for every value of the parameters.

    templates : the template set.
    template_statistics : whether the finite number of generated events counts as an uncertainty.
    likelihood : its form for finite templates: "light", "approximate" or "exact" (bin_statistics.py).
    fixed : parameter name -> value to hold it at; for a ratio the ratio itself, for a yield relative to the
        expectation, for a nuisance in standard deviations.
    yields : scale parameter name -> standard deviation of its constraint, or None to leave it free; replaces what the
        template set says.
    constraints : parameter name -> Gaussian, LogNormal or Uniform (constraints.py), or None to leave it free; replaces
        what the template set says.
    correlated : constraints of several parameters together, in the place of their own.
    bounds : parameter name -> (low, high), either None; the fit keeps the parameter inside.
    functions : parameter name -> formula of other parameters, e.g. {"R_D_B0": "R_D_Bp", "yield_b": "1.1 * yield_a"}
        (functions.py). Such a parameter is not fitted, but has a value, an error and correlations in the result.
    coefficients : names of the template set's coefficients to fit. Templates and ratios follow couplings: a ratio that
        does is a function of them, not a parameter of its own. Coefficients of shapes leave the ratios free and the
        size of components to their scale parameters. The other coefficients stay at their injected values, which
        `core.quadratic.templates_at` puts elsewhere.

    Parameters are the scale parameters (ratios and yields), the fitted coefficients, then the nuisances, in the order
    of the template set. A model does not change once made. Bins are numbered through all categories, in C order of
    their axes. `ratios` names the parameters of interest: ratios and fitted coefficients, but for those that are
    nuisances; `following` the ratios that are functions of fitted couplings.

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
        constraints: Mapping[str, Constraint | None] | None = None,
        correlated: Sequence[Correlated] = (),
        bounds: Mapping[str, tuple[float | None, float | None]] | None = None,
        functions: Mapping[str, str] | None = None,
        coefficients: Sequence[str] = (),
    ) -> None:
        if not isinstance(templates, TemplateSet):
            got, wanted = type(templates).__name__, "a template set, as fit.read_templates gives"
            raise InputError(Problem("not a template set", where="templates", got=got, wanted=wanted))
        self.templates = templates
        self.template_statistics = bool(template_statistics)
        self.likelihood = _known_likelihood(likelihood)
        self.coefficients = floated(templates, coefficients, self.likelihood)
        following = followed_rates(templates, self.coefficients)
        refuse(set_twice(following, functions or {}))
        self.following = tuple(following)
        kept = kept_sizes(templates, self.coefficients)
        self._sizes = {name: f"{SIZE}{name}" for name in kept}
        parts = parts_of(templates, self.coefficients, self.following, self._sizes)
        point = {name: value for name, value in injected_values(templates).items() if name in self.coefficients}
        point |= dict.fromkeys(self._sizes.values(), 1.0)
        set_by = {**(functions or {}), **following, **{self._sizes[name]: text for name, text in kept.items()}}
        known = Knowledge.gather(templates, fixed, yields, constraints, correlated, bounds, set_by, point)
        self.parameters = _parameters(templates, known, self.coefficients, self._sizes)
        self.names = tuple(parameter.name for parameter in self.parameters)
        of_interest = ("ratio", "coefficient")
        self.ratios = tuple(parameter.name for parameter in self.parameters if parameter.kind in of_interest)
        self._indices = {name: index for index, name in enumerate(self.names)}
        self.layout: Layout = lay_out(
            templates,
            constraint_arrays(self._indices, known.single, known.blocks, known.bounds),
            function_arrays(known.functions, self._indices),
            self._indices,
            self.template_statistics,
            LIKELIHOODS[self.likelihood],
            parts,
        )
        self.free: Indices = np.array(
            [i for i, p in enumerate(self.parameters) if p.fixed is None and p.function is None], dtype=np.int64
        )
        self.injected = self._completed([parameter.injected for parameter in self.parameters])
        away = starting_shifts(parts, templates, [self.names[i] for i in self.free])
        self.start = self._completed(
            [(p.injected if p.fixed is None else p.fixed) + away.get(p.name, 0.0) for p in self.parameters]
        )
        refuse(_useless(self))

    @property
    def bins(self) -> int:
        """Number of bins over all categories, empty ones included."""
        return int(self.layout.bin_lane.size)

    def index(self, name: str) -> int:
        """Place of a parameter in `parameters` and in every array of values. Raises InputError for an unknown name."""
        if name not in self._indices:
            raise InputError(unknown("parameter", name, self.names))
        return self._indices[name]

    def _completed(self, values: ArrayLike) -> Floats:
        """With the parameters that are functions of others set; read-only."""
        array = np.array(values, dtype=np.float64)
        set_functions(self.layout.arrays.functions, array)
        array.flags.writeable = False
        return array

    def jacobian(self, values: Floats) -> Floats:
        """(parameters, parameters) derivatives of all parameters in the fitted ones, 1 but for functions."""
        return jacobian(self.layout.arrays.functions, values)

    def precision(self, values: Floats) -> Floats:
        """(parameters, parameters) inverse covariance of the auxiliary measurements, at these values."""
        known = self.layout.arrays.constraints
        log_normal = known.law == LOG_NORMAL
        width = np.where(log_normal, values, 1.0)
        own = np.where(known.law == BLOCK, 0.0, known.inverse_variance / width**2)
        out: Floats = known.precision + np.diag(own)
        return out

    def values(self, changes: Mapping[str, float] | ArrayLike | None = None) -> Floats:
        """A (parameters,) array: the injected values with changes by name, or a whole array checked for its length.

        Parameters that are functions of others follow them.
        """
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
        set_functions(self.layout.arrays.functions, values)
        return values

    def holding(self, values: Floats) -> Floats:
        """These (parameters,) values with the parameters that the model holds where it holds them; functions follow."""
        held = [i for i, parameter in enumerate(self.parameters) if parameter.fixed is not None]
        found = values.copy()
        found[held] = self.start[held]
        return self.values(found)

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
        return component_expectations(self.templates, values, self.coefficients)

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
        expectations(arrays, np.array(values), workspace(arrays), plain, out)
        return out

    def protected_bins(self, values: Floats) -> int:
        """Number of bins whose plain sum is below the floor of the protection at these parameters."""
        arrays = self.layout.arrays
        plain, out = np.zeros(arrays.floor.size), np.zeros(arrays.floor.size)
        expectations(arrays, np.array(values), workspace(arrays), plain, out)
        return int(((plain < arrays.floor) & (self.layout.lane_bin >= 0)).sum())


def _parameters(
    templates: TemplateSet, known: Knowledge, fitted: Sequence[str], sizes: Mapping[str, str]
) -> tuple[Parameter, ...]:
    parameters = []
    scales = [
        (p.name, p.label, p.kind, "ratios" if p.kind == "ratio" else "yields", p.injected) for p in templates.parameters
    ]
    nuisances = [(n.name, n.label, "nuisance", n.group, 0.0) for n in templates.nuisances]
    coefficients = [
        (c.name, c.label, _kind(c), c.group or "coefficients", c.value)
        for c in templates.coefficients
        if c.name in fitted
    ]
    labels = {component.name: component.label for component in templates.components}
    kept = [(name, f"size of {labels[of]}", "size", "sizes", 1.0) for of, name in sizes.items()]
    # Whatever scales components comes before the nuisances (expectation.py).
    for name, label, kind, group, injected in [*scales, *coefficients, *kept, *nuisances]:
        law, sigma = known.law_of(name, injected)
        function = known.functions.get(name)
        parameters.append(
            Parameter(
                name, label, kind, group, injected, sigma, known.fixed.get(name), law,
                known.range_of(name), None if function is None else function.text,
            )
        )  # fmt: skip
    if len(parameters) > PARAMETERS_AT_MOST:
        raise InputError(
            Problem("too many parameters", "templates", got=str(len(parameters)), wanted=f"up to {PARAMETERS_AT_MOST}")
        )
    return tuple(parameters)


def _kind(coefficient: Coefficient) -> str:
    return "nuisance" if coefficient.kind == "shape" and coefficient.constraint is not None else "coefficient"


def _known_likelihood(name: str) -> str:
    if name not in LIKELIHOODS:
        raise InputError(
            Problem(
                "there is no such form of the likelihood", "likelihood", got=repr(name), wanted=", ".join(LIKELIHOODS)
            )
        )
    return name


def _useless(model: Model) -> Iterator[Problem]:
    """A free parameter without constraint that no bin depends on cannot be fitted."""
    used = set(model.layout.arrays.rows.tolist())
    for parameter in model.parameters:  # what a function of it does, it does
        if parameter.function is not None and model.index(parameter.name) in used:
            used |= {model.index(name) for name in read_function(parameter.name, parameter.function).names}
    for index in model.free.tolist():
        parameter = model.parameters[index]
        if index not in used and parameter.constraint is None:
            yield Problem(
                "no template depends on this free parameter",
                where=f"parameter {parameter.name}",
                remedy="Fix it, or leave it out of the template set.",
            )
    for index in model.free.tolist():
        if model.parameters[index].kind == "nuisance" and _is_folded(model.templates, model.names[index]):
            yield Problem(
                "both sides shift the templates alike, so the fit cannot tell them apart",
                where=f"nuisance {model.names[index]}",
                remedy="Keep one side and mirror it (fit.mirrored), or hold the nuisance.",
            )
    if model.free.size == 0:
        yield Problem("every parameter is fixed: there is nothing to fit", where="fixed")


def _is_folded(templates: TemplateSet, name: str) -> bool:
    """Whether plus and minus are the same everywhere, and not the nominal."""
    mine = [template for template in templates.templates.values() if name in template.plus]
    alike = all(np.array_equal(template.plus[name], template.minus[name]) for template in mine)
    return alike and any(not np.array_equal(template.plus[name], template.nominal) for template in mine)
