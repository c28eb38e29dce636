"""A search as a part of results.json."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from math import isfinite

import numpy as np
from semitau.core.candidate_grid import EXPECTED, GENERATED, VARIANCE
from semitau.core.templates import Floats
from semitau.gen.study_file.categories import StudyCategory
from semitau.gen.study_file.design import DesignSection
from semitau.gen.study_file.names import OBSERVABLES
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.fit_components import components_and_parameters

from .confirming import Confirmed
from .evaluation import Evaluator
from .merging import in_order
from .part import (
    Design,
    DesignAxis,
    DesignBinning,
    DesignCategory,
    DesignChoice,
    DesignConfirmation,
    DesignCurve,
    DesignCut,
    DesignError,
    DesignMerging,
    DesignPoint,
    DesignVariation,
)
from .proposal import snippet
from .run import Found
from .search import scans
from .skeleton import skeleton_model
from .space import WorkingPoint

DEAREST = 12
"""Variations that are told of."""

NOISY = 0.02
"""Rise of the merit without information from fluctuations from which on more events are advised."""


def document(study: StudyConfig, design: DesignSection, found: Found) -> Design:
    """Everything that there is to say about a search."""
    evaluator, start, best = found.evaluator, found.evaluator.space.start, found.proposed
    merits = evaluator.merit(start), evaluator.merit(best)
    labels = {parameter.name: parameter.label for parameter in components_and_parameters(study)[1]}
    return Design(
        minimised=design.minimise,
        ratios=evaluator.sensitivity.ratios,
        labels=tuple(labels[name] for name in evaluator.sensitivity.ratios),
        start=_point(evaluator, start),
        proposed=_point(evaluator, best),
        gain=1.0 - merits[1] / merits[0],
        confirmation=_confirmation(evaluator, found.confirmed),
        flat=design.flat,
        curves=tuple(_curves(evaluator, best, design.flat)),
        choices=tuple(_choices(found, merits[1])),
        mergings=tuple(_mergings(found)),
        axes=tuple(axis for table in range(len(evaluator.space.tables)) for axis in _axes(evaluator, best, table)),
        categories=tuple(_categories(evaluator, best, study.categories)),
        variations=tuple(_variations(study, evaluator, best)),
        points=found.points,
        generated=found.generated,
        snippet=snippet(study, evaluator.space, best),
        notes=tuple(_notes(study, design, found)),
    )


def _errors(evaluator: Evaluator, errors: Sequence[float]) -> tuple[DesignError, ...]:
    sensitivity = evaluator.sensitivity
    return tuple(
        DesignError(ratio=name, error=float(error), relative=float(error / value))
        for name, error, value in zip(sensitivity.ratios, errors, sensitivity.values, strict=True)
    )


def _point(evaluator: Evaluator, point: WorkingPoint) -> DesignPoint:
    covariance = evaluator.covariance(point)
    errors = [] if covariance is None else np.sqrt(np.diag(covariance)).tolist()
    told = [evaluator.told(point, table) for table in range(len(evaluator.space.tables))]
    return DesignPoint(
        merit=evaluator.merit(point),
        errors=_errors(evaluator, errors),
        cuts=tuple(
            DesignCut(cut=variable.name, value=variable.values[place])
            for variable, place in zip(evaluator.space.variables, point.cuts, strict=True)
        ),
        binnings=tuple(_binning(evaluator, point, table) for table in range(len(told))),
        bins=sum(category.bins for table in told for category in table),
        events=sum(category.events for table in told for category in table),
    )


def _binning(evaluator: Evaluator, point: WorkingPoint, table: int) -> DesignBinning:
    axes = evaluator.space.template_axes(point, table)
    return DesignBinning(
        table=evaluator.space.tables[table].label,
        observables=tuple(axes),
        edges=tuple(axes.values()),
        bins=int(np.prod([len(edges) - 1 for edges in axes.values()])),
        least=min((told.least for told in evaluator.told(point, table) if told.bins), default=0.0),
    )


def _confirmation(evaluator: Evaluator, confirmed: Confirmed) -> DesignConfirmation:
    return DesignConfirmation(
        start=_errors(evaluator, confirmed.errors[0].tolist()),
        proposed=_errors(evaluator, confirmed.errors[1].tolist()),
        gain=confirmed.gain,
        uncertainty=confirmed.uncertainty,
        noise=confirmed.noise,
        confirmed=confirmed.certain,
    )


def _curves(evaluator: Evaluator, best: WorkingPoint, flat: float) -> Iterator[DesignCurve]:
    space, sensitivity = evaluator.space, evaluator.sensitivity
    merit, covariance = evaluator.merit(best), evaluator.covariance(best)
    reference = np.ones(len(sensitivity.ratios)) if covariance is None else np.sqrt(np.diag(covariance))
    first = scans(evaluator, space.start)
    last = scans(evaluator, best)
    at_start = evaluator.merit(space.start)
    for number, variable in enumerate(space.variables):
        errors = []
        for place in range(len(variable.values)):
            here = evaluator.covariance(best.with_cut(number, place))
            errors.append(None if here is None else np.sqrt(np.diag(here)) / reference)
        low, high = _flat_range(last[number], best.cuts[number], merit * (1.0 + flat))
        yield DesignCurve(
            cut=variable.name,
            label=variable.label,
            unit=OBSERVABLES[variable.observable].unit,
            values=variable.values,
            at_start=tuple(_finite(value / at_start) for value in first[number]),
            at_proposed=tuple(_finite(value / merit) for value in last[number]),
            errors=tuple(
                tuple(None if own is None else float(own[k]) for own in errors) for k in range(len(sensitivity.ratios))
            ),
            start=variable.values[variable.start],
            proposed=variable.values[best.cuts[number]],
            flat=(variable.values[low], variable.values[high]),
            matters=not (low == 0 and high == len(variable.values) - 1),
        )


def _flat_range(merits: Sequence[float], place: int, limit: float) -> tuple[int, int]:
    """The stretch around a place in which the merit stays below a limit."""
    low = high = place
    while low > 0 and merits[low - 1] <= limit:
        low -= 1
    while high < len(merits) - 1 and merits[high + 1] <= limit:
        high += 1
    return low, high


def _finite(value: float) -> float | None:
    return float(value) if isfinite(value) else None


def _choices(found: Found, merit: float) -> Iterator[DesignChoice]:
    tables = found.evaluator.space.tables
    for choice in found.choices:
        yield DesignChoice(
            table=tables[choice.table].label,
            observables=choice.observables,
            bins=choice.merged.size,
            merit=_finite(choice.merged.merit / merit),
            now=set(choice.observables) == {name for name, _ in tables[choice.table].start},
            chosen=choice.chosen,
        )


def _mergings(found: Found) -> Iterator[DesignMerging]:
    """For each table the way to the proposed axes, or to those that it keeps."""
    for number, table in enumerate(found.evaluator.space.tables):
        names = {name for name, _ in found.proposed.binnings[number]}
        for choice in found.choices:
            merits = choice.merged.merits
            if choice.table == number and set(choice.observables) == names and all(map(isfinite, merits)):
                yield DesignMerging(
                    table=table.label,
                    bins=choice.merged.bins,
                    merit=tuple(value / merits[0] for value in merits),
                    chosen=choice.merged.size,
                )


def _axes(evaluator: Evaluator, best: WorkingPoint, table: int) -> Iterator[DesignAxis]:
    """Shares of the information of each axis of the proposed binning."""
    sensitivity, rows = evaluator.sensitivity, evaluator.sensitivity.rows(evaluator.information(best))
    if rows is None:
        return
    axes = evaluator.space.template_axes(best, table)
    contents = in_order(evaluator, best, table, tuple(axes))
    filled = contents[..., GENERATED] > 0.5
    variance = contents[..., EXPECTED] + sensitivity.template_statistics * contents[..., VARIANCE]
    says = contents[..., 3:] @ rows.T
    told: Floats = np.where(filled[..., None], says**2 / np.where(filled, variance, 1.0)[..., None], 0.0)
    for place, (name, edges) in enumerate(axes.items()):
        by_slice = np.moveaxis(told, place + 1, 0).reshape(len(edges) - 1, -1, len(sensitivity.ratios)).sum(axis=1)
        shares = by_slice / np.maximum(by_slice.sum(axis=0), 1e-300)
        without = tuple(own for own in best.binnings[table] if own[0] != name)
        loss = evaluator.merit(best.with_binning(table, without)) / evaluator.merit(best) - 1.0
        known = OBSERVABLES[name]
        yield DesignAxis(
            table=evaluator.space.tables[table].label,
            observable=name,
            label=known.label,
            unit=known.unit,
            edges=edges,
            shares=tuple(tuple(shares[:, k].tolist()) for k in range(len(sensitivity.ratios))),
            loss=_finite(loss),
        )


def _categories(
    evaluator: Evaluator, best: WorkingPoint, categories: Sequence[StudyCategory]
) -> Iterator[DesignCategory]:
    whole, merit = evaluator.information(best), evaluator.merit(best)
    found = {
        place: told.information
        for number, table in enumerate(evaluator.space.tables)
        for place, told in zip(table.categories, evaluator.told(best, number), strict=True)
    }
    for place, category in enumerate(categories):
        without = evaluator.goal.merit(evaluator.sensitivity.covariance(whole - found[place]))
        yield DesignCategory(category=category.name, label=category.label, loss=_finite(without / merit - 1.0))


def _variations(study: StudyConfig, evaluator: Evaluator, best: WorkingPoint) -> Iterator[DesignVariation]:
    labels = {variation.name: variation.label or variation.name for variation in study.variations}
    points = [evaluator.space.start, best]
    information = [evaluator.information(point) for point in points]
    merits = [evaluator.merit(point) for point in points]
    found = []
    for name in evaluator.sensitivity.names:
        if name in labels:
            exact = evaluator.sensitivity.without(name)
            falls = [
                1.0 - evaluator.goal.merit(exact.covariance(i)) / m for i, m in zip(information, merits, strict=True)
            ]
            found.append(DesignVariation(nuisance=name, label=labels[name], before=falls[0], after=falls[1]))
    yield from sorted(found, key=lambda own: -max(own.before, own.after))[:DEAREST]


def _notes(study: StudyConfig, design: DesignSection, found: Found) -> Iterator[str]:
    model = skeleton_model(study)
    space, best, confirmed = found.evaluator.space, found.proposed, found.confirmed
    if best == space.start:
        yield "Nothing better than the study as it is was found."
    elif not confirmed.certain:
        yield (
            f"Not confirmed: on independent events the gain is {100 * confirmed.gain:.2f} ± "
            f"{100 * confirmed.uncertainty:.2f} per cent. Keep the study as it is, or generate more events."
        )
    merit = found.evaluator.merit(best)
    for number, (variable, place) in enumerate(zip(space.variables, best.cuts, strict=True)):
        last = len(variable.values) - 1
        if place in (0, last) and place != variable.start:
            inside = found.evaluator.merit(best.with_cut(number, 1 if place == 0 else last - 1))
            if inside > merit * (1.0 + design.loss):
                yield f"The best value of {variable.name} is the last one of its range: widen it."
    if confirmed.noise is None:
        yield "There are too few events to tell information from fluctuations of the templates: generate more events."
    elif max(confirmed.noise) > NOISY:
        before, after = (f"{100 * noise:.1f}" for noise in confirmed.noise)
        yield (
            f"Fluctuations of the templates make the expected error look smaller by {before} per cent at the starting "
            f"point and {after} per cent at the proposed one: generate more events."
        )
    moved = [
        name
        for name, at, made in zip(model.names, model.start, (p.injected for p in model.parameters), strict=True)
        if abs(at - made) > 1e-9 * max(abs(made), 1.0)
    ]
    if moved:
        yield f"[fit] sets {', '.join(moved)} away from where the templates are made; the design looks at the latter."
    if design.events is not None:
        yield f"At most {design.events} events of each component were generated; the study's own numbers count."
    if study.fit.likelihood != "light" and study.fit.template_statistics:
        yield f"Expected errors are those of the light likelihood, the study fits with the {study.fit.likelihood} one."
