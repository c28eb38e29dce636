"""The types that stand between generation and fit: a set of templates with their variations.

All are validated when made, and raise InputError with every problem found. Arrays are copied and made read-only.
"""

from __future__ import annotations

import re
from collections import Counter
from collections.abc import Iterable, Iterator, Mapping
from dataclasses import dataclass, field, replace
from math import isfinite
from types import MappingProxyType

import numpy as np
from numpy.typing import ArrayLike, NDArray

from .errors import InputError, Problem

Floats = NDArray[np.float64]

ROLES = ("signal", "normalisation", "feed-down", "background")
KINDS = ("ratio", "yield")
RESERVED = {"component": "data", "category": "meta", "coefficient": "one"}
"""Names that the template file uses for itself."""

ONE = "one"
"""Stands in a pair of coefficients for the constant 1."""

Pair = tuple[str, str]

Form = tuple[tuple[str, str, float], ...]
"""A quadratic form in the set's coefficients: (a, b, piece), with value = sum of c_a c_b piece; see quadratic.py."""

COEFFICIENT_KINDS = ("coupling", "shape")

SAME_AT_MOST = 1e-6
"""Relative rounding that other programs' sums of quadratic pieces may have."""


@dataclass(frozen=True)
class Observable:
    """A binned quantity: `name` as in the study file, `label` for axes, `unit` ("" if none), increasing `edges`."""

    name: str
    label: str
    unit: str
    edges: tuple[float, ...]

    def __post_init__(self) -> None:
        object.__setattr__(self, "edges", tuple(float(edge) for edge in self.edges))
        _refuse(self._problems())

    def _problems(self) -> Iterator[Problem]:
        where = f"observable {self.name}"
        yield from _name_problems("observable", self.name)
        if len(self.edges) < 2:
            yield Problem("an axis needs at least two edges", where, got=str(len(self.edges)))
        elif not all(map(isfinite, self.edges)):
            yield Problem("edges must be finite", where, got=str(list(self.edges)))
        else:
            for low, high in zip(self.edges, self.edges[1:], strict=False):
                if low >= high:
                    yield Problem("edges must increase", where, got=f"{low:g} before {high:g}")


@dataclass(frozen=True)
class Category:
    """A reconstructed final state with its own axes (one to three observables)."""

    name: str
    label: str
    observables: tuple[Observable, ...]

    def __post_init__(self) -> None:
        object.__setattr__(self, "observables", tuple(self.observables))
        _refuse(self._problems())

    def _problems(self) -> Iterator[Problem]:
        where = f"category {self.name}"
        yield from _name_problems("category", self.name)
        if not 1 <= len(self.observables) <= 3:
            yield Problem("wrong number of observables", where, got=str(len(self.observables)), wanted="1 to 3")
        yield from _repeated("observable", (observable.name for observable in self.observables), where)

    @property
    def shape(self) -> tuple[int, ...]:
        return tuple(len(observable.edges) - 1 for observable in self.observables)


@dataclass(frozen=True)
class Component:
    """What one template describes.

    role : "signal", "normalisation", "feed-down" or "background".
    scales_with : names of the `ScaleParameter`s whose product (each over its injected value) multiplies the template,
        e.g. ("R_D", "yield_D_light") for B -> D tau nu. Empty: the component is fixed but for its nuisances.
    rate : decays before detector and selection over those at the injected point, which its quadratic pieces are to be
        divided by: then coefficients of kind "shape" leave its size to the scale parameters. Empty: 1.
    """

    name: str
    label: str
    role: str
    scales_with: tuple[str, ...]
    rate: Form = ()

    def __post_init__(self) -> None:
        object.__setattr__(self, "scales_with", tuple(self.scales_with))
        object.__setattr__(self, "rate", tuple(self.rate))
        _refuse(self._problems())

    def _problems(self) -> Iterator[Problem]:
        where = f"component {self.name}"
        yield from _name_problems("component", self.name)
        if self.role not in ROLES:
            yield Problem("unknown role", where, got=repr(self.role), wanted=", ".join(ROLES))
        yield from _repeated("scale parameter", self.scales_with, where)
        yield from _form_problems("the rate", self.rate, where)


