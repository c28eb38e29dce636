"""Whether the assigned systematic error covers a shift, and how sure that is."""

from __future__ import annotations

from collections.abc import Collection, Iterator
from math import isfinite
from typing import Literal

import numpy as np

from ..fitting.model import Model
from .decomposition import Budget

Covered = Literal["negligible", "covered", "not covered", "undecided"]

SURE = 2.0
"""Errors of the shift by which it must keep away from a limit to be on one side of it: 2.3% each."""


def covering_error(model: Model, budget: Budget, chosen: Collection[str] = ()) -> float:
    """The part of an error that comes from the chosen groups and constrained parameters, each counted once.

    chosen : names of groups (rows of the budget) or of parameters; empty for the whole systematic error. Parameters
        that were measured together count together.
    """
    if not chosen:
        return budget.systematic
    groups = {parameter.name: parameter.group for parameter in model.parameters}
    parts = [
        error
        for source, error in budget.sources.items()
        if any(name in chosen or groups[name] in chosen for name in source.split(" & "))
    ]
    return float(np.sqrt(sum(part**2 for part in parts)))


def known_coverings(model: Model) -> Iterator[str]:
    """Names that `covering_error` knows: groups, then constrained parameters."""
    known = [parameter for parameter in model.parameters if parameter.constraint is not None]
    yield from dict.fromkeys(parameter.group for parameter in known)
    yield from (parameter.name for parameter in known)


def judge_shift(shift: float, shift_error: float, covering: float, total: float, negligible: float) -> Covered:
    """Compare the size of a shift with the error that is meant to cover it.

    total : whole error. negligible : share of it below which the shift does not matter, covered or not.

    A word is given only if the shift keeps SURE of its own errors away from the limit in question.
    """
    size, doubt = abs(shift), SURE * shift_error
    if not isfinite(doubt):
        return "undecided"
    if size + doubt <= negligible * total:
        return "negligible"
    if size + doubt <= covering:
        return "covered"
    if size - doubt > max(covering, negligible * total):
        return "not covered"
    return "undecided"
