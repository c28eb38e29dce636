"""Rules between [fit] and the rest of a study: the parameters that it names are there."""

from __future__ import annotations

import ast
from collections.abc import Iterator
from typing import TYPE_CHECKING

from .idle_variations import nuisance_names
from .parameter_names import ParameterNames, parameter_names
from .quadratic_conflicts import shift_names
from .rules import shown, suggestion
from .sections import Conflict, Place, Sections

if TYPE_CHECKING:
    from .study import StudyConfig


def fit_conflicts(study: StudyConfig, sections: Sections) -> Iterator[Conflict]:
    """Everything that [fit] names but that the fit will not have. sections : of the same study, without conflicts."""
    if sections.folder is None and any(source.file for _, source in study.form_factors):
        return  # names of directions follow from a file that cannot be looked for
    variations = [name for table in study.variation_tables for name in nuisance_names(sections, table)]
    names = parameter_names(study, variations, [name for _, name in shift_names(sections)])
    yield from _coefficients(study, names)
    fit = study.fit
    for k, name in enumerate(fit.apart):
        yield from _variation(("fit", "apart", k), name, names)
    for name in fit.mirrored:
        yield from _variation(("fit", "mirrored", name), name, names)
    known = (*names.ratios, *names.yields, *fit.coefficients, *names.nuisances)
    for key in ("fixed", "functions", "constraints", "bounds"):
        for name in getattr(fit, key):
            yield from _parameter(("fit", key, name), name, known, study, names)
    for i, block in enumerate(fit.correlated):
        for k, name in enumerate(block.parameters):
            yield from _parameter(("fit", "correlated", i, "parameters", k), name, known, study, names)
    for name, formula in fit.functions.items():
        for used in _names_in(formula):
            yield from _parameter(("fit", "functions", name), used, known, study, names)


def _variation(place: Place, name: str, names: ParameterNames) -> Iterator[Conflict]:
    if name not in names.variations:
        wanted = ", ".join(names.variations) or "none"
        yield Conflict(place, "names no variation", shown(name), wanted, suggestion(name, names.variations))


def _parameter(
    place: Place, name: str, known: tuple[str, ...], study: StudyConfig, names: ParameterNames
) -> Iterator[Conflict]:
    if name in known:
        return
    remedy = suggestion(name, known)
    if name in names.coefficients:
        remedy = "Float it: name it in fit.coefficients."
    if name in study.fit.apart:
        remedy = f"It is apart: take {name}_shape or {name}_rate."
    yield Conflict(place, "names no parameter of the fit", shown(name), ", ".join(known), remedy)


def _names_in(formula: str) -> Iterator[str]:
    """Names in a formula; none if it cannot be read, which the fit tells."""
    try:
        tree = ast.parse(formula.strip(), mode="eval")
    except (SyntaxError, ValueError):
        return
    yield from dict.fromkeys(node.id for node in ast.walk(tree) if isinstance(node, ast.Name))


def _coefficients(study: StudyConfig, names: ParameterNames) -> Iterator[Conflict]:
    """Floated coefficients are those of the templates; what would give hidden ratios away, or cannot be, is refused."""
    fit, place = study.fit, ("fit", "coefficients")
    for k, name in enumerate(fit.coefficients):
        if name not in names.coefficients:
            remedy = suggestion(name, names.coefficients)
            if study.quadratic is None:
                remedy = "Add a [quadratic] table that names it."
            wanted = ", ".join(names.coefficients) or "none"
            yield Conflict((*place, k), "is nothing that templates are functions of", shown(name), wanted, remedy)
    if not fit.coefficients:
        return
    if fit.likelihood == "exact":
        remedy = 'Take likelihood = "light" or "approximate".'
        yield Conflict(place, 'cannot be fitted with likelihood = "exact"', shown(fit.coefficients), remedy=remedy)
    if study.blinding is not None and fit.data.kind != "expected" and fit.couplings:
        remedy = 'Fit the expected events (data = "expected"), or leave [blinding] out.'
        yield Conflict(place, "would give hidden ratios away", shown(fit.coefficients), remedy=remedy)
    for name in fit.functions if fit.couplings else ():
        if name in names.ratios:
            remedy = "Take one of them away."
            what = "already follows the fitted coefficients"
            yield Conflict(("fit", "functions", name), what, shown(fit.functions[name]), remedy=remedy)
