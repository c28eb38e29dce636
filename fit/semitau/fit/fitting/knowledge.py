"""What a model is told about its parameters, gathered from all its arguments and checked against one another."""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from difflib import get_close_matches
from math import inf, isfinite

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.templates import TemplateSet

from ..likelihood.constraints import Constraint, Correlated, Gaussian, LogNormal, Uniform, problems_of, range_problems
from ..likelihood.functions import Function, read_function


@dataclass(frozen=True)
class Knowledge:
    """Everything by parameter name, sound and without contradictions."""

    fixed: Mapping[str, float]
    single: Mapping[str, Constraint]
    blocks: tuple[Correlated, ...]
    bounds: Mapping[str, tuple[float, float]]
    functions: Mapping[str, Function]

    @classmethod
    def gather(
        cls,
        templates: TemplateSet,
        fixed: Mapping[str, float] | None,
        yields: Mapping[str, float | None] | None,
        constraints: Mapping[str, Constraint | None] | None,
        correlated: Sequence[Correlated],
        bounds: Mapping[str, tuple[float | None, float | None]] | None,
        functions: Mapping[str, str] | None,
        coefficients: Mapping[str, float],
    ) -> Knowledge:
        """The arguments of Model; of the coefficients those that are fitted. Raises InputError with every problem."""
        injected = {p.name: p.injected for p in templates.parameters} | {n.name: 0.0 for n in templates.nuisances}
        injected |= coefficients
        scales = [p.name for p in templates.parameters]
        fixed, yields, constraints, bounds = (
            dict(fixed or {}),
            dict(yields or {}),
            dict(constraints or {}),
            bounds or {},
        )
        ranges = {
            name: (-inf if low is None else float(low), inf if high is None else float(high))
            for name, (low, high) in bounds.items()
        }
        kinds = {p.name: p.kind for p in templates.parameters}
        refuse(
            [
                *_unknown_names(injected, scales, fixed, yields, constraints, correlated, bounds, functions or {}),
                *_number_problems(fixed, yields),
                *(problem for name, c in constraints.items() if c is not None
                  for problem in problems_of(name, kinds.get(name, "nuisance"), c)),
                *(problem for name, ends in ranges.items() for problem in range_problems(f"bounds of {name}", *ends)),
            ]
        )  # fmt: skip
        single: dict[str, Constraint] = {n.name: Gaussian(1.0) for n in templates.nuisances}
        single |= {p.name: Gaussian(p.constraint) for p in templates.parameters if p.constraint is not None}
        single |= {
            c.name: Gaussian(c.constraint)
            for c in templates.coefficients
            if c.name in coefficients and c.constraint is not None
        }
        _replace(single, {name: None if sigma is None else Gaussian(sigma) for name, sigma in yields.items()})
        _replace(single, constraints)
        for block in correlated:
            _replace(single, dict.fromkeys(block.names))
        read = {name: read_function(name, text) for name, text in (functions or {}).items()}
        known = cls(fixed, single, tuple(correlated), ranges, read)
        refuse(known._contradictions(injected, constraints))
        return known

    def range_of(self, name: str) -> tuple[float, float]:
        low, high = self.bounds.get(name, (-inf, inf))
        own = self.single.get(name)
        return (max(low, own.low), min(high, own.high)) if isinstance(own, Uniform) else (low, high)

    def law_of(self, name: str, injected: float) -> tuple[str, float | None]:
        """Law of the constraint, and the standard deviation of the auxiliary measurement, None without one."""
        match self.single.get(name):
            case Gaussian(sigma=sigma):
                return "gaussian", sigma
            case LogNormal(sigma=sigma):
                return "log-normal", sigma * injected
            case Uniform():
                return "uniform", None
        for block in self.blocks:
            if name in block.names:
                place = block.names.index(name)
                return "correlated", float(np.sqrt(block.covariance[place, place]))
        return "none", None

    def _contradictions(self, injected: Mapping[str, float], asked: Mapping[str, object]) -> Iterator[Problem]:
        together = [name for block in self.blocks for name in block.names]
        for name in sorted({name for name in together if together.count(name) > 1 or name in asked}):
            yield Problem("the parameter has two constraints", f"parameter {name}", remedy="Keep one of them.")
        for name, function in self.functions.items():
            where = f"function for {name}"
            yield from (
                Problem(what, where, got=function.text, wanted=wanted)
                for there, what, wanted in (
                    (name in self.fixed, "the parameter is held fixed as well", "one of both"),
                    (self.range_of(name) != (-inf, inf), "a function has no bounds", "bounds of its parameters"),
                    (not function.names, "the formula has no parameter in it", "hold it fixed instead"),
                )
                if there
            )  # fmt: skip
            for used in function.names:
                if used not in injected:
                    yield _at(unknown("parameter", used, injected), where)
                elif used in self.functions:
                    yield Problem(
                        "a function may not follow another function", where, got=used,
                        remedy="Write out what that one is made of.",
                    )  # fmt: skip
        for name, value in self.fixed.items():
            low, high = self.range_of(name)
            if not low <= value <= high:
                yield Problem(
                    "held outside its bounds", f"fixed: {name}", got=f"{value:g}", wanted=f"{low:g} to {high:g}"
                )
        for name in injected:
            low, high = self.range_of(name)
            if name not in self.fixed and not low <= injected[name] <= high:
                yield Problem(
                    "the value that the templates were made with is outside the bounds", f"parameter {name}",
                    got=f"{injected[name]:g}", wanted=f"{low:g} to {high:g}",
                )  # fmt: skip


def unknown(kind: str, name: object, known: Iterable[str]) -> Problem:
    known = list(known)
    close = get_close_matches(str(name), known, n=1)
    remedy = f"Did you mean {close[0]!r}?" if close else ""
    return Problem(f"there is no such {kind}", got=repr(name), wanted=", ".join(known) or "none", remedy=remedy)


def refuse(problems: Iterable[Problem]) -> None:
    found = tuple(problems)
    if found:
        raise InputError(*found)


def _at(problem: Problem, where: str) -> Problem:
    return Problem(problem.what, where, problem.got, problem.wanted, problem.remedy)


def _unknown_names(
    injected: Mapping[str, float],
    scales: Sequence[str],
    fixed: Mapping[str, float],
    yields: Mapping[str, float | None],
    constraints: Mapping[str, object],
    correlated: Sequence[Correlated],
    bounds: Mapping[str, object],
    functions: Mapping[str, str],
) -> Iterator[Problem]:
    asked = [*fixed, *constraints, *bounds, *functions, *(name for block in correlated for name in block.names)]
    yield from (unknown("parameter", name, injected) for name in dict.fromkeys(asked) if name not in injected)
    yield from (unknown("scale parameter", name, scales) for name in yields if name not in scales)


def _number_problems(fixed: Mapping[str, float], yields: Mapping[str, float | None]) -> Iterator[Problem]:
    for name, value in fixed.items():
        if not _is_number(value):
            yield Problem("a parameter must be fixed to a finite number", f"fixed: {name}", got=repr(value))
    for name, sigma in yields.items():
        if sigma is not None and not (_is_number(sigma) and sigma > 0):
            yield Problem("a constraint must be a positive number, or None", f"yields: {name}", got=repr(sigma))


def _is_number(value: object) -> bool:
    return isinstance(value, int | float | np.number) and not isinstance(value, bool) and isfinite(value)


def _replace(single: dict[str, Constraint], by: Mapping[str, Constraint | None]) -> None:
    for name, constraint in by.items():
        single.pop(name, None)
        if constraint is not None:
            single[name] = constraint
