"""[[variation]] tables written out: one that stands for several directions of a covariance becomes that many."""

from __future__ import annotations

from collections.abc import Callable, Iterable, Iterator

import numpy as np

from ..decays.form_factor_directions import directions
from ..decays.form_factor_parameters import NORMALISATIONS
from ..decays.form_factor_set import FormFactorSet
from .variations import FormFactorDirection, FormFactorDirections, SingleVariation, Variation


def single_variations(tables: Iterable[Variation], set_of: Callable[[str], FormFactorSet]) -> Iterator[SingleVariation]:
    """Every variation, each with a plus and a minus side. set_of : the study's set for "D", "Dst" or "Dss"."""
    for table in tables:
        if isinstance(table, FormFactorDirections):
            yield from kept_directions(table, set_of(table.set))
        else:
            yield table


def kept_directions(table: FormFactorDirections, chosen: FormFactorSet) -> list[FormFactorDirection]:
    """The directions that a table keeps, largest first, as variations NAME_1, NAME_2 ..."""
    found = directions(chosen, table.set, table.order)
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
