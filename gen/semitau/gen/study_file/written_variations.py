"""[[variation]] tables written out: one that stands for several directions of a covariance becomes that many."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator

import numpy as np

from ..decays.form_factor_directions import directions
from ..decays.form_factor_parameters import NORMALISATIONS
from ..decays.form_factor_set import FormFactorSet
from ..decays.orbital_states import CHARM_STATES
from .variations import FormFactorDirection, FormFactorDirections, SingleVariation, Variation


def single_variations(
    tables: Iterable[Variation], set_of: Callable[[str], FormFactorSet], excited: tuple[str, ...]
) -> Iterator[SingleVariation]:
    """Every variation, each with a plus and a minus side.

    set_of : the study's set for "D", "Dst" or "Dss". excited : its families of D** and continua.
    """
    for table in tables:
        if isinstance(table, FormFactorDirections):
            yield from kept_directions(table, set_of(table.set), excited)
        else:
            yield table


def excited_families(charm: Iterable[str]) -> tuple[str, ...]:
    """The D** and continua among these families, in the order of their table."""
    given = set(charm)
    return tuple(family for family in CHARM_STATES if family in given)


def kept_directions(
    table: FormFactorDirections, chosen: FormFactorSet, excited: tuple[str, ...]
) -> list[FormFactorDirection]:
    """The directions that a table keeps, largest first, as variations NAME_1, NAME_2 ..."""
    found = directions(chosen, table.set, table.order, excited)
    names = chosen[table.set].names
    numbers = [
        number
        for number in range(found.kept(table.keep))
        if any(name not in NORMALISATIONS for name, shift in zip(names, found.shifts[number], strict=True) if shift)
        and np.abs(found.shifts[number]).max() > 0.0
    ]
    if table.at_most is not None:
        numbers = numbers[: table.at_most]
    return [
        FormFactorDirection(
            name=f"{table.name}_{rank}",
            label=f"{table.label or table.name}, direction {rank}",
            group=table.group,
            kind="form_factor_direction",
            set=table.set,
            direction=number + 1,
            order=table.order,
        )
        for rank, number in enumerate(numbers, start=1)
    ]
