"""Parameters that are functions of others: ties, isospin, common efficiencies, feed-down fractions.

A function is a sum of products of powers, written as text: "R_D", "0.5 * total * fraction", "1 - fraction",
"yield_a * efficiency / 1.02". That covers what templates are scaled with, and has exact derivatives of any order:

    x = Σ_terms c Π_k x_k^{e_k},  or one over such a sum.

The likelihood is computed with all parameters as if they were independent; gradient and Hessian are then pulled back to
the fitted ones by the chain rule.
"""

from __future__ import annotations

import ast
from collections.abc import Iterable, Mapping
from dataclasses import dataclass
from math import isfinite
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from semitau.core.compiled import kernel
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats

Wholes = NDArray[np.int64]


Powers = tuple[tuple[str, float], ...]


@dataclass(frozen=True)
class Function:
    """A sum of products of powers. terms : (name, power) pairs, sorted by name -> coefficient.

    inverse : whether it is one over that sum.
    """

    text: str
    terms: Mapping[Powers, float]
    inverse: bool = False

    @property
    def names(self) -> tuple[str, ...]:
        return tuple(sorted({name for powers in self.terms for name, _ in powers}))


def read_function(name: str, text: str) -> Function:
    """Understand the text of a function. Raises InputError with what it does not understand."""
    where = f"function for {name}"
    try:
        tree = ast.parse(text.strip(), mode="eval").body
    except (SyntaxError, ValueError) as error:
        raise InputError(Problem("not a formula", where, got=repr(text))) from error
    number, below = _number_over_sum(tree, where, text)
    terms = {p: c / number for p, c in (_terms(tree, where, text) if below is None else below).items() if c != 0.0}
    if not terms or any(not isfinite(c) for c in terms.values()):
        raise InputError(Problem("the formula is zero or not finite", where, got=repr(text)))
    return Function(text, terms, inverse=below is not None)


def _number_over_sum(node: ast.expr, where: str, text: str) -> tuple[float, dict[Powers, float] | None]:
    """Of "2 / (1 + a)" the number and the terms of the sum; 1 and None of any other formula."""
    if isinstance(node, ast.BinOp) and isinstance(node.op, ast.Div):
        above, below = _terms(node.left, where, text), _terms(node.right, where, text)
        if set(above) == {()} and above[()] != 0.0 and len(below) > 1:
            return above[()], below
    return 1.0, None


def _terms(node: ast.expr, where: str, text: str) -> dict[Powers, float]:
    match node:
        case ast.Constant(value=value) if isinstance(value, int | float) and not isinstance(value, bool):
            return {(): float(value)}
        case ast.Name(id=name):
            return {((name, 1.0),): 1.0}
        case ast.UnaryOp(op=ast.USub(), operand=operand):
            return {powers: -c for powers, c in _terms(operand, where, text).items()}
        case ast.UnaryOp(op=ast.UAdd(), operand=operand):
            return _terms(operand, where, text)
        case ast.BinOp(left=left, op=ast.Add() | ast.Sub() as sign, right=right):
            out = _terms(left, where, text)
            for powers, c in _terms(right, where, text).items():
                out[powers] = out.get(powers, 0.0) + (c if isinstance(sign, ast.Add) else -c)
            return out
        case ast.BinOp(left=left, op=ast.Mult(), right=right):
            return _product(_terms(left, where, text), _terms(right, where, text))
        case ast.BinOp(left=left, op=ast.Div(), right=right):
            return _product(_terms(left, where, text), _power(_terms(right, where, text), -1.0, where, text))
        case ast.BinOp(left=left, op=ast.Pow(), right=right):
            exponent = _terms(right, where, text)
            if set(exponent) <= {()}:
                return _power(_terms(left, where, text), exponent.get((), 0.0), where, text)
    raise InputError(
        Problem(
            "a function may have numbers, parameters, + - * / and powers with a number",
            where,
            got=repr(ast.unparse(node)) if ast.unparse(node) == text else f"{ast.unparse(node)!r} in {text!r}",
        )
    )


def _product(first: Mapping[Powers, float], second: Mapping[Powers, float]) -> dict[Powers, float]:
    out: dict[Powers, float] = {}
    for a, c in first.items():
        for b, d in second.items():
            total = dict(a)
            for name, power in b:
                total[name] = total.get(name, 0.0) + power
            powers = tuple(sorted((name, power) for name, power in total.items() if power != 0.0))
            out[powers] = out.get(powers, 0.0) + c * d
    return out


def _power(terms: Mapping[Powers, float], exponent: float, where: str, text: str) -> dict[Powers, float]:
    if exponent == int(exponent) and 0 <= exponent <= 8:
        out: dict[Powers, float] = {(): 1.0}
        for _ in range(int(exponent)):
            out = _product(out, terms)
        return out
    if len(terms) != 1 or next(iter(terms.values())) <= 0.0:
        raise InputError(
            Problem(
                "only a product can be divided by or raised to this power, not a sum",
                where,
                got=repr(text),
                remedy="Only a number can be divided by a sum; or fit the sum as a parameter of its own.",
            )
        )
    ((powers, c),) = terms.items()
    return {tuple((name, power * exponent) for name, power in powers): c**exponent}


