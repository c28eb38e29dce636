"""Observed counts, checked against the model before they meet the likelihood."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from os import PathLike
from pathlib import Path
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import ArrayLike
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats, TemplateSet

from ..likelihood.layout import bin_name

if TYPE_CHECKING:
    from .model import Model


@dataclass(frozen=True, eq=False)
class Data:
    """What one fit is made to.

    counts : (bins,) events, over all categories in the order of the model.
    centres : (parameters,) auxiliary measurements of the constrained parameters; ignored where there is no constraint.
    gamma_centres : (bins,) auxiliary measurements of the template-statistics factors: 1 but in toys.
    """

    counts: Floats
    centres: Floats
    gamma_centres: Floats

    def __post_init__(self) -> None:
        for name in ("counts", "centres", "gamma_centres"):
            array = np.array(getattr(self, name), dtype=np.float64)
            array.flags.writeable = False
            object.__setattr__(self, name, array)


Source = Data | TemplateSet | Mapping[str, ArrayLike] | ArrayLike | str | PathLike[str]


def read_data(model: Model, source: Source) -> Data:
    """See Model.data."""
    if isinstance(source, Data):
        data = source
    else:
        data = Data(_counts(model, source), model.injected, np.ones(model.bins))
    problems = tuple(_problems(model, data))
    if problems:
        raise InputError(*problems)
    return data


def _counts(model: Model, source: Source) -> Floats:
    if isinstance(source, str | PathLike):
        from semitau.core.template_file import read_data as read_file

        return _counts(model, read_file(Path(source), model.templates, whole_counts=False))
    if isinstance(source, TemplateSet):
        if not source.data:
            raise InputError(
                Problem("there are no observed counts", "templates", remedy="Add them as <category>/data.")
            )
        return _counts(model, source.data)
    if not isinstance(source, Mapping):
        return _numbers(source, "data", (model.bins,)) if not isinstance(source, Data) else source.counts
    shapes = {category.name: category.shape for category in model.templates.categories}
    problems = [
        Problem("there is no such category", f"data: {name}", wanted=", ".join(shapes))
        for name in source
        if name not in shapes
    ]
    problems += [
        Problem("counts are missing", f"category {name}", remedy="Give the counts of every category; zeros if none.")
        for name in shapes
        if name not in source
    ]
    if problems:
        raise InputError(*problems)
    return np.concatenate([_numbers(source[name], f"category {name}", shape).ravel() for name, shape in shapes.items()])


def _numbers(values: object, where: str, shape: tuple[int, ...]) -> Floats:
    try:
        array = np.array(values, dtype=np.float64)
    except (TypeError, ValueError) as error:
        raise InputError(Problem("not an array of numbers", where, got=type(values).__name__)) from error
    if array.shape != shape:
        raise InputError(Problem("the counts have the wrong shape", where, got=str(array.shape), wanted=str(shape)))
    return array


def _problems(model: Model, data: Data) -> Iterator[Problem]:
    sizes = {"counts": model.bins, "centres": len(model.parameters), "gamma_centres": model.bins}
    for name, size in sizes.items():
        if getattr(data, name).shape != (size,):
            yield Problem("the data do not fit the model", name, str(getattr(data, name).shape), f"({size},)")
            return
        if name != "counts" and not np.isfinite(getattr(data, name)).all():
            yield Problem("auxiliary measurements must be finite", name)
    first = 0
    for category in model.templates.categories:
        size = int(np.prod(category.shape))
        counts = data.counts[first : first + size]
        hollow = model.layout.bin_lane[first : first + size] < 0
        rules = (
            ("the count is not finite", ~np.isfinite(counts), "Correct the data."),
            ("the count is negative", counts < 0, "Subtract no backgrounds: they are components of the fit."),
            (
                "events were seen where none are expected",
                hollow & (counts > 0),
                "Add the component that is missing, merge bins, or generate more events.",
            ),
        )
        for what, wrong, remedy in rules:
            found = np.flatnonzero(wrong)
            for index in found[:3]:
                more = f" (and {found.size - 3} more bins)" if index == found[:3][-1] and found.size > 3 else ""
                where = bin_name(category, int(index)) + more
                yield Problem(what, where, got=f"{counts[index]:g}", remedy=remedy)
        first += size
