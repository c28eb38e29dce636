"""The components of the templates and the parameters that scale them, from the tables of the study file."""

from __future__ import annotations

from semitau.core.templates import Category, Coefficient, Component, Form, Nuisance, Observable, ScaleParameter

from ..decays.coefficients import LARGEST, label_of, part_of, quadratic_form, value_of
from ..decays.form_factor_shifts import LARGEST_SHIFT
from ..study_file.components import Mode, Yield
from ..study_file.names import OBSERVABLES
from ..study_file.parameter_names import PARENT_SUFFIX, component_name, split_by_parent
from ..study_file.study import StudyConfig
from .component_plan import injected_ratio, predicted_ratio, ratio_parents
from .quadratic_rates import decay_form, ratio_forms, study_shifts

_RATIO_LABEL = {"R_D": "R(D)", "R_Dst": "R(D*)"}
_PARENT_LABEL = {"B+": "B⁺", "B0": "B⁰"}


def template_categories(study: StudyConfig) -> tuple[Category, ...]:
    """The categories with their axes."""
    return tuple(
        Category(
            category.name,
            category.label,
            tuple(
                Observable(name, _axis_label(name, category.lepton), OBSERVABLES[name].unit, edges)
                for name, edges in category.axes.items()
            ),
        )
        for category in study.categories
    )


def _axis_label(observable: str, lepton: str) -> str:
    """In a category whose lepton is the pions of a tau, an axis says so."""
    label = OBSERVABLES[observable].label
    seen = {"pi": "pion", "3pi": "three-pion"}.get(lepton, "lepton")
    return label.replace("lepton", seen, 1)


def template_nuisances(study: StudyConfig) -> tuple[Nuisance, ...]:
    """The variations as nuisance parameters."""
    return tuple(Nuisance(v.name, v.label or v.name, v.budget_group) for v in study.variations)


def template_coefficients(study: StudyConfig) -> tuple[Coefficient, ...]:
    """The real numbers that templates are quadratic functions of."""
    couplings = study.wilson.couplings
    return tuple(
        Coefficient(one, label_of(one), value_of(couplings, one), LARGEST[part_of(one)[0]])
        if isinstance(one, str)
        else Coefficient(one.name, one.label, 0.0, LARGEST_SHIFT, "shape", one.constraint, one.group)
        for one in study.coefficients
    )


def _ratio_forms(study: StudyConfig, mode: Mode, parent: str) -> tuple[Form, Form]:
    """The ratio of a mode as a quadratic form in the coefficients over another, and that other one; empty if not."""
    name, parents = str(mode.scales_with), ratio_parents(study, mode, parent)
    if study_shifts(study):
        return ratio_forms(study, name, parents, injected_ratio(study, mode, parent))
    return _rate(study, mode, parent), ()


def _rate(study: StudyConfig, mode: Mode, parent: str) -> Form:
    """The ratio of a mode as a quadratic form in the coefficients, at the study's couplings the injected one."""
    if study.quadratic is None:
        return ()
    name, parents = str(mode.scales_with), ratio_parents(study, mode, parent)
    form = quadratic_form(
        lambda couplings: predicted_ratio(study, name, parents, couplings),
        study.wilson.couplings,
        study.quadratic.coefficients,
    )
    scale = injected_ratio(study, mode, parent) / predicted_ratio(study, name, parents)
    return tuple((a, b, piece * scale) for (a, b), piece in form.items())


def components_and_parameters(study: StudyConfig) -> tuple[tuple[Component, ...], tuple[ScaleParameter, ...]]:
    """Components in the order of the study file: modes, double charm, backgrounds; parameters: ratios, then yields.

    A mode with a ratio scales with the ratio times the yield of its denominator. Other components have a yield of
    their own unless it is fixed; a mode that follows another scales with both.
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
                ratio = mode.scales_with + (PARENT_SUFFIX[parent] if split else "")
                ratio_label = _RATIO_LABEL[mode.scales_with] + (f" of {_PARENT_LABEL[parent]}" if split else "")
                injected = injected_ratio(study, mode, parent)
                if ratio not in ratios:
                    forms = _ratio_forms(study, mode, parent)
                    ratios[ratio] = ScaleParameter(ratio, ratio_label, "ratio", injected, None, *forms)
                scales_with.append(ratio)
            followed = study.followed_by(mode)
            if followed is not None and followed.yield_constraint.kind != "fixed":
                scales_with.append(f"yield_{component_name(study, followed, parent)}")
            own = _yield_parameter(name, part_label, mode.yield_constraint)
            if own is not None:
                yields[own.name] = own
                scales_with.append(own.name)
            size = _size(study, mode, parent, ratios.get(scales_with[0]) if mode.scales_with is not None else None)
            components.append(Component(name, part_label, mode.role, tuple(scales_with), size))
    for item in study.components:
        if isinstance(item, Mode):
            continue
        label = item.label or item.name
        own = _yield_parameter(item.name, label, item.yield_constraint)
        if own is not None:
            yields[own.name] = own
        scales = (own.name,) if own is not None else ()
        components.append(Component(item.name, label, item.role, scales))
    return tuple(components), (*ratios.values(), *yields.values())


def _size(study: StudyConfig, mode: Mode, parent: str, ratio: ScaleParameter | None) -> Form:
    """What shifts of form factors do to the number of decays of a component, which its scale parameters are to hold."""
    if ratio is not None:
        return tuple((a, b, piece / ratio.injected) for a, b, piece in ratio.rate) if study_shifts(study) else ()
    parents = (parent,) if split_by_parent(study, mode) else mode.parents
    return decay_form(study, parents, mode.charm, mode.leptons)


def _yield_parameter(component: str, label: str, constraint: Yield) -> ScaleParameter | None:
    if constraint.kind == "fixed":
        return None
    width = constraint.uncertainty if constraint.kind == "gaussian" else None
    return ScaleParameter(f"yield_{component}", f"yield of {label}", "yield", 1.0, width)
