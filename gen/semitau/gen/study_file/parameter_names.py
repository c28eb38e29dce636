"""Names of the fit's parameters, which follow from the study file alone."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from dataclasses import dataclass
from typing import TYPE_CHECKING

from .components import Mode

if TYPE_CHECKING:
    from .study import StudyConfig

PARENT_SUFFIX = {"B+": "_Bp", "B0": "_B0"}


@dataclass(frozen=True)
class ParameterNames:
    """ratios, yields : what templates are scaled with. coefficients : what they are functions of, floated or not.

    nuisances : of the variations, imported ones too, before and after those of `[fit] apart` became two.
    """

    ratios: tuple[str, ...]
    yields: tuple[str, ...]
    coefficients: tuple[str, ...]
    variations: tuple[str, ...]
    nuisances: tuple[str, ...]


def split_by_parent(study: StudyConfig, mode: Mode) -> bool:
    """Whether the mode's templates are kept apart by parent: the fit has separate ratios, and the mode has a ratio, is
    the denominator of one, or follows such a denominator."""
    if study.fit.ratios != "separate":
        return False
    denominators = {followed.name for m in study.modes if m.scales_with and (followed := study.followed_by(m))}
    followed = study.followed_by(mode)
    return mode.name in denominators or (followed is not None and followed.name in denominators)


def component_name(study: StudyConfig, mode: Mode, parent: str) -> str:
    """Template component of the mode's decays of a parent: "D_tau", or "D_tau_Bp" and "D_tau_B0" if kept apart."""
    return mode.name + (PARENT_SUFFIX[parent] if split_by_parent(study, mode) else "")


def parameter_names(study: StudyConfig, variations: Sequence[str], shifts: Sequence[str] = ()) -> ParameterNames:
    """All of them. variations : names of those of the study, one for each nuisance. shifts : of form factors."""
    imported = study.imports.components if study.imports is not None else ()
    sides = [sides.name for item in imported for sides in item.variations]
    variations = list(dict.fromkeys([*variations, *sides]))
    parts = [[f"{name}_shape", f"{name}_rate"] if name in study.fit.apart else [name] for name in variations]
    yields = [*_yields(study), *(f"yield_{item.name}" for item in imported if item.yield_constraint.kind != "fixed")]
    return ParameterNames(
        ratios=tuple(dict.fromkeys(_ratios(study))),
        yields=tuple(dict.fromkeys(yields)),
        coefficients=(*(study.quadratic.coefficients if study.quadratic is not None else ()), *shifts),
        variations=tuple(variations),
        nuisances=tuple(name for part in parts for name in part),
    )


def _ratios(study: StudyConfig) -> Iterator[str]:
    for mode in study.modes:
        if mode.scales_with is not None:
            split = split_by_parent(study, mode)
            for parent in mode.parents if split else mode.parents[:1]:
                yield mode.scales_with + (PARENT_SUFFIX[parent] if split else "")


def _yields(study: StudyConfig) -> Iterator[str]:
    for item in study.components:
        if item.yield_constraint.kind == "fixed":
            continue
        if isinstance(item, Mode):
            yield from (f"yield_{component_name(study, item, parent)}" for parent in item.parents)
        else:
            yield f"yield_{item.name}"
