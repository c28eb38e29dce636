"""Templates as flat arrays for the compiled likelihood: lanes, tiles, pieces, moves.

A lane holds one bin. Lanes come in tiles: up to TILE bins of one category, filled up to a multiple of WIDTH with lanes
that hold nothing, so that inner loops are whole vectors and a tile's working set stays in the first cache. A piece is
one component's template in one tile, a move what one nuisance does to one piece. Bins in which nothing is ever expected
have no lane.
"""

from __future__ import annotations

from collections.abc import Iterable, Iterator, Mapping, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Category, Floats, Template, TemplateSet

from .constraints import Constraints
from .functions import Functions
from .interpolation import FLOOR
from .scaled_parts import Part, parts_of
from .vectors import WIDTH

Indices = NDArray[np.int64]

TILE = 128

LIGHT, APPROXIMATE, EXACT_BY_COMPONENT = 0, 1, 2
"""Forms of the likelihood for finite templates (bin_statistics.py)."""


class Arrays(NamedTuple):
    """What the compiled functions read. Parameters: scale parameters first, then coefficients, then nuisances."""

    inverse_injected: Floats  # (parameters,); 1 for coefficients and sizes, 0 for nuisances
    inverse_variance: Floats  # (parameters,) of the constraint, of the logarithm for log-normal ones; 0 without one
    constraints: Constraints
    functions: Functions  # parameters that are set by others
    mate: Indices  # (parameters,): the parameter that multiplies this one in every component; -1 without one
    component_first: Indices  # (components + 1,) into component_scales
    component_scales: Indices  # parameters whose product scales the component; one may stand twice
    tile_first: Indices  # (tiles + 1,) lane
    tile_filled: Indices  # (tiles,) lanes that hold a bin; they come first
    tile_pieces: Indices  # (tiles + 1,) piece
    tile_rows: Indices  # (tiles + 1,) into rows
    rows: Indices  # parameters that change the tile, increasing
    piece_component: Indices  # (pieces,)
    piece_offset: Indices  # (pieces,) into nominal
    piece_moves: Indices  # (pieces + 1,) move
    move_parameter: Indices  # (moves,)
    move_offset: Indices  # (moves,) into odd and even
    nominal: Floats
    odd: Floats
    even: Floats
    floor: Floats  # (lanes,) expectation below which the protection sets in
    template_variance: Floats  # (lanes,) squared relative error of the expectation from finite templates
    variance: Floats  # of each piece, as long as nominal: events squared
    inverse_effective: Floats  # of each piece: one over the effective counts of its bins; 0 where they are exact
    form: int  # LIGHT, APPROXIMATE or EXACT_BY_COMPONENT


class Layout(NamedTuple):
    """The arrays and how bins map to lanes."""

    arrays: Arrays
    lane_bin: Indices  # (lanes,) bin, in the order of categories and their axes; -1 for lanes that fill up
    bin_lane: Indices  # (bins,) lane; -1 for bins that never hold anything


class _Totals(NamedTuple):
    """Per bin of a category: the expectation, its variance, and how far variations could fill it."""

    expected: Floats
    variance: Floats
    reach: Floats


class _Padded:
    """A growing flat array whose parts are filled up to the length of their tile."""

    def __init__(self) -> None:
        self.parts: list[Floats] = [np.zeros(0)]
        self.size = 0

    def add(self, values: Floats, length: int, filling: float = 0.0) -> int:
        part = np.full(length, filling)
        part[: values.size] = values
        self.parts.append(part)
        self.size += length
        return self.size - length

    def array(self) -> Floats:
        return np.concatenate(self.parts)


