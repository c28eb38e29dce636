"""Fits of coefficients that templates are quadratic functions of (core/quadratic.py)."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from difflib import get_close_matches
from itertools import product
from math import prod
from typing import TYPE_CHECKING

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.quadratic import injected_values, poor_reweightings
from semitau.core.templates import ONE, Floats, TemplateSet

from ..likelihood.scaled_parts import Part

if TYPE_CHECKING:
    from .data import Source
    from .model import Model
    from .result import FitResult

STEP = 0.05
"""How far from a point of symmetry a coefficient starts, as a part of its limit: there the likelihood has no slope."""

STARTS = (-0.8, -0.3, 0.0, 0.3, 0.8)
"""Further starts of each coefficient, as parts of its limit."""

CLOSE = 9.0
"""-2 ln L above the deepest minimum up to which another one is worth telling: three standard deviations."""


def deepest(model: Model, data: Source) -> tuple[FitResult, tuple[FitResult, ...]]:
    """The deepest minimum from many starts in the coefficients, and others that are nearly as deep, deepest first.

    What is quadratic in the coefficients has the same rate at two points, and the likelihood may have as many minima.
    Starts: the injected point, and all combinations of STARTS for the first three couplings that are free.
    """
    from .newton import maximise

    limits = {known.name: known.limit for known in model.templates.coefficients}
    couplings = {known.name for known in model.templates.coefficients if known.kind == "coupling"}
    movable = set(model.free.tolist())
    free = [name for name in model.coefficients if name in couplings and model.index(name) in movable]
    checked = model.data(data)
    results = [maximise(model, checked)]
    for parts in product(STARTS, repeat=min(len(free), 3)) if free else ():
        start = dict(zip(free, model.start[[model.index(name) for name in free]].tolist(), strict=True))
        start |= {name: part * limits[name] for name, part in zip(free, parts, strict=False) if part}
        results.append(maximise(model, checked, start))
    valid = sorted((r for r in results if r.valid), key=lambda result: result.minus_log_likelihood)
    if not valid:
        return results[0], ()
    distinct: list[FitResult] = []
    for result in valid:
        near = 2.0 * (result.minus_log_likelihood - valid[0].minus_log_likelihood) <= CLOSE
        if near and all(_apart(model, free, result, other) for other in distinct):
            distinct.append(result)
    return distinct[0], tuple(distinct[1:])


def _apart(model: Model, names: Sequence[str], first: FitResult, second: FitResult) -> bool:
    """Whether two fits are at different places, signs of coefficients without a slope left aside."""
    mirrored = {name for name in names if model.start[model.index(name)] != model.injected[model.index(name)]}
    for name in names:
        a, b = first.value(name), second.value(name)
        if name in mirrored:
            centre = float(model.injected[model.index(name)])
            a, b = abs(a - centre), abs(b - centre)
        if abs(a - b) > 0.05 * max(first.error(name), 1e-6):
            return True
    return False


def fitted_point(model: Model, result: FitResult) -> dict[str, float]:
    """All coefficients of the template set at the result of a fit."""
    return injected_values(model.templates) | {name: result.value(name) for name in model.coefficients}


def doubts(model: Model, result: FitResult) -> tuple[Problem, ...]:
    """What speaks against the templates at the fitted coefficients: beyond their limits, or few effective events."""
    point = fitted_point(model, result)
    limits = {known.name: known.limit for known in model.templates.coefficients}
    beyond = tuple(
        Problem("fitted beyond the range of the templates", f"coefficient {name}", f"{value:g}", f"±{limits[name]:g}")
        for name, value in point.items()
        if abs(value) > limits[name]
    )
    return beyond or tuple(poor_reweightings(model.templates, point))


def floated(templates: TemplateSet, names: Sequence[str], likelihood: str) -> tuple[str, ...]:
    """Names of coefficients to fit, in the order of the template set. InputError for what cannot be."""
    names = [names] if isinstance(names, str) else list(names)
    problems = list(_problems(templates, names, likelihood))
    if problems:
        raise InputError(*problems)
    return tuple(known.name for known in templates.coefficients if known.name in names)


def _problems(templates: TemplateSet, names: Sequence[str], likelihood: str) -> Iterator[Problem]:
    known = [coefficient.name for coefficient in templates.coefficients]
    for name in names:
        if name not in known:
            close = get_close_matches(str(name), known, n=1)
            remedy = f"Did you mean {close[0]!r}?" if close else ""
            if not known:
                remedy = "Build the templates with a [quadratic] table in the study file."
            what = "the templates are no functions of this coefficient"
            yield Problem(what, f"coefficient {name}", wanted=", ".join(known) or "none", remedy=remedy)
    if names and likelihood == "exact":
        yield Problem(
            "no coefficients can be fitted with a factor for each component in each bin",
            "likelihood",
            got=likelihood,
            wanted="light, approximate",
        )
    kinds = {known.kind for known in templates.coefficients if known.name in names}
    if len(kinds) > 1:
        yield Problem(
            "ratios cannot follow some fitted coefficients and be free of others",
            "coefficients",
            got=", ".join(names),
            remedy="Fit couplings, or coefficients of shapes, and hold the others.",
        )


def followed_rates(templates: TemplateSet, coefficients: Sequence[str]) -> dict[str, str]:
    """Ratios that depend on a fitted coefficient -> formula in these (functions.py), the others at their values."""
    values, found = injected_values(templates), {}
    if any(known.kind == "shape" for known in templates.coefficients if known.name in coefficients):
        return {}  # these leave ratios free
    for parameter in templates.parameters:
        terms: dict[tuple[str, ...], float] = {}
        if any(name in coefficients for a, b, _ in parameter.over for name in (a, b)):
            raise InputError(Problem("what a ratio is over cannot follow couplings", f"parameter {parameter.name}"))
        for a, b, piece in parameter.rate:
            factor, names = piece, []
            for name in (a, b):
                if name in coefficients:
                    names.append(name)
                elif name != ONE:
                    factor *= values[name]
            terms[tuple(names)] = terms.get(tuple(names), 0.0) + factor
        if any(names and factor for names, factor in terms.items()):
            found[parameter.name] = _sum(terms)
    return found


def _sum(terms: Mapping[tuple[str, ...], float]) -> str:
    return " + ".join(" * ".join([f"({c!r})", *names]) for names, c in terms.items() if c)


SIZE = "_size_"
"""Begins the name of the parameter that keeps the size of a component."""


def kept_sizes(templates: TemplateSet, coefficients: Sequence[str]) -> dict[str, str]:
    """Components whose rate depends on a fitted coefficient -> formula of one over that rate, 1 at the injected point.

    With it the coefficients change what a component looks like, and only its scale parameters how large it is.
    """
    values, found = injected_values(templates), {}
    for component in templates.components:
        terms: dict[tuple[str, ...], float] = {}
        for a, b, piece in component.rate:
            names = tuple(name for name in (a, b) if name in coefficients)
            held = prod(values[name] for name in (a, b) if name not in (*coefficients, ONE))
            terms[names] = terms.get(names, 0.0) + held * piece
        if any(names and factor for names, factor in terms.items()):
            found[component.name] = f"1 / ({_sum(terms)})"
    return found


def set_twice(following: Mapping[str, str], functions: Mapping[str, str]) -> Iterator[Problem]:
    """A ratio that follows the coefficients cannot follow something else."""
    for name in following:
        if name in functions:
            yield Problem("the ratio follows the fitted coefficients already", f"function for {name}")


def starting_shifts(parts: Sequence[Part], templates: TemplateSet, free: Sequence[str]) -> Mapping[str, float]:
    """How far from the injected value a fitted coefficient has to start, where the templates have no slope in it.

    That is so for an imaginary part whose real one interferes: its sign changes nothing.
    """
    point, found = injected_values(templates), {}
    for known in templates.coefficients:
        if known.name in free and known.kind == "coupling":
            slopes: dict[tuple[str, str], Floats] = {}
            for part in parts:
                if known.name in part.scales:
                    for category, template in part.templates.items():
                        key = part.component, category
                        slope = _slope(part, known.name, point) * template.nominal
                        slopes[key] = slopes.get(key, np.zeros_like(slope)) + slope
            if slopes and not any(slope.any() for slope in slopes.values()):
                found[known.name] = STEP * known.limit
    return found


def _slope(part: Part, name: str, point: Mapping[str, float]) -> float:
    """Derivative of the part's factor with respect to a coefficient, at a point."""
    named = [scale for scale in part.scales if scale in point]
    times = named.count(name)
    others = [point[other] for other in named if other != name]
    return times * point[name] ** (times - 1) * float(np.prod(others))
