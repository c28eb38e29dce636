"""The components of the templates and the parameters that scale them, from the tables of the study file."""

from __future__ import annotations

from semitau.core.templates import Category, Component, Nuisance, Observable, ScaleParameter

from ..study_file.components import Yield
from ..study_file.names import OBSERVABLES
from ..study_file.study import StudyConfig
from .component_plan import component_name, injected_ratio, split_by_parent

_RATIO_LABEL = {"R_D": "R(D)", "R_Dst": "R(D*)"}
_PARENT_LABEL = {"B+": "B⁺", "B0": "B⁰"}
_PARENT_SUFFIX = {"B+": "_Bp", "B0": "_B0"}


def template_categories(study: StudyConfig) -> tuple[Category, ...]:
    """The categories with their axes."""
    return tuple(
        Category(
            category.name,
            category.label,
            tuple(
                Observable(name, OBSERVABLES[name].label, OBSERVABLES[name].unit, edges)
                for name, edges in category.axes.items()
            ),
        )
        for category in study.categories
    )


def template_nuisances(study: StudyConfig) -> tuple[Nuisance, ...]:
    """The variations as nuisance parameters."""
    return tuple(Nuisance(v.name, v.label or v.name, v.budget_group) for v in study.variations)


def components_and_parameters(study: StudyConfig) -> tuple[tuple[Component, ...], tuple[ScaleParameter, ...]]:
    """Components in the order of the study file, modes first; parameters: ratios, then yields.

    A mode with a ratio scales with the ratio times the yield of its denominator. Other modes and backgrounds have a
    yield of their own unless it is fixed; a mode that follows another scales with both.
    """
    components: list[Component] = []
    ratios: dict[str, ScaleParameter] = {}
    yields: dict[str, ScaleParameter] = {}
    for mode in study.modes:
        label = mode.label or mode.name
        for parent in mode.parents if split_by_parent(study, mode) else mode.parents[:1]:
            name = component_name(study, mode, parent)
            split = name != mode.name
            part_label = f"{label} ({_PARENT_LABEL[parent]})" if split else label
            scales_with = []
            if mode.scales_with is not None:
                ratio = mode.scales_with + (_PARENT_SUFFIX[parent] if split else "")
                ratio_label = _RATIO_LABEL[mode.scales_with] + (f" of {_PARENT_LABEL[parent]}" if split else "")
                injected = injected_ratio(study, mode, parent)
                ratios.setdefault(ratio, ScaleParameter(ratio, ratio_label, "ratio", injected))
                scales_with.append(ratio)
            followed = study.followed_by(mode)
            if followed is not None and followed.yield_constraint.kind != "fixed":
                scales_with.append(f"yield_{component_name(study, followed, parent)}")
            own = _yield_parameter(name, part_label, mode.yield_constraint)
            if own is not None:
                yields[own.name] = own
                scales_with.append(own.name)
            components.append(Component(name, part_label, mode.role, tuple(scales_with)))
    for background in study.backgrounds:
        label = background.label or background.name
        own = _yield_parameter(background.name, label, background.yield_constraint)
        if own is not None:
            yields[own.name] = own
        scales = (own.name,) if own is not None else ()
        components.append(Component(background.name, label, background.role, scales))
    return tuple(components), (*ratios.values(), *yields.values())


def _yield_parameter(component: str, label: str, constraint: Yield) -> ScaleParameter | None:
    if constraint.kind == "fixed":
        return None
    width = constraint.uncertainty if constraint.kind == "gaussian" else None
    return ScaleParameter(f"yield_{component}", f"yield of {label}", "yield", 1.0, width)
