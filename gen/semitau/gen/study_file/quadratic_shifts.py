"""[quadratic] written out: every coefficient that templates are functions of."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterator

from ..decays.form_factor_directions import directions
from ..decays.form_factor_parameters import NORMALISATIONS
from ..decays.form_factor_set import FormFactorSet
from ..decays.form_factor_shifts import Coefficient, FormFactorShift
from .machine import FormFactors
from .shift_tables import FormFactorShifts
from .variations import FormFactorDirections
from .wilson import Quadratic
from .written_variations import kept_directions


def written_coefficients(
    quadratic: Quadratic | None, form_factors: FormFactors, set_of: Callable[[str], FormFactorSet]
) -> tuple[Coefficient, ...]:
    """Couplings, then shifts of form factors, in the order of the file. set_of : the study's set for "D" or "Dst"."""
    if quadratic is None:
        return ()
    shifts = [s for table in quadratic.form_factors for s in written_shifts(table, form_factors, set_of(table.set))]
    return (*quadratic.coefficients, *shifts)


def written_shifts(table: FormFactorShifts, form_factors: FormFactors, chosen: FormFactorSet) -> list[FormFactorShift]:
    """The coefficients of one table; those of parameters that the set does not have, or knows exactly, are left out."""
    transitions = moved_together(form_factors, table.set, chosen)
    label = table.label or table.name
    if table.parameters is None:
        return [
            FormFactorShift(f"{table.name}_{rank}", transitions, shift, 1.0, f"{label}, direction {rank}", table.group)
            for rank, shift in enumerate(_directions(table, chosen), start=1)
        ]
    member = chosen[table.set]
    errors = dict(zip(member.names, member.errors, strict=True))
    found = []
    for parameter in table.parameters:
        if errors.get(parameter, 0.0) > 0.0 and parameter not in NORMALISATIONS:
            row = member.correlation[member.names.index(parameter)]
            alone = sum(value != 0.0 for value in row) == 1
            name = f"{table.name}_{re.sub(r'[^A-Za-z0-9]+', '_', parameter).strip('_')}"
            shift = ((parameter, errors[parameter]),)
            found.append(
                FormFactorShift(name, transitions, shift, 1.0 if alone else None, f"{label}, {parameter}", table.group)
            )
    return found


def moved_together(form_factors: FormFactors, transition: str, chosen: FormFactorSet) -> tuple[str, ...]:
    """What one entry of [form_factors] moves: both D and D* if they are one set of shared parameters."""
    return ("D", "Dst") if chosen.shared and form_factors.Dst == form_factors.D else (transition,)


def _directions(table: FormFactorShifts, chosen: FormFactorSet) -> Iterator[tuple[tuple[str, float], ...]]:
    """Shifts of the directions that the table keeps."""
    asked = FormFactorDirections(
        kind="form_factor_directions", name=table.name, set=table.set, order=table.order, keep=table.keep,
        at_most=table.at_most,
    )  # fmt: skip
    shifts, names = directions(chosen, table.set, table.order).shifts, chosen[table.set].names
    for kept in kept_directions(asked, chosen, ()):
        row = shifts[kept.direction - 1].tolist()
        yield tuple((name, shift) for name, shift in zip(names, row, strict=True) if shift != 0.0)