class Functions(NamedTuple):
    """What the compiled functions read; function i sets the parameter parameter[i]."""

    parameter: Wholes
    first_term: Wholes  # (functions + 1,)
    coefficient: Floats  # (terms,)
    first_factor: Wholes  # (terms + 1,)
    factor: Wholes  # parameter
    power: Floats
    inverse: Wholes  # 1 for one over the sum of the terms


def arrays_of(functions: Mapping[str, Function], indices: Mapping[str, int]) -> Functions:
    parameter, first_term, coefficient, first_factor = list[int](), [0], list[float](), [0]
    factor, power = list[int](), list[float]()
    for name, function in functions.items():
        parameter.append(indices[name])
        for powers, c in function.terms.items():
            coefficient.append(c)
            factor += [indices[used] for used, _ in powers]
            power += [exponent for _, exponent in powers]
            first_factor.append(len(factor))
        first_term.append(len(coefficient))
    return Functions(
        _whole(parameter), _whole(first_term), np.array(coefficient), _whole(first_factor), _whole(factor),
        np.array(power), _whole(int(function.inverse) for function in functions.values()),
    )  # fmt: skip


def _whole(values: Iterable[int]) -> Wholes:
    return np.array(list(values), dtype=np.int64)


@kernel
def _partial(f: Functions, term: int, x: Floats, skip: int, skip_too: int) -> float:
    """A term differentiated once in the factors `skip` and `skip_too` (places in f.factor, -1 for none)."""
    out: float = f.coefficient[term]
    for k in range(f.first_factor[term], f.first_factor[term + 1]):
        power, value = f.power[k], x[f.factor[k]]
        times = (1 if k == skip else 0) + (1 if k == skip_too else 0)
        for _ in range(times):
            out *= power
            power -= 1.0
        if out == 0.0:  # a power that differentiation ended
            return 0.0
        out *= value if power == 1.0 else value**power
    return out


@kernel
def set_functions(f: Functions, x: Floats) -> None:
    """Set the parameters that are functions of others."""
    for i in range(f.parameter.shape[0]):
        total = 0.0
        for term in range(f.first_term[i], f.first_term[i + 1]):
            total += _partial(f, term, x, -1, -1)
        x[f.parameter[i]] = 1.0 / total if f.inverse[i] else total


@kernel
def slopes(f: Functions, i: int, x: Floats, out: Floats) -> None:
    """Derivatives of function i in all parameters; x holds its value."""
    out[:] = 0.0
    outer = _outer_slope(f, i, x)
    for term in range(f.first_term[i], f.first_term[i + 1]):
        for k in range(f.first_factor[term], f.first_factor[term + 1]):
            out[f.factor[k]] += outer * _partial(f, term, x, k, -1)


@kernel
def _outer_slope(f: Functions, i: int, x: Floats) -> float:
    """Derivative of a function in the sum of its terms: 1, or -1/sum² of one over it."""
    value = x[f.parameter[i]]
    return -value * value if f.inverse[i] else 1.0


@kernel
def pull_back(f: Functions, x: Floats, with_curvature: bool, gradient: Floats, hessian: Floats) -> None:
    """Chain rule: gradient and Hessian in the fitted parameters; those of the functions' own become zero."""
    size = x.shape[0]
    slope = np.zeros(size)
    for i in range(f.parameter.shape[0]):
        d = f.parameter[i]
        slopes(f, i, x, slope)
        own = hessian[d, d]
        for p in range(size):
            if slope[p] != 0.0:
                gradient[p] += slope[p] * gradient[d]
        for p in range(size):
            for q in range(size):
                if p != d and q != d:
                    hessian[p, q] += slope[p] * hessian[d, q] + slope[q] * hessian[p, d] + slope[p] * slope[q] * own
        if with_curvature:
            outer = _outer_slope(f, i, x)
            if f.inverse[i]:
                for p in range(size):
                    for q in range(size):
                        hessian[p, q] += gradient[d] * 2.0 * slope[p] * slope[q] / x[d]
            for term in range(f.first_term[i], f.first_term[i + 1]):
                for k in range(f.first_factor[term], f.first_factor[term + 1]):
                    for l in range(f.first_factor[term], f.first_factor[term + 1]):
                        hessian[f.factor[k], f.factor[l]] += gradient[d] * outer * _partial(f, term, x, k, l)
        gradient[d] = 0.0
        hessian[d, :] = 0.0
        hessian[:, d] = 0.0


def jacobian(f: Functions, x: Floats) -> Floats:
    """(parameters, parameters) derivatives of all parameters in the fitted ones."""
    out = np.eye(x.size)
    row = np.zeros(x.size)
    for i, d in enumerate(f.parameter.tolist()):
        slopes(f, i, x, row)
        out[d] = row
    return out
