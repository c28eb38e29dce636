"""What went into a study, gathered from its file and its templates."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from typing import Any

from pydantic import BaseModel
from semitau.core.templates import TemplateSet
from semitau.gen.decays.form_factor_parameters import TRANSITIONS
from semitau.gen.study_file.detector import Curve
from semitau.gen.study_file.names import OBSERVABLES
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.study_file.units import UNITS
from semitau.gen.study_file.variations import FormFactor

from ..run.study_outline import component_outlines
from .part import (
    InputAxis,
    InputCategory,
    InputComponent,
    InputCut,
    InputFormFactors,
    InputNumber,
    InputParameter,
    Inputs,
    InputVariation,
)

NAMED_ELSEWHERE = frozenset({"name", "label", "group", "kind"})
UNIT_NAMES = frozenset(next(iter(units)) for units in UNITS.values())


def inputs_part(study: StudyConfig, templates: TemplateSet) -> Inputs:
    """Components, categories, form factors, machine, detector and variations of a study with these templates.

    Raises
    ------
    InputError : a file of the study changed meanwhile and is not sound any more.
    """
    return Inputs(
        components=tuple(_components(study, templates)),
        categories=tuple(_categories(study)),
        form_factors=tuple(_form_factors(study)),
        numbers=(*_numbers("experiment", study.experiment), *_numbers("detector", study.detector)),
        variations=tuple(_variations(study, templates)),
    )


def _components(study: StudyConfig, templates: TemplateSet) -> Iterator[InputComponent]:
    generated = {component.name: component for component in component_outlines(study)}
    for name, made in generated.items():
        yield InputComponent(
            name=name,
            label=made.label,
            role=made.role,
            moves=made.yield_,
            chains=made.chains,
            generated=made.generated,
            expected=made.expected,
        )
    for imported in templates.components:
        if imported.name not in generated:
            yield InputComponent(
                name=imported.name,
                label=imported.label,
                role=imported.role,
                moves=" × ".join(imported.scales_with) or "fixed",
                chains=0,
                generated=0,
                expected=None,
            )


def _categories(study: StudyConfig) -> Iterator[InputCategory]:
    for category in study.categories:
        yield InputCategory(
            name=category.name,
            label=category.label,
            axes=tuple(InputAxis(**_observable(name), edges=edges) for name, edges in category.axes.items()),
            cuts=tuple(InputCut(**_observable(name), low=cut.min, high=cut.max) for name, cut in category.cuts.items()),
        )


def _observable(name: str) -> dict[str, Any]:
    return {"observable": name, "label": OBSERVABLES[name].label, "unit": OBSERVABLES[name].unit}


def _form_factors(study: StudyConfig) -> Iterator[InputFormFactors]:
    for transition, label in TRANSITIONS.items():
        chosen = study.form_factor_set(transition)
        member = chosen[transition]
        yield InputFormFactors(
            transition=transition,
            label=label.replace("->", "→"),
            set=chosen.name,
            parametrisation=member.parametrisation,
            source=member.source,
            parameters=tuple(
                InputParameter(name=name, value=value, error=error)
                for name, value, error in zip(member.names, member.values, member.errors, strict=True)
            ),
        )


def _numbers(place: str, table: BaseModel) -> Iterator[InputNumber]:
    """The numbers of a table of the study file and of those within it."""
    schema: Mapping[str, Any] = type(table).model_json_schema()["properties"]
    for name, field in type(table).model_fields.items():
        key, value = field.alias or name, getattr(table, name)
        if isinstance(value, BaseModel) and not isinstance(value, Curve):
            yield from _numbers(f"{place}.{key}", value)
        else:
            unit = "" if isinstance(value, Curve) else _unit(schema[key])
            yield InputNumber(key=f"{place}.{key}", value=_shown(value), unit=unit, meaning=field.description or "")


def _unit(schema: Any) -> str:
    """The unit that the schema of a quantity names, also that of quantities in a list."""
    if isinstance(schema, list):
        return next(filter(None, map(_unit, schema)), "")
    if not isinstance(schema, Mapping):
        return ""
    if schema.get("type") == "number":
        described = str(schema.get("description", ""))
        return described if described in UNIT_NAMES else ""
    return next(filter(None, (_unit(schema.get(key)) for key in ("anyOf", "prefixItems", "items"))), "")


def _shown(value: object) -> str:
    if isinstance(value, Curve):
        if len(value.momentum) == 1:
            return _shown(value.value[0])
        return "; ".join(f"{v:.12g} at {p:.12g} GeV" for p, v in zip(value.momentum, value.value, strict=True))
    if isinstance(value, tuple):
        return ", ".join(map(_shown, value))
    return f"{value:.12g}" if isinstance(value, float) else str(value)


def _variations(study: StudyConfig, templates: TemplateSet) -> Iterator[InputVariation]:
    labels = {component.name: component.label for component in templates.components}
    for variation in study.variations:
        acts_on = [
            component
            for component in labels
            if any(
                variation.name in template.plus for (_, c), template in templates.templates.items() if c == component
            )
        ]
        if isinstance(variation, FormFactor) and variation.shift is None:
            chosen = study.form_factor_set(variation.set)[variation.set]
            error = chosen.errors[chosen.names.index(variation.parameter)]
            variation = variation.model_copy(update={"shift": error})
        document = variation.model_dump(mode="json", exclude_none=True, exclude=set(NAMED_ELSEWHERE))
        yield InputVariation(
            name=variation.name,
            label=variation.label or variation.name,
            kind=variation.kind,
            group=variation.budget_group,
            what=", ".join(f"{key.replace('_', ' ')} {_listed(value)}" for key, value in document.items()),
            acts_on=tuple(labels[name] for name in acts_on),
        )


def _listed(value: object) -> str:
    return ", ".join(map(str, value)) if isinstance(value, list) else str(value)
