"""Rules between [quadratic] and the rest of a study."""

from __future__ import annotations

from collections.abc import Iterator

from ..decays.form_factor_parameters import NORMALISATIONS
from ..decays.form_factor_set import FormFactorSet
from ..decays.form_factor_shifts import (
    SHIFTS_AT_MOST,
    SHIFTS_AT_MOST_COMPLEX,
    FormFactorShift,
    bent_pairs,
)
from .chosen_sets import sound_set
from .names import FORM_FACTORS_OF
from .quadratic_shifts import moved_together, written_shifts
from .rules import shown, suggestion
from .sections import Conflict, Place, Sections
from .shift_tables import FormFactorShifts
from .variations import FormFactor, FormFactorDirection, FormFactorDirections

ALLOWED = "Take a [[variation]] of kind form_factor_directions, or a set that is BGL or BCL."


def shift_names(sections: Sections) -> Iterator[tuple[Place, str]]:
    """Names of the coefficients of [[quadratic.form_factors]], with their places."""
    for i, _, _, shifts in _written(sections):
        yield from ((("quadratic", "form_factors", i, "name"), shift.name) for shift in shifts)


def sound_shifts(sections: Sections) -> list[FormFactorShift]:
    """The coefficients of [[quadratic.form_factors]] whose sets are sound."""
    return [shift for _, _, _, shifts in _written(sections) for shift in shifts]


def quadratic_conflicts(sections: Sections) -> Iterator[Conflict]:
    """Form factors move on their own, in components of their own, linearly, and not too many of them."""
    if sections.quadratic is None or not sections.quadratic.form_factors:
        return
    if sections.quadratic.coefficients:
        what = "are functions of couplings already: products of both are not quadratic"
        remedy = "Take a [[variation]] for the form factors, or leave the couplings to [wilson]."
        got = shown(sections.quadratic.coefficients)
        yield Conflict(("quadratic", "form_factors"), what, got, remedy=remedy)
    seen: dict[str, str] = {}
    for i, table, chosen, shifts in _written(sections):
        place: Place = ("quadratic", "form_factors", i)
        moved = moved_together(sections.form_factors, table.set, chosen) if sections.form_factors else (table.set,)
        for transition in moved:
            if transition in seen:
                what = f"moves what {seen[transition]} moves already"
                yield Conflict((*place, "set"), what, shown(table.set), remedy="Make them one table.")
            seen.setdefault(transition, table.name)
        yield from _components(sections, place, table, moved)
        yield from _varied_too(sections, place, table, moved)
        yield from _parameters(place, table, chosen)
        yield from _numbers(sections, place, table, chosen, shifts)


def _written(
    sections: Sections,
) -> Iterator[tuple[int, FormFactorShifts, FormFactorSet, list[FormFactorShift]]]:
    """Tables whose set is sound; others are told elsewhere."""
    if sections.quadratic is None or sections.form_factors is None:
        return
    for i, table in enumerate(sections.quadratic.form_factors):
        chosen = sound_set(getattr(sections.form_factors, table.set), table.set, sections.folder)
        if chosen is not None:
            yield i, table, chosen, written_shifts(table, sections.form_factors, chosen)


def _components(
    sections: Sections, place: Place, table: FormFactorShifts, moved: tuple[str, ...]
) -> Iterator[Conflict]:
    if "mode" in sections.whole and not any(
        FORM_FACTORS_OF[charm] in moved for mode in sections.modes.values() for charm in mode.charm
    ):
        what = "acts on nothing: no mode has these form factors"
        yield Conflict((*place, "set"), what, shown(table.set), remedy="Remove the table.")
    for j, mode in sections.modes.items():
        if len(mode.charm) > 1 and any(FORM_FACTORS_OF[charm] in moved for charm in mode.charm):
            what = f"mixes charm whose shares {table.name} would change"
            remedy = "Give each charm hadron that it moves a mode of its own."
            yield Conflict(("mode", j, "charm"), what, shown(mode.charm), remedy=remedy)


def _varied_too(
    sections: Sections, place: Place, table: FormFactorShifts, moved: tuple[str, ...]
) -> Iterator[Conflict]:
    for other in sections.variations.values():
        if isinstance(other, FormFactor | FormFactorDirection | FormFactorDirections) and other.set in moved:
            what = f"moves what the variation {other.name} moves already"
            yield Conflict((*place, "set"), what, shown(table.set), remedy="Remove one of them.")


def _parameters(place: Place, table: FormFactorShifts, chosen: FormFactorSet) -> Iterator[Conflict]:
    member = chosen[table.set]
    allowed = [name for name in member.names if name not in NORMALISATIONS]
    errors = dict(zip(member.names, member.errors, strict=True))
    for k, name in enumerate(table.parameters or ()):
        where = (*place, "parameters", k)
        if name not in errors:
            near = suggestion(name, allowed)
            yield Conflict(where, "is no parameter of the set", shown(name), ", ".join(allowed), near)
        elif name in NORMALISATIONS:
            what = "acts on nothing: the fit's yields take up the normalisation of a rate"
            yield Conflict(where, what, shown(name), ", ".join(allowed))
        elif not errors[name] > 0.0:
            what = "has no uncertainty in the set, so that there is no standard deviation to count in"
            yield Conflict(where, what, shown(name))


def _numbers(
    sections: Sections, place: Place, table: FormFactorShifts, chosen: FormFactorSet, shifts: list[FormFactorShift]
) -> Iterator[Conflict]:
    if table.parameters is None and not shifts:
        yield Conflict((*place, "set"), "acts on nothing: the set has no covariance", shown(table.set))
    most = SHIFTS_AT_MOST_COMPLEX if _complex_couplings(sections) else SHIFTS_AT_MOST
    if len(shifts) > most:
        key = "parameters" if table.parameters is not None else "at_most"
        what = "makes too many coefficients for one decay" + (" with complex couplings" * (most < SHIFTS_AT_MOST))
        remedy = "Leave out parameters." if key == "parameters" else f"Say at_most = {most}."
        yield Conflict((*place, key), what, str(len(shifts)), f"at most {most}", remedy)
        return
    bent = list(bent_pairs({"D": chosen, "Dst": chosen}, shifts))
    if bent:
        first, second = bent[0]
        terms = f"{first}²" if first == second else f"{first} × {second}"
        got = f"a term with {terms}, {chosen[table.set].parametrisation} set"
        what = "moves form factors that are not linear in the coefficients"
        yield Conflict((*place, "set"), what, got, remedy=ALLOWED)


def _complex_couplings(sections: Sections) -> bool:
    if sections.wilson is None:
        return False
    given = sections.wilson.by_lepton
    return any(value.imag for lepton in ("e", "mu", "tau") for value in vars(given[lepton]).values())