@dataclass(frozen=True)
class ScaleParameter:
    """A number that scales components.

    kind : "ratio" (value is the ratio itself) or "yield" (value relative to the expectation; injected 1).
    constraint : standard deviation of a Gaussian auxiliary measurement of the value; None if free.
    rate : a ratio as a quadratic form in the set's coefficients; empty if it does not follow them.
    over : what that form is divided by, 1 at the injected point; empty: 1 everywhere.
    """

    name: str
    label: str
    kind: str
    injected: float
    constraint: float | None = None
    rate: Form = ()
    over: Form = ()

    def __post_init__(self) -> None:
        _refuse(self._problems())

    def _problems(self) -> Iterator[Problem]:
        where = f"parameter {self.name}"
        yield from _name_problems("parameter", self.name)
        if self.kind not in KINDS:
            yield Problem("unknown kind", where, got=repr(self.kind), wanted=", ".join(KINDS))
        # Templates are divided by the injected value: zero would leave nothing to scale.
        for what, value in (("injected value", self.injected), ("constraint", self.constraint)):
            if value is not None and not (isfinite(value) and value > 0):
                yield Problem(f"{what} must be positive and finite", where, got=str(value))
        yield from _form_problems("the rate", self.rate, where)
        yield from _form_problems("what the rate is over", self.over, where)
        if self.over and not self.rate:
            yield Problem("there is something to divide by, but no rate", where)


@dataclass(frozen=True)
class Nuisance:
    """A variation as a nuisance parameter with a unit Gaussian constraint; `group` gathers rows of the budget."""

    name: str
    label: str
    group: str

    def __post_init__(self) -> None:
        _refuse(_name_problems("nuisance", self.name))


@dataclass(frozen=True)
class Coefficient:
    """A real number that templates are quadratic functions of, e.g. the real part of a Wilson coefficient.

    value : where the nominal templates are made. limit : largest size at which the templates are to be used.
    kind : "coupling": ratios follow it when it is fitted; "shape": components keep their size, ratios stay free.
    constraint : standard deviation of a Gaussian auxiliary measurement of it; None if there is none.
    group : row of the budget; that of coefficients if empty.
    """

    name: str
    label: str
    value: float
    limit: float
    kind: str = "coupling"
    constraint: float | None = None
    group: str = ""

    def __post_init__(self) -> None:
        _refuse(self._problems())

    def _problems(self) -> Iterator[Problem]:
        where = f"coefficient {self.name}"
        yield from _name_problems("coefficient", self.name)
        if self.name == "moments":
            yield Problem("the template file keeps this name for itself: no coefficient can have it", got="'moments'")
        if self.kind not in COEFFICIENT_KINDS:
            yield Problem("unknown kind", where, got=repr(self.kind), wanted=", ".join(COEFFICIENT_KINDS))
        if self.constraint is not None and not (isfinite(self.constraint) and self.constraint > 0):
            yield Problem("constraint must be positive and finite", where, got=str(self.constraint))
        if not (isfinite(self.limit) and self.limit > 0):
            yield Problem("a limit must be positive and finite", where, got=str(self.limit))
        elif not abs(self.value) <= self.limit:
            yield Problem(
                "the value is beyond its limit", where, got=str(self.value), wanted=f"±{self.limit:g} at most"
            )


@dataclass(frozen=True, eq=False)
class Template:
    """Expected events of one component in one category.

    nominal, variance : (bins of the category's axes) float64, events and events squared (finite generated sample).
    plus, minus : nuisance name -> array of the same shape; the same keys in both; absent where it does not act.
    quadratic : (a, b) -> piece of the same shape; expected events at coefficients c are the sum of c_a c_b piece, see
        quadratic.py. Pieces that are zero may be left out; empty if the template does not follow coefficients.
    moments : (pairs, pairs), pairs as `quadratic.pairs_of` has them: the sum over all generated events of the template
        of the products of their two contributions to the pieces, so that c_a c_b moments c_a c_b is the sum of squared
        weights at c. None if not known.

    Contents may be negative (weights may be), but not NaN or infinite; variances may be neither.
    """

    nominal: Floats
    variance: Floats
    plus: Mapping[str, Floats] = field(default_factory=lambda: MappingProxyType({}))
    minus: Mapping[str, Floats] = field(default_factory=lambda: MappingProxyType({}))
    quadratic: Mapping[Pair, Floats] = field(default_factory=lambda: MappingProxyType({}))
    moments: Floats | None = None

    def __post_init__(self) -> None:
        object.__setattr__(self, "nominal", _read_only(self.nominal))
        object.__setattr__(self, "variance", _read_only(self.variance))
        object.__setattr__(self, "plus", _read_only_mapping(self.plus))
        object.__setattr__(self, "minus", _read_only_mapping(self.minus))
        pieces = {(str(a), str(b)): _read_only(piece) for (a, b), piece in self.quadratic.items()}
        object.__setattr__(self, "quadratic", MappingProxyType(pieces))
        object.__setattr__(self, "moments", None if self.moments is None else _read_only(self.moments))
        _refuse(self._problems())

    def __reduce__(self) -> tuple[object, ...]:  # mapping proxies do not pickle
        pieces = dict(self.quadratic), self.moments
        return Template, (self.nominal, self.variance, dict(self.plus), dict(self.minus), *pieces)

    def _problems(self) -> Iterator[Problem]:
        sides = {f"{side}/{name}": values for side in ("plus", "minus") for name, values in getattr(self, side).items()}
        pieces = {f"quadratic/{a}/{b}": values for (a, b), values in self.quadratic.items()}
        for where, values in {"nominal": self.nominal, "variance": self.variance, **sides, **pieces}.items():
            if values.shape != self.nominal.shape:
                yield Problem("shape differs from the nominal", where, str(values.shape), str(self.nominal.shape))
            yield from _bin_problems(where, "not finite", values, ~np.isfinite(values))
        yield from _bin_problems("variance", "negative variance", self.variance, self.variance < 0)
        for name in sorted(self.plus.keys() ^ self.minus.keys()):
            there, missing = ("plus", "minus") if name in self.plus else ("minus", "plus")
            yield Problem(
                "one side of a variation is missing", f"{missing}/{name}", remedy=f"Add it beside {there}/{name}."
            )
        if self.moments is not None:
            where, shape = "quadratic/moments", self.moments.shape
            if not self.quadratic:
                yield Problem("moments without pieces", where, remedy="Add quadratic/<a>/<b>, or leave them out.")
            if len(shape) != 2 or shape[0] != shape[1]:
                yield Problem("not a square matrix", where, got=str(shape))
            elif not np.isfinite(self.moments).all():
                yield Problem("not finite", where)
            elif not np.allclose(self.moments, self.moments.T, rtol=1e-6, atol=1e-6 * np.abs(self.moments).max()):
                yield Problem("not symmetric", where)


