"""Projections of the fitted model and the data on each observable, whole and where the signal stands out."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

import numpy as np
from numpy.typing import NDArray
from semitau.core.templates import Category, Floats, TemplateSet
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.result import FitResult

from ..results import Projection, StackedComponent
from .fit_parts import component_parts
from .signal_share import signal_components

ENHANCING = "mm2"
"""Observable that tells signal (several neutrinos) from normalisation (one); a cut on it enhances the signal."""

STEP = 0.1
"""Step of the numerical derivative of the expectation, in standard deviations of each parameter."""


def projections(model: Model, result: FitResult, data: Data, withheld: float | None = None) -> tuple[Projection, ...]:
    """One projection for each observable of each category, then one for each in the signal-enhanced region.

    withheld : while ratios are hidden, the expected share of signal above which a bin is not shown, since its counts
    would tell the ratio. What is left of a projection is its longest row of bins, without the signal components; there
    is no enhanced region. None shows all.

    The region is mm2 above the bin edge where signal over the root of all events is largest, summed over categories
    with the same edges; a category without mm2 has none.
    """
    counts = model.by_category(data.counts)
    contributions = model.contributions(result.values)
    spread = _spread(model, result)
    order = [component.name for component in component_parts(model.templates)]
    starts = enhanced_starts(model.templates, contributions) if withheld is None else {}
    found = []
    for enhanced in (False, True):
        for category in model.templates.categories:
            start = starts.get(category.name)
            if enhanced and start is None:
                continue
            stack = {
                name: contributions[category.name, name] for name in order if (category.name, name) in contributions
            }
            for axis in range(len(category.observables)):
                cut = start if enhanced else None
                found.append(_project(category, axis, cut, counts[category.name], stack, spread[category.name]))
    return tuple(found) if withheld is None else tuple(_poor_in_signal(model, found, withheld))


def _poor_in_signal(model: Model, found: Sequence[Projection], withheld: float) -> Iterator[Projection]:
    signal, expected = signal_components(model), model.contributions()
    categories = {category.name: category for category in model.templates.categories}
    for projection in found:
        category = categories[projection.category]
        axis = [observable.name for observable in category.observables].index(projection.observable)
        others = tuple(i for i in range(len(category.observables)) if i != axis)
        of_signal, total = np.zeros(len(projection.data)), np.zeros(len(projection.data))
        for (name, component), contents in expected.items():
            if name == category.name:
                total += contents.sum(axis=others)
                of_signal += contents.sum(axis=others) if component in signal else 0.0
        low, high = _longest_run((total > 0) & (of_signal <= withheld * total))
        if high - low >= 2:  # one bin makes no picture
            yield projection.model_copy(
                update={
                    "edges": projection.edges[low : high + 1],
                    "data": projection.data[low:high],
                    "components": tuple(
                        StackedComponent(component=part.component, counts=part.counts[low:high])
                        for part in projection.components
                        if part.component not in signal
                    ),
                    "uncertainty": projection.uncertainty[low:high],
                }
            )


def _longest_run(shown: NDArray[np.bool_]) -> tuple[int, int]:
    """First and one past the last index of the longest row of True."""
    best, start = (0, 0), 0
    for i, yes in enumerate([*shown.tolist(), False]):
        if not yes:
            best = max(best, (start, i), key=lambda run: run[1] - run[0])
            start = i + 1
    return best


def enhanced_starts(templates: TemplateSet, contributions: Mapping[tuple[str, str], Floats]) -> dict[str, int]:
    """Category name -> index of the mm2 bin where its signal-enhanced region begins."""
    signals = [component.name for component in templates.components if component.role == "signal"]
    groups: dict[tuple[float, ...], list[Category]] = {}
    for category in templates.categories:
        axis = _enhancing_axis(category)
        if axis is not None:
            groups.setdefault(category.observables[axis].edges, []).append(category)
    starts: dict[str, int] = {}
    for edges, categories in groups.items():
        signal, total = np.zeros(len(edges) - 1), np.zeros(len(edges) - 1)
        for category in categories:
            others = tuple(i for i in range(len(category.observables)) if i != _enhancing_axis(category))
            for component in templates.components:
                contents = contributions.get((category.name, component.name))
                if contents is not None:
                    total += contents.sum(axis=others)
                    signal += contents.sum(axis=others) if component.name in signals else 0.0
        above = np.cumsum(signal[::-1])[::-1] / np.sqrt(np.maximum(np.cumsum(total[::-1])[::-1], 1e-9))
        start = int(np.argmax(above))
        # Nothing is enhanced without a cut, and one bin makes no picture.
        if signals and 0 < start < len(edges) - 2:
            starts |= {category.name: start for category in categories}
    return starts


def _enhancing_axis(category: Category) -> int | None:
    names = [observable.name for observable in category.observables]
    return names.index(ENHANCING) if ENHANCING in names else None


def _project(
    category: Category,
    axis: int,
    start: int | None,
    counts: Floats,
    stack: Mapping[str, Floats],
    spread: Sequence[Floats],
) -> Projection:
    observable = category.observables[axis]
    edges, region = observable.edges, ""
    cut_axis = _enhancing_axis(category)
    if start is not None and cut_axis is not None:
        limited = category.observables[cut_axis]
        region = f"{limited.label} > {limited.edges[start]:g} {limited.unit}".rstrip()
        edges = edges[start:] if cut_axis == axis else edges

    def sum_over_others(contents: Floats) -> Floats:
        if start is not None and cut_axis is not None:
            contents = np.take(contents, range(start, contents.shape[cut_axis]), axis=cut_axis)
        others = tuple(i for i in range(contents.ndim) if i != axis)
        projected: Floats = contents.sum(axis=others)
        return projected

    variance = sum((sum_over_others(direction) ** 2 for direction in spread), np.zeros(len(edges) - 1))
    return Projection(
        category=category.name,
        observable=observable.name,
        label=observable.label,
        unit=observable.unit,
        region=region,
        edges=edges,
        data=tuple(sum_over_others(counts).tolist()),
        components=tuple(
            StackedComponent(component=name, counts=tuple(sum_over_others(contents).tolist()))
            for name, contents in stack.items()
        ),
        uncertainty=tuple(np.sqrt(variance).tolist()),
    )


def _spread(model: Model, result: FitResult) -> dict[str, list[Floats]]:
    """Change of each category's expectation along independent directions of one standard deviation of the fit."""
    free = np.flatnonzero(result.errors > 0)
    spread: dict[str, list[Floats]] = {category.name: [] for category in model.templates.categories}
    if not np.isfinite(result.errors).all() or free.size == 0:
        return spread
    errors = result.errors[free]
    eigenvalues, vectors = np.linalg.eigh(result.covariance[np.ix_(free, free)] / np.outer(errors, errors))
    for eigenvalue, vector in zip(eigenvalues, vectors.T, strict=True):
        shift = np.zeros(result.values.size)
        shift[free] = np.sqrt(max(eigenvalue, 0.0)) * vector * errors
        up = model.expected(result.values + STEP * shift)
        down = model.expected(result.values - STEP * shift)
        for name, directions in spread.items():
            directions.append((up[name] - down[name]) / (2 * STEP))
    return spread
