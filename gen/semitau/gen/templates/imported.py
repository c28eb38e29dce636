"""Templates and data that come from other simulations, added to those of the study.

What is checked: edges of the category among those of the histogram, finite and not negative contents, squared weights
that are there and are possible, no events outside unless asked for, both sides of a variation, whole counts of data.
Of N fillings with weights w, (Σw)² ≤ N Σw² (Cauchy and Schwarz): more effective events than fillings means that the
weights came in twice or that contents were scaled without their squares.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import replace
from pathlib import Path

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.root_files import root_histogram
from semitau.core.templates import Category, Component, Floats, Nuisance, ScaleParameter, Template, TemplateSet

from ..shapes.files import columns
from ..study_file.imports import ImportedComponent, ImportedSides, Source
from ..study_file.study import StudyConfig

Filled = tuple[Floats, Floats]
"""Contents and variances, in the shape of the category."""


def with_imports(study: StudyConfig, templates: TemplateSet) -> TemplateSet:
    """The templates of the study with the imported components, their yields and nuisances.

    Raises InputError for whatever is wrong with a file; see the module.
    """
    if study.imports is None or not study.imports.components:
        return templates
    parameters, nuisances = list(templates.parameters), list(templates.nuisances)
    components, found = list(templates.components), dict(templates.templates)
    problems: list[Problem] = []
    for item in study.imports.components:
        known = [parameter.name for parameter in parameters]
        problems += [
            Problem("there is no such parameter", f"import of {item.name}: scales_with", repr(name), ", ".join(known))
            for name in item.scales_with
            if name not in known
        ]
        scales = list(item.scales_with)
        if item.yield_constraint.kind != "fixed":
            label = f"yield of {item.label or item.name}"
            own = ScaleParameter(f"yield_{item.name}", label, "yield", 1.0, item.yield_constraint.uncertainty)
            parameters.append(own)
            scales.append(own.name)
        components.append(Component(item.name, item.label or item.name, item.role, tuple(scales)))
        for sides in item.variations:
            if sides.name not in {nuisance.name for nuisance in nuisances}:
                nuisances.append(Nuisance(sides.name, sides.label or sides.name, sides.group))
        for category in templates.categories:
            if item.categories is None or category.name in item.categories:
                try:
                    found[category.name, item.name] = _template(study, item, category)
                except InputError as error:
                    problems += [problem.inside(f"import of {item.name}") for problem in error.problems]
    if problems:
        raise InputError(*problems)
    return replace(
        templates,
        components=tuple(components),
        parameters=tuple(parameters),
        nuisances=tuple(nuisances),
        templates=found,
    )


def imported_data(study: StudyConfig, templates: TemplateSet) -> dict[str, Floats]:
    """Observed counts of [import.data] by category. Raises InputError as above, and for counts that are not whole."""
    if study.imports is None or study.imports.data is None:
        raise InputError(Problem("there is no [import.data]", "[fit] data", remedy="Say where the data are."))
    source, observed = study.imports.data, {}
    for category in templates.categories:
        name = _named(source, category)
        where = f"import of data: {source.file}: {name}"
        if source.histogram is not None:
            # Before bins are merged: sums can hide what is wrong.
            _refuse_no_counts(root_histogram(study.beside(source.file), name).all_contents, where)
        observed[category.name], _ = _filled(study, source, category, name, None)
    return observed


def _refuse_no_counts(contents: Floats, where: str) -> None:
    for what, wrong in (
        ("negative count", contents < 0),
        ("the count is not whole", contents != np.round(contents)),
    ):
        if wrong.any():
            place = np.argwhere(wrong)[0]
            remedy = "Data are counted, not weighted or subtracted from."
            at = f"{where} bin {(place - 1).tolist()}"
            raise InputError(Problem(what, at, got=f"{contents[tuple(place)]:g}", remedy=remedy))


def _template(study: StudyConfig, item: ImportedComponent, category: Category) -> Template:
    name = _named(item, category)
    where = f"{item.file}: {name}"
    contents, variances = _filled(study, item, category, name, item.weight)
    if not contents.any():
        raise InputError(Problem("has no events within the axes", where, remedy="Leave its category out."))
    negative = contents < 0
    if negative.any() and item.negative == "refuse":
        place = np.argwhere(negative)[0].tolist()
        remedy = 'Merge bins, or say negative = "clear".'
        raise InputError(
            Problem("has a negative bin", f"{where} bin {place}", f"{contents[tuple(place)]:g}", "", remedy)
        )
    nominal = np.maximum(contents, 0.0) if negative.any() else contents
    plus, minus = {}, {}
    for sides in item.variations:
        up, down = _sides(study, item, category, sides, nominal)
        plus[sides.name], minus[sides.name] = item.scale * up, item.scale * down
    return Template(item.scale * nominal, item.scale**2 * variances, plus, minus)


def _sides(
    study: StudyConfig, item: ImportedComponent, category: Category, sides: ImportedSides, nominal: Floats
) -> Filled:
    def one(name: str) -> Floats:
        named = name.replace("{category}", category.name)
        if item.tree is None:
            return _filled(study, item, category, named, None)[0]
        return _filled(study, item, category, _named(item, category), named)[0]

    up = one(sides.plus)
    return up, 2.0 * nominal - up if sides.minus is None else one(sides.minus)


def _named(source: Source, category: Category) -> str:
    return (source.histogram or source.tree or "").replace("{category}", category.name)


def _filled(study: StudyConfig, source: Source, category: Category, name: str, weight: str | None) -> Filled:
    path = study.beside(source.file)
    return (
        _from_histogram(path, source, category, name)
        if source.tree is None
        else _from_tree(path, source, category, name, weight)
    )


def _from_histogram(path: Path, source: Source, category: Category, name: str) -> Filled:
    read = root_histogram(path, name)
    where = f"{source.file}: {name}"
    axes = [np.array(observable.edges) for observable in category.observables]
    if len(read.edges) != len(axes):
        raise InputError(
            Problem(
                "has the wrong number of axes", where, str(len(read.edges)), f"{len(axes)} as category {category.name}"
            )
        )
    problems = list(_impossible(read.contents, read.variances, read.weighted, read.entries, where))
    places = []
    for observable, wanted, given in zip(category.observables, axes, read.edges, strict=True):
        span = given[-1] - given[0]
        nearest = np.abs(given[:, None] - wanted[None, :]).argmin(axis=0)
        off = np.abs(given[nearest] - wanted) > 1e-9 * span
        if off.any():
            problems.append(
                Problem(
                    f"its axis for {observable.name} has no edge where category {category.name} has one",
                    where,
                    got=", ".join(f"{edge:g}" for edge in given[:12]) + (", ..." if given.size > 12 else ""),
                    wanted="with " + ", ".join(f"{edge:g}" for edge in wanted[off][:6]),
                    remedy="Fill it with finer bins, or change the category's edges.",
                )
            )
        places.append(nearest)
    if problems:
        raise InputError(*problems)
    merged = [read.all_contents, read.all_variances]
    for axis, place in enumerate(places):
        # With the flow bins, bin i of the histogram is number i + 1. First and last part hold what is outside.
        starts = np.concatenate([[0], place + 1])
        merged = [np.add.reduceat(array, starts, axis=axis) for array in merged]
    return _without_flow(merged[0], merged[1], source.flow, where)


def _from_tree(path: Path, source: Source, category: Category, name: str, weight: str | None) -> Filled:
    wanted = [source.columns.get(o.name, o.name) for o in category.observables]
    read = columns(path, name, [*wanted, *([weight] if weight is not None else [])])
    weights = read[-1] if weight is not None else np.ones(read[0].size)
    edges = [np.concatenate([[-np.inf], observable.edges, [np.inf]]) for observable in category.observables]
    points = [np.searchsorted(e[1:-1], values, side="right") for e, values in zip(edges, read, strict=False)]
    shape = tuple(e.size - 1 for e in edges)
    flat = np.ravel_multi_index(points, shape)
    size = int(np.prod(shape))
    sums: list[Floats] = [np.bincount(flat, w, size).astype(np.float64) for w in (weights, weights**2)]
    contents, variances = (array.reshape(shape) for array in sums)
    return _without_flow(contents, variances, source.flow, f"{source.file}: {name}")


def _without_flow(contents: Floats, variances: Floats, flow: str, where: str) -> Filled:
    inside = (slice(1, -1),) * contents.ndim
    if flow == "merge":
        for axis in range(contents.ndim):
            contents, variances = (_folded(array, axis) for array in (contents, variances))
        return contents, variances
    if flow == "refuse":
        outside = contents.copy()
        outside[inside] = 0.0
        if np.abs(outside).sum() > 0:
            raise InputError(
                Problem(
                    "has events outside the axes of the category",
                    where,
                    got=f"{outside.sum():g} of {contents.sum():g}",
                    remedy='Say flow = "drop" or flow = "merge".',
                )
            )
    return np.ascontiguousarray(contents[inside]), np.ascontiguousarray(variances[inside])


def _folded(array: Floats, axis: int) -> Floats:
    """Without the outer slices of an axis, which are added to their neighbours."""
    moved = np.moveaxis(array, axis, 0).copy()
    moved[1] += moved[0]
    moved[-2] += moved[-1]
    return np.moveaxis(moved[1:-1], 0, axis)


def _impossible(contents: Floats, variances: Floats, weighted: bool, entries: float, where: str) -> Iterator[Problem]:
    if (variances < 0).any():
        yield Problem("has a negative squared weight", where, got=f"{variances.min():g}")
        return
    if not weighted and (contents != np.round(contents)).any():
        yield Problem(
            "has weights but not their squares: nobody knows its statistical errors",
            where,
            remedy="Fill it with squared weights stored (Sumw2), or as a tree.",
        )
    total, squares = float(np.abs(contents).sum()), float(variances.sum())
    if weighted and entries > 0 and squares > 0 and total**2 > entries * squares * (1.0 + 1e-6):
        yield Problem(
            "has more effective events than fillings: its weights count twice, or it was scaled without their squares",
            where,
            got=f"(Σw)²/Σw² = {total**2 / squares:g}",
            wanted=f"up to {entries:g}",
            remedy="Store it unscaled and give the factor as scale.",
        )


def poisson_of_imports(
    study: StudyConfig, templates: Mapping[tuple[str, str], Template], seed: int
) -> dict[str, Floats]:
    """Pseudo-data of the imported components by category: Poisson about their templates, the best that is known."""
    names = {item.name for item in study.imports.components} if study.imports is not None else set()
    rng = np.random.default_rng(seed)
    drawn: dict[str, Floats] = {}
    for (category, component), template in templates.items():
        if component in names:
            counts = rng.poisson(np.maximum(template.nominal, 0.0)).astype(np.float64)
            drawn[category] = drawn[category] + counts if category in drawn else counts
    return drawn