@dataclass(frozen=True, eq=False)
class TemplateSet:
    """Everything a fit needs, as read from or written to a template file.

    templates : (category name, component name) -> Template; a pair that is absent contributes nothing.
    data : category name -> observed counts, if any.
    provenance : plain JSON values: study text, seed, versions, hash of the study file.
    coefficients : real numbers that templates and ratios are quadratic functions of, in the order of their pairs.
    """

    categories: tuple[Category, ...]
    components: tuple[Component, ...]
    parameters: tuple[ScaleParameter, ...]
    nuisances: tuple[Nuisance, ...]
    templates: Mapping[tuple[str, str], Template]
    data: Mapping[str, Floats] = field(default_factory=lambda: MappingProxyType({}))
    provenance: Mapping[str, object] = field(default_factory=lambda: MappingProxyType({}))
    coefficients: tuple[Coefficient, ...] = ()

    def __post_init__(self) -> None:
        for name in ("categories", "components", "parameters", "nuisances", "coefficients"):
            object.__setattr__(self, name, tuple(getattr(self, name)))
        object.__setattr__(self, "templates", MappingProxyType(dict(self.templates)))
        object.__setattr__(self, "data", _read_only_mapping(self.data))
        object.__setattr__(self, "provenance", MappingProxyType(dict(self.provenance)))
        _refuse(self._problems())

    def __reduce__(self) -> tuple[object, ...]:
        mappings = dict(self.templates), dict(self.data), dict(self.provenance)
        named = self.categories, self.components, self.parameters, self.nuisances
        return TemplateSet, (*named, *mappings, self.coefficients)

    def with_data(self, data: Mapping[str, ArrayLike]) -> TemplateSet:
        """The same templates with these observed counts: category name -> array of the category's shape."""
        return replace(self, data={name: _read_only(counts) for name, counts in data.items()})

    def _problems(self) -> Iterator[Problem]:
        if not self.categories:
            yield Problem("there is no category")
        if not self.components:
            yield Problem("there is no component")
        yield from _repeated("category", (category.name for category in self.categories))
        yield from _repeated("component", (component.name for component in self.components))
        # Both kinds are parameters of one fit, so they share one set of names.
        parameters = [parameter.name for parameter in self.parameters]
        coefficients = [coefficient.name for coefficient in self.coefficients]
        yield from _repeated("parameter", [*parameters, *coefficients, *(nuisance.name for nuisance in self.nuisances)])
        for parameter in self.parameters:
            for form, injected in ((parameter.rate, parameter.injected), (parameter.over, 1.0)):
                pieces = {(a, b): piece for a, b, piece in form}
                yield from self._quadratic_problems(f"parameter {parameter.name}", pieces, np.array(injected))
        for component in self.components:
            pieces = {(a, b): piece for a, b, piece in component.rate}
            yield from self._quadratic_problems(f"component {component.name}", pieces, np.array(1.0))
            yield from _unknown("parameter", component.scales_with, parameters, f"component {component.name}")
        shapes = {category.name: category.shape for category in self.categories}
        components = {component.name for component in self.components}
        nuisances = {nuisance.name for nuisance in self.nuisances}
        for (category, name), template in self.templates.items():
            where = f"{category}/{name}"
            yield from _unknown("category", [category], shapes, where)
            yield from _unknown("component", [name], components, where)
            yield from _unknown("nuisance", template.plus, nuisances, where)
            yield from self._quadratic_problems(where, template.quadratic, template.nominal)
            size = (len(self.coefficients) + 1) * (len(self.coefficients) + 2) // 2
            if template.moments is not None and template.moments.shape != (size, size):
                yield Problem(
                    "wrong size", f"{where}/quadratic/moments", str(template.moments.shape), f"({size}, {size})"
                )
            if template.nominal.shape != shapes.get(category, template.nominal.shape):
                yield Problem("shape differs from the axes", where, str(template.nominal.shape), str(shapes[category]))
        for category, counts in self.data.items():
            where = f"{category}/data"
            yield from _unknown("category", [category], shapes, where)
            if counts.shape != shapes.get(category, counts.shape):
                yield Problem("shape differs from the axes", where, str(counts.shape), str(shapes[category]))
            yield from _bin_problems(where, "not finite", counts, ~np.isfinite(counts))
            yield from _bin_problems(where, "negative count", counts, counts < 0)

    def _quadratic_problems(self, where: str, pieces: Mapping[Pair, ArrayLike], injected: Floats) -> Iterator[Problem]:
        """Pairs are of known coefficients in their order, and the pieces add up to what is injected."""
        if not pieces:
            return
        values = {ONE: 1.0, **{known.name: known.value for known in self.coefficients}}
        order = {name: place for place, name in enumerate(values)}
        total, size = np.zeros(injected.shape), np.zeros(injected.shape)
        for (a, b), piece in pieces.items():
            yield from _unknown("coefficient", [name for name in (a, b) if name != ONE], values, f"{where}: {a}/{b}")
            if a not in order or b not in order or np.shape(piece) != injected.shape:
                return
            if order[a] > order[b]:
                yield Problem("coefficients in the wrong order", f"{where}: {a}/{b}", wanted=f"{b}/{a}")
            with np.errstate(over="ignore", invalid="ignore"):
                total += values[a] * values[b] * np.asarray(piece)
                size += np.abs(values[a] * values[b] * np.asarray(piece))
        with np.errstate(over="ignore", invalid="ignore"):
            apart = np.abs(total - injected) > SAME_AT_MOST * (size + np.abs(injected))
        if apart.any():
            place = tuple(np.argwhere(apart)[0].tolist())
            yield Problem(
                "the pieces do not add up to what is injected",
                where + (f" bin {list(place)}" if place else ""),
                got=f"{total[place]:g}",
                wanted=f"{injected[place]:g}",
                remedy="Sum c_a c_b piece at the values of the coefficients.",
            )


