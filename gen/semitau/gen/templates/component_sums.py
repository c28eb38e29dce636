"""Histograms of a component with all its variations, added up over its decay chains."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np
import numpy.typing as npt
from semitau.core.quadratic import Reweighting

from .chunk_tasks import Bench
from .component_parts import Part, PartSums
from .cut_flow import BEFORE_CATEGORIES
from .variations import Side

Floats = npt.NDArray[np.float64]


class ComponentSums:
    """Weighted sums of the parts of one component, over all bins of all categories.

    spread : side -> sums of the weights and of the squared weights of all events, for sides made by weights; the
        nominal ones in `plain`.
    pieces (bins, pairs), moments (categories, pairs, pairs) : as `Template.quadratic` and `Template.moments`; of no
        meaning unless something `follows` coefficients.
    """

    def __init__(self, bench: Bench) -> None:
        self.bench = bench
        steps = len(BEFORE_CATEGORIES) + bench.shape[0]
        pairs = (len(bench.quadratic) + 1) * (len(bench.quadratic) + 2) // 2
        self.nominal = np.zeros(bench.bins)
        self.variance = np.zeros(bench.bins)
        self.sides: dict[Side, Floats] = {}
        self.plain = np.zeros(2)
        self.spread: dict[Side, Floats] = {}
        self.follows = False
        self.pieces = np.zeros((bench.bins, pairs))
        self.moments = np.zeros((len(bench.categories), pairs, pairs))
        self.expected = np.zeros(steps)
        self.generated = np.zeros(steps, dtype=np.int64)
        self.by_category = np.zeros((steps, bench.shape[1]))
        self._category_of_bin = bench.category_of_bin

    def add(self, part: Part, whole: PartSums) -> None:
        sums = whole.sums
        nominal = part.weight * sums.histogram[:, 0]
        columns = {side: part.weight * sums.histogram[:, 1 + k] for k, side in enumerate(part.columns)}
        columns |= {side: nominal * factors[self._category_of_bin] for side, factors in part.factors.items()}
        # A side that did not act so far has the nominal contents, and one that does not act here goes on with them.
        for side in columns:
            self.sides.setdefault(side, self.nominal.copy())
        for side, contents in self.sides.items():
            contents += columns.get(side, nominal)
        self._add_spread(part, whole)
        self._add_pieces(part, whole)
        self.nominal += nominal
        self.variance += part.weight**2 * sums.histogram[:, 0]
        generated = np.concatenate([[whole.events], sums.found, sums.flow.sum(axis=1)])
        self.generated += generated
        self.expected += part.weight * generated
        self.by_category[len(BEFORE_CATEGORIES) :] += part.weight * sums.flow

    def _add_spread(self, part: Part, whole: PartSums) -> None:
        scale = np.array([part.weight, part.weight**2])
        events = whole.sums.histogram[:, 0]
        plain = scale * events.sum()
        here = {side: scale * whole.sums.spread[k] for k, side in enumerate(part.columns[: part.weights])}
        for side, factors in part.factors.items():
            weights = factors[self._category_of_bin]
            here[side] = scale * np.array([events @ weights, events @ weights**2])
        for side in here:
            self.spread.setdefault(side, self.plain.copy())
        for side, total in self.spread.items():
            total += here.get(side, plain)
        self.plain += plain

    def _add_pieces(self, part: Part, whole: PartSums) -> None:
        """Events that follow no coefficient are a constant: they count in the first piece alone."""
        if part.contraction is None:
            events = whole.sums.histogram[:, 0]
            self.pieces[:, 0] += part.weight * events
            self.moments[:, 0, 0] += part.weight**2 * np.bincount(
                self._category_of_bin, events, len(self.bench.categories)
            )
            return
        self.follows = True
        self.pieces += part.weight * whole.sums.pieces @ part.contraction.T
        upper = np.triu(whole.sums.moments)
        both = upper + np.triu(upper, 1).transpose(0, 2, 1)
        self.moments += part.weight**2 * part.contraction @ both @ part.contraction.T

    def reweightings(self, component: str) -> Iterator[Reweighting]:
        """Effective events of every side made by weights, over all categories."""
        events = _effective(self.plain)
        for (name, sign), total in self.spread.items():
            yield Reweighting("", component, f"{name} {'+' if sign > 0 else '-'}", events, _effective(total))


def _effective(sums: Floats) -> float:
    return float(sums[0] ** 2 / sums[1]) if sums[1] > 0 else 0.0
