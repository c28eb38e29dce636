"""Quadratic forms in real coefficients, and template sets that hold them.

A quantity that is quadratic in real coefficients c_1 ... c_k is stored by its pieces f_ab, a <= b in the order
(one, c_1, ..., c_k): f(c) = sum of c_a c_b f_ab, with c_one = 1. So f_ab of a < b holds both f_ab and f_ba.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass, replace
from difflib import get_close_matches
from math import isfinite, prod

import numpy as np
from numpy.typing import ArrayLike

from .errors import InputError, Problem
from .templates import ONE, Coefficient, Floats, Form, Pair, Template, TemplateSet

QuadraticForm = Mapping[Pair, float]

SHARE_AT_LEAST = 0.1
"""Effective over generated events below which a reweighting is called poor."""

EVENTS_AT_LEAST = 10.0
"""Effective events below which a template of many events is refused: a handful of events would make it."""


def pairs_of(names: Sequence[str]) -> tuple[Pair, ...]:
    """All pairs a <= b of ("one", *names), in the order in which matrices of moments have them."""
    whole = (ONE, *names)
    return tuple((whole[i], whole[j]) for i in range(len(whole)) for j in range(i, len(whole)))


def monomials(values: ArrayLike) -> Floats:
    """c_a c_b in the order of `pairs_of`; (n,) values give (n + 1)(n + 2)/2 products."""
    whole = np.concatenate([[1.0], np.asarray(values, dtype=np.float64)])
    first, second = np.triu_indices(whole.size)
    product: Floats = whole[first] * whole[second]
    return product


def value_at(form: QuadraticForm, values: Mapping[str, float]) -> float:
    """A quadratic form at a point; values of all its coefficients."""
    whole = {ONE: 1.0, **values}
    return float(sum(whole[a] * whole[b] * piece for (a, b), piece in form.items()))


def form_at(form: Form, values: Mapping[str, float], empty: float = 1.0) -> float:
    """The same of a form as components and parameters have it; `empty` if it has no pieces."""
    return value_at({(a, b): piece for a, b, piece in form}, values) if form else empty


def gradient_at(form: QuadraticForm, values: Mapping[str, float]) -> dict[str, float]:
    """Its derivative with respect to each coefficient."""
    whole = {ONE: 1.0, **values}
    slopes = dict.fromkeys(values, 0.0)
    for (a, b), piece in form.items():
        for name, other in ((a, b), (b, a)):
            if name != ONE:
                slopes[name] += whole[other] * piece
    return slopes


def contents_at(template: Template, values: Mapping[str, float]) -> Floats:
    """Expected events of a template with quadratic pieces at a point; the nominal ones if it has none."""
    if not template.quadratic:
        return template.nominal
    whole = {ONE: 1.0, **values}
    total = np.zeros_like(template.nominal)
    for (a, b), piece in template.quadratic.items():
        total += whole[a] * whole[b] * piece
    return total


def injected_values(templates: TemplateSet) -> dict[str, float]:
    """The point that the nominal templates are made at: coefficient -> value."""
    return {coefficient.name: coefficient.value for coefficient in templates.coefficients}


@dataclass(frozen=True)
class Reweighting:
    """How many events are behind a template once they are weighted.

    what : the point or the variation. events : generated events that the template holds. effective : (Σw)²/Σw².
    """

    category: str
    component: str
    what: str
    events: float
    effective: float

    @property
    def share(self) -> float:
        """Effective over generated events, at most 1."""
        return self.effective / self.events if self.events > 0 else 1.0


def reweightings(templates: TemplateSet, values: Mapping[str, float] | None = None) -> tuple[Reweighting, ...]:
    """Effective events of every template with quadratic pieces at a point, default the injected one.

    values : coefficient -> value; those left out keep the injected one. InputError as `templates_at`.
    """
    point = checked_point(templates, values or {})
    phi = monomials([point[coefficient.name] for coefficient in templates.coefficients])
    what = point_text(point)
    found = []
    for (category, component), template in templates.templates.items():
        if template.moments is not None and template.variance.sum() > 0:
            events = float(template.nominal.sum() ** 2 / template.variance.sum())
            squares = float(phi @ template.moments @ phi)
            total = float(contents_at(template, point).sum())
            effective = total**2 / squares if squares > 0 else 0.0
            found.append(Reweighting(category, component, what, events, effective))
    return tuple(found)


def whole_reweightings(templates: TemplateSet, values: Mapping[str, float]) -> tuple[Reweighting, ...]:
    """The same of each component over all categories; `category` is ""."""
    sums: dict[str, tuple[float, float, float]] = {}
    point = checked_point(templates, values)
    for there in reweightings(templates, values):
        weights = float(contents_at(templates.templates[there.category, there.component], point).sum())
        squares = weights**2 / there.effective if there.effective > 0 else 0.0
        known = sums.get(there.component, (0.0, 0.0, 0.0))
        sums[there.component] = known[0] + there.events, known[1] + weights, known[2] + squares
    return tuple(
        Reweighting("", component, point_text(values), events, weights**2 / squares if squares > 0 else 0.0)
        for component, (events, weights, squares) in sums.items()
    )


def poor_reweightings(templates: TemplateSet, values: Mapping[str, float] | None = None) -> Iterator[Problem]:
    """A problem for each component whose effective events fall below SHARE_AT_LEAST of what the injected point has."""
    at_home = {(r.category, r.component): r for r in reweightings(templates)}
    by_component: dict[str, list[tuple[Reweighting, Reweighting]]] = {}
    for there in reweightings(templates, values):
        home = at_home[there.category, there.component]
        by_component.setdefault(there.component, []).append((there, home))
    for component, found in by_component.items():
        worst, home = min(found, key=lambda both: both[0].effective / max(both[1].effective, 1e-300))
        if worst.effective < SHARE_AT_LEAST * home.effective:
            yield Problem(
                f"few effective events behind {component} in {worst.category}",
                worst.what,
                got=f"{worst.effective:.0f} of {home.effective:.0f}",
                wanted=f"at least {SHARE_AT_LEAST:.0%}",
                remedy="Generate more events, or build the templates near this point ([wilson] in the study file).",
            )


def checked_point(templates: TemplateSet, values: Mapping[str, float]) -> dict[str, float]:
    """The injected point with these changes. InputError for unknown names and values out of range."""
    known = {coefficient.name: coefficient for coefficient in templates.coefficients}
    problems = [problem for name, value in values.items() for problem in _point_problems(known, name, value)]
    if problems:
        raise InputError(*problems)
    return injected_values(templates) | {name: float(value) for name, value in values.items()}


def _point_problems(known: Mapping[str, Coefficient], name: str, value: object) -> Iterator[Problem]:
    if name not in known:
        close = get_close_matches(name, known, n=1)
        remedy = f"Did you mean {close[0]!r}?" if close else ""
        if not known:
            remedy = "Build the templates with a [quadratic] table in the study file."
        what = "the templates are no functions of this coefficient"
        yield Problem(what, f"coefficient {name}", wanted=", ".join(known) or "none", remedy=remedy)
        return
    limit = known[name].limit
    number = isinstance(value, int | float | np.number) and not isinstance(value, bool)
    if not number or not isfinite(float(value)) or abs(float(value)) > limit:  # type: ignore[arg-type]
        yield Problem("not a value for this coefficient", f"coefficient {name}", repr(value), f"±{limit:g} at most")


def point_text(values: Mapping[str, float]) -> str:
    """A point in words: "SR = 0.3, T = 0"."""
    return ", ".join(f"{name} = {value:g}" for name, value in values.items())


def templates_at(templates: TemplateSet, values: Mapping[str, float]) -> TemplateSet:
    """The template set of another point, without generating anything.

    values : coefficient -> value; those left out keep the value that the templates were made with.

    The nominal contents become T(c), the ratios that follow the coefficients become R(c), and c is the injected point.
    A component with a rate of its own keeps its size, or follows its ratio: T(c) is divided by the rate, and multiplied
    with R(c)/R(c_0). Variations keep their relative change of each bin. The variances go with (T(c)/T(c_0))² and add up
    to the sum of the squared weights at c, where the moments tell it.

    Raises InputError for unknown names, values out of range, a point without rate, and a template that fewer than
    EVENTS_AT_LEAST effective events would make although it had more.
    """
    point = checked_point(templates, values)
    effective = {(r.category, r.component): r.effective for r in reweightings(templates, point)}
    before = {(r.category, r.component): r.effective for r in reweightings(templates)}
    problems = [
        Problem(
            f"too few effective events behind {key[1]} in {key[0]}",
            point_text(point),
            got=f"{effective[key]:.1f} of {before[key]:.0f}",
            wanted=f"at least {EVENTS_AT_LEAST:g}",
            remedy="Generate more events, or build the templates near this point ([wilson] in the study file).",
        )
        for key in effective
        if effective[key] < EVENTS_AT_LEAST <= before[key]
    ]
    parameters = []
    growth: dict[str, float] = {}
    for parameter in templates.parameters:
        if parameter.rate:
            below = form_at(parameter.over, point)
            injected = form_at(parameter.rate, point) / below if below > 0 else 0.0
            if not injected > 1e-6 * parameter.injected:
                problems.append(
                    Problem("there is no rate at this point", point_text(point), got=f"{parameter.name} = {injected:g}")
                )
                continue
            growth[parameter.name] = injected / parameter.injected
            over = tuple((a, b, piece / below) for a, b, piece in parameter.over)
            rate = tuple((a, b, piece / below) for a, b, piece in parameter.rate) if over else parameter.rate
            parameter = replace(parameter, injected=injected, rate=rate, over=over)
        parameters.append(parameter)
    components, sizes = [], {}
    for component in templates.components:
        if component.rate:
            size = form_at(component.rate, point)
            if not size > 1e-6:
                problems.append(
                    Problem("there is no rate at this point", point_text(point), got=f"{component.name}: {size:g}")
                )
                continue
            sizes[component.name] = prod(growth.get(name, 1.0) for name in component.scales_with) / size
            component = replace(component, rate=tuple((a, b, piece / size) for a, b, piece in component.rate))
        components.append(component)
    if problems:
        raise InputError(*problems)
    moved = {key: _moved(template, point, sizes.get(key[1], 1.0)) for key, template in templates.templates.items()}
    coefficients = tuple(replace(known, value=point[known.name]) for known in templates.coefficients)
    return replace(
        templates,
        components=tuple(components),
        parameters=tuple(parameters),
        templates=moved,
        coefficients=coefficients,
    )


def _moved(template: Template, point: Mapping[str, float], size: float) -> Template:
    """size : what T(c) is multiplied with."""
    if not template.quadratic:
        return template
    contents = size * contents_at(template, point)
    there = template.nominal != 0
    factor = np.where(there, contents / np.where(there, template.nominal, 1.0), 1.0)
    variance = template.variance * factor**2
    if template.moments is not None and variance.any():
        phi = monomials(list(point.values()))
        variance *= size**2 * max(float(phi @ template.moments @ phi), 0.0) / variance.sum()
    sides = [{name: values * factor for name, values in side.items()} for side in (template.plus, template.minus)]
    changed = replace(template, nominal=contents, variance=variance, plus=sides[0], minus=sides[1])
    if size == 1.0:
        return changed
    pieces = {pair: size * piece for pair, piece in template.quadratic.items()}
    return replace(changed, quadratic=pieces, moments=None if template.moments is None else size**2 * template.moments)


def contracted(pieces: Mapping[Pair, Floats], values: Mapping[str, float], kept: Sequence[str]) -> dict[Pair, Floats]:
    """Pieces with all coefficients but `kept` put at their values; zero pieces left out, pairs in the order of kept."""
    order = {ONE: 0, **{name: 1 + i for i, name in enumerate(kept)}}
    found: dict[Pair, Floats] = {}
    for (a, b), piece in pieces.items():
        factor, names = 1.0, []
        for name in (a, b):
            if name == ONE or name in order:
                names.append(name)
            else:
                factor *= values[name]
                names.append(ONE)
        names.sort(key=order.__getitem__)
        pair = names[0], names[1]
        found[pair] = found.get(pair, np.zeros_like(piece)) + factor * piece
    return {pair: piece for pair, piece in found.items() if piece.any()}
