"""Results of the fit package as parts of `results.json`."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.result import FitResult
from semitau.fit.toys.toys import ToyResults
from semitau.fit.uncertainty.decomposition import Budget as FitBudget
from semitau.fit.uncertainty.nuisances import NuisanceShift

from ..results import (
    Budget,
    BudgetRow,
    ComponentInfo,
    Fit,
    Goodness,
    Named,
    NuisanceResult,
    Parameter,
    RatioResult,
    RatioShift,
)

SOURCE_LABELS = {
    "statistical": "finite data",
    "template statistics": "finite templates",
    "yields": "constrained yields",
    "ratios": "constrained ratios",
}


def fit_part(model: Model, result: FitResult, toys: ToyResults | None = None) -> Fit:
    """Parameters with values, errors and correlations, and whether to trust them.

    toys : at the injected ratios, if there are any; a p-value from them holds for bins with few events, too.
    """
    free = [index for index, p in enumerate(model.parameters) if p.fixed is None and p.kind != "size"]
    finite = bool(np.isfinite(result.errors).all())
    goodness = result.goodness
    return Fit(
        valid=result.valid,
        reasons=tuple(map(str, result.reasons)),
        minus_log_likelihood=result.minus_log_likelihood,
        goodness=Goodness(
            statistic=goodness.statistic,
            degrees_of_freedom=goodness.degrees_of_freedom,
            p_value=goodness.p_value,
            toy_p_value=None if toys is None or not toys.valid.any() else toys.share_above(goodness.statistic),
        ),
        parameters=tuple(
            Parameter(
                name=model.parameters[index].name,
                label=model.parameters[index].label,
                kind=model.parameters[index].kind,
                injected=model.parameters[index].injected,
                constraint=model.parameters[index].constraint,
                value=float(result.values[index]),
                error=float(result.errors[index]) if finite else 0.0,
            )
            for index in free
        ),
        correlation=tuple(map(tuple, result.correlations[np.ix_(free, free)].tolist())) if finite else (),
    )


def ratio_parts(
    model: Model, result: FitResult, budgets: Mapping[str, FitBudget], hidden: bool = False
) -> tuple[RatioResult, ...]:
    """Each fitted ratio beside its injected value, with its error split where there is a budget.

    hidden : the values are not the true ones, so that their distance from anything means nothing.
    """
    found = []
    for name in model.ratios:
        parameter = model.parameters[model.index(name)]
        value, error = result.value(name), result.error(name)
        if parameter.fixed is not None or not error > 0:
            continue
        split = budgets.get(name)
        found.append(
            RatioResult(
                name=name,
                label=parameter.label,
                injected=parameter.injected,
                value=value,
                error=error,
                pull=None if hidden else (value - parameter.injected) / error,
                statistical=None if split is None else split.rows["statistical"],
                template_statistics=None if split is None else split.rows["template statistics"],
                systematic=None if split is None else split.systematic,
            )
        )
    return tuple(found)


def budget_parts(
    budgets: Mapping[str, FitBudget], held: Mapping[str, Mapping[str, float]] | None = None
) -> tuple[Budget, ...]:
    """The uncertainty of each ratio by source. held : ratio -> the rows by holding sources in turn."""
    in_turn = held or {}
    return tuple(
        Budget(
            ratio=name,
            rows=tuple(
                BudgetRow(
                    source=source,
                    label=SOURCE_LABELS.get(source, source),
                    error=error,
                    held=in_turn.get(name, {}).get(source),
                )
                for source, error in split.rows.items()
            ),
            total=split.total,
        )
        for name, split in budgets.items()
    )


def nuisance_parts(shifts: Sequence[NuisanceShift]) -> tuple[NuisanceResult, ...]:
    """Pull, constraint and effect of each constrained parameter."""
    return tuple(
        NuisanceResult(
            name=shift.name,
            label=shift.label,
            group=SOURCE_LABELS.get(shift.group, shift.group),
            pull=shift.pull,
            constraint=shift.constraint,
            shifts=tuple(
                RatioShift(ratio=ratio, down=_finite(down), up=_finite(up))
                for ratio, (down, up) in shift.shifts.items()
            ),
        )
        for shift in shifts
    )


def _finite(value: float) -> float | None:
    return value if np.isfinite(value) else None


def category_parts(templates: TemplateSet) -> tuple[Named, ...]:
    """Names and labels of the categories."""
    return tuple(Named(name=category.name, label=category.label) for category in templates.categories)


STACKING = ("background", "feed-down", "normalisation", "signal")


def component_parts(templates: TemplateSet) -> tuple[ComponentInfo, ...]:
    """Components in stacking order: backgrounds below, signals on top."""
    ordered = sorted(templates.components, key=lambda component: STACKING.index(component.role))
    return tuple(ComponentInfo(name=c.name, label=c.label, role=c.role, scales_with=c.scales_with) for c in ordered)