class _Growing:
    """The arrays under construction, tile by tile."""

    def __init__(self, parts: Sequence[Part], indices: Mapping[str, int]) -> None:
        self.parts, self.indices = parts, indices
        self.lane_bin: list[int] = []
        self.tile_first, self.tile_filled, self.tile_pieces = [0], list[int](), [0]
        self.tile_rows, self.rows = [0], list[int]()
        self.piece_component, self.piece_offset, self.piece_moves = list[int](), list[int](), [0]
        self.move_parameter, self.move_offset = list[int](), list[int]()
        self.nominal, self.odd, self.even = _Padded(), _Padded(), _Padded()
        self.variance, self.inverse_effective = _Padded(), _Padded()
        self.floor, self.template_variance = _Padded(), _Padded()

    def add_tile(self, category: Category, bins: Indices, first_bin: int, totals: _Totals) -> None:
        length = -(-bins.size // WIDTH) * WIDTH
        touched: set[int] = set()
        for number, part in enumerate(self.parts):
            template = part.templates.get(category.name)
            if template is not None and self._add_piece(number, template, bins, length, touched):
                touched.update(self.indices[name] for name in part.scales)
        self.lane_bin += [*(first_bin + bins).tolist(), *[-1] * (length - bins.size)]
        expected, variance, reach = (part[bins] for part in totals)
        filled = expected > 0
        # A bin that only variations fill has no expectation of its own to take a part of.
        self.floor.add(FLOOR * np.where(filled, expected, reach), length, 1.0)
        self.template_variance.add(np.where(filled, variance / np.where(filled, expected, 1.0) ** 2, 0.0), length)
        self.tile_first.append(self.tile_first[-1] + length)
        self.tile_filled.append(bins.size)
        self.tile_pieces.append(len(self.piece_component))
        self.rows += sorted(touched)
        self.tile_rows.append(len(self.rows))

    def _add_piece(self, number: int, template: Template, bins: Indices, length: int, touched: set[int]) -> bool:
        moves = list(_moves(template, bins))
        centre = template.nominal.ravel()[bins]
        of_variance = self.parts[number].of_variance and template.variance.any()
        if not (moves or centre.any() or of_variance):
            return False
        self.piece_component.append(number)
        self.piece_offset.append(self.nominal.add(centre, length))
        variance = template.variance.ravel()[bins]
        self.variance.add(variance, length)
        # Where positive and negative weights cancel there is no content whose relative error could move with it.
        filled = centre != 0.0
        self.inverse_effective.add(np.where(filled, variance / np.where(filled, centre, 1.0) ** 2, 0.0), length)
        for name, odd, even in moves:
            self.move_parameter.append(self.indices[name])
            self.move_offset.append(self.odd.add(odd, length))
            self.even.add(even, length)
            touched.add(self.indices[name])
        self.piece_moves.append(len(self.move_parameter))
        return True


def lay_out(
    templates: TemplateSet,
    constraints: Constraints,
    functions: Functions,
    indices: Mapping[str, int],
    template_statistics: bool,
    form: int = LIGHT,
    parts: Sequence[Part] | None = None,
) -> Layout:
    """Flatten the templates.

    constraints, functions : what is known of the parameters, and which of them follow others.
    indices : parameter name -> index.
    template_statistics : False takes the templates as exact.
    form : of the likelihood for finite templates.
    parts : what is scaled by products of parameters, one or more to a component; default the components themselves.

    Raises InputError for a bin whose total expectation is negative, and when no bin expects anything.
    """
    totals = [_totals(templates, category) for category in templates.categories]
    _refuse_negative(templates.categories, totals)
    parts = parts_of(templates) if parts is None else parts
    growing, first_bin = _Growing(parts, indices), 0
    for category, total in zip(templates.categories, totals, strict=True):
        active = np.flatnonzero((total.expected > 0) | (total.reach > 0))
        for bins in np.array_split(active, max(1, -(-active.size // TILE))):
            if bins.size:
                growing.add_tile(category, bins, first_bin, total)
        first_bin += total.expected.size
    if not growing.lane_bin:
        raise InputError(Problem("no bin of any category expects an event", where="templates"))

    lane_bin = _whole(growing.lane_bin)
    bin_lane = np.full(first_bin, -1, dtype=np.int64)
    bin_lane[lane_bin[lane_bin >= 0]] = np.flatnonzero(lane_bin >= 0)
    inverse_injected = np.zeros(len(indices))
    for parameter in templates.parameters:
        inverse_injected[indices[parameter.name]] = 1.0 / parameter.injected
    for coefficient in templates.coefficients:
        if coefficient.name in indices:
            inverse_injected[indices[coefficient.name]] = 1.0
    for name in {name for part in parts for name in part.scales} - {known.name for known in templates.parameters}:
        inverse_injected[indices[name]] = 1.0
    scales = [[indices[name] for name in part.scales] for part in parts]
    arrays = Arrays(
        inverse_injected=inverse_injected,
        inverse_variance=constraints.inverse_variance,
        constraints=constraints,
        functions=functions,
        mate=_mates(scales, constraints),
        component_first=_whole(np.cumsum([0, *map(len, scales)])),
        component_scales=_whole([index for part in scales for index in part]),
        tile_first=_whole(growing.tile_first),
        tile_filled=_whole(growing.tile_filled),
        tile_pieces=_whole(growing.tile_pieces),
        tile_rows=_whole(growing.tile_rows),
        rows=_whole(growing.rows),
        piece_component=_whole(growing.piece_component),
        piece_offset=_whole(growing.piece_offset),
        piece_moves=_whole(growing.piece_moves),
        move_parameter=_whole(growing.move_parameter),
        move_offset=_whole(growing.move_offset),
        nominal=growing.nominal.array(),
        odd=growing.odd.array(),
        even=growing.even.array(),
        floor=growing.floor.array(),
        template_variance=growing.template_variance.array() * float(template_statistics),
        variance=growing.variance.array(),
        inverse_effective=growing.inverse_effective.array(),
        form=form if template_statistics else LIGHT,
    )
    return Layout(arrays, lane_bin, bin_lane)


def _mates(scales: Sequence[Sequence[int]], constraints: Constraints) -> Indices:
    """For each parameter that nothing but the templates knows, one that multiplies it wherever it appears, or -1.

    A ratio times a yield is the case: the product is what the data measure (newton.py).
    """
    size = constraints.law.size
    where = [{c for c, own in enumerate(scales) if p in own} for p in range(size)]
    mate = np.full(size, -1, dtype=np.int64)
    for p in range(size):
        if any(list(own).count(p) > 1 for own in scales):  # the templates are not linear in it
            continue
        known = constraints.inverse_variance[p] > 0 or np.isfinite([constraints.lower[p], constraints.upper[p]]).any()
        others = [q for q in range(size) if where[p] and where[p] < where[q]]
        if others and not known:
            mate[p] = max(others, key=lambda q: len(where[q]))
    # The mate of another has to stay what it is.
    mate[mate[mate >= 0]] = -1
    return mate


def bin_name(category: Category, index: int) -> str:
    """A bin in words, e.g. "category Dst0_mu, bin [2, 5]"; `index` counts the category's bins in C order."""
    place = [int(i) for i in np.unravel_index(index, category.shape)]
    return f"category {category.name}, bin {place}"


def _totals(templates: TemplateSet, category: Category) -> _Totals:
    size = int(np.prod(category.shape))
    totals = _Totals(np.zeros(size), np.zeros(size), np.zeros(size))
    for component in templates.components:
        template = templates.templates.get((category.name, component.name))
        if template is None:
            continue
        totals.expected[:] += template.nominal.ravel()
        totals.variance[:] += template.variance.ravel()
        for _, odd, even in _moves(template, np.arange(size)):
            totals.reach[:] += np.abs(odd) + np.abs(even)
    return totals


def _refuse_negative(categories: Sequence[Category], totals: Iterable[_Totals]) -> None:
    problems = [
        Problem(
            "the components together expect a negative number of events",
            where=bin_name(category, int(index)),
            got=f"{total.expected[index]:g}",
            wanted="zero or more",
            remedy="Merge it with a neighbour, or generate more events.",
        )
        for category, total in zip(categories, totals, strict=True)
        for index in np.flatnonzero(total.expected < 0)
    ]
    if problems:
        raise InputError(*problems)


def _moves(template: Template, bins: Indices) -> Iterator[tuple[str, Floats, Floats]]:
    """Nuisance, odd and even part of its shift in these bins, for the nuisances that do something there."""
    centre = template.nominal.ravel()[bins]
    for name, plus in template.plus.items():
        up, down = plus.ravel()[bins], template.minus[name].ravel()[bins]
        odd, even = 0.5 * (up - down), 0.5 * (up + down) - centre
        if odd.any() or even.any():
            yield name, odd, even


def _whole(values: Sequence[int] | Indices) -> Indices:
    return np.array(values, dtype=np.int64)