def _refuse(problems: Iterable[Problem]) -> None:
    found = tuple(problems)
    if found:
        raise InputError(*found)


def _name_problems(kind: str, name: object) -> Iterator[Problem]:
    if not isinstance(name, str) or not re.fullmatch(r"[A-Za-z0-9_]+", name):
        yield Problem(f"not a name for a {kind}", got=repr(name), wanted="letters, digits and _")
    elif name == RESERVED.get(kind):
        yield Problem(f"the template file keeps this name for itself: no {kind} can have it", got=repr(name))


def _form_problems(what: str, form: Form, where: str) -> Iterator[Problem]:
    for a, b, piece in form:
        if not isfinite(piece):
            yield Problem(f"a piece of {what} is not finite", f"{where}: {a}, {b}", got=str(piece))


def _repeated(kind: str, names: Iterable[str], where: str = "") -> Iterator[Problem]:
    for name, times in Counter(names).items():
        if times > 1:
            yield Problem(f"{kind} given {times} times", where, got=repr(name), wanted="once")


def _unknown(kind: str, names: Iterable[str], known: Iterable[str], where: str) -> Iterator[Problem]:
    for name in names:
        if name not in known:
            yield Problem(f"unknown {kind}", where, got=repr(name), wanted=", ".join(sorted(known)) or "none")


def _bin_problems(where: str, what: str, values: Floats, wrong: NDArray[np.bool_]) -> Iterator[Problem]:
    """One problem for all wrong bins of an array: it names the first, and how many there are."""
    if wrong.any():
        place = tuple(int(index) for index in np.argwhere(wrong)[0])
        more = int(wrong.sum()) - 1
        yield Problem(
            what, f"{where} bin {list(place)}" + (f" and {more} more" if more else ""), got=f"{values[place]:g}"
        )


def _read_only(values: ArrayLike) -> Floats:
    try:
        array = np.array(values, dtype=np.float64, order="C")
    except (TypeError, ValueError) as error:
        raise InputError(Problem("not an array of numbers", got=type(values).__name__)) from error
    array.flags.writeable = False
    return array


def _read_only_mapping(mapping: Mapping[str, ArrayLike]) -> Mapping[str, Floats]:
    return MappingProxyType({name: _read_only(values) for name, values in mapping.items()})
