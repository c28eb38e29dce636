"""Histograms of a component with all its variations, added up over its decay chains."""

from __future__ import annotations

import numpy as np
import numpy.typing as npt

from .chunk_tasks import Bench
from .component_parts import Part, PartSums
from .cut_flow import BEFORE_CATEGORIES
from .variations import Side

Floats = npt.NDArray[np.float64]


class ComponentSums:
    """Weighted sums of the parts of one component, over all bins of all categories."""

    def __init__(self, bench: Bench) -> None:
        self.bench = bench
        steps = len(BEFORE_CATEGORIES) + bench.shape[0]
        self.nominal = np.zeros(bench.bins)
        self.variance = np.zeros(bench.bins)
        self.sides: dict[Side, Floats] = {}
        self.expected = np.zeros(steps)
        self.generated = np.zeros(steps, dtype=np.int64)
        self.by_category = np.zeros((steps, bench.shape[1]))
        sizes = [int(np.prod(category.shape)) for category in bench.categories]
        self._category_of_bin = np.repeat(np.arange(len(sizes)), sizes)

    def add(self, part: Part, whole: PartSums) -> None:
        nominal = part.weight * whole.histogram[:, 0]
        columns = {side: part.weight * whole.histogram[:, 1 + k] for k, side in enumerate(part.columns)}
        columns |= {side: nominal * factors[self._category_of_bin] for side, factors in part.factors.items()}
        # A side that did not act so far has the nominal contents, and one that does not act here goes on with them.
        for side in columns:
            self.sides.setdefault(side, self.nominal.copy())
        for side, contents in self.sides.items():
            contents += columns.get(side, nominal)
        self.nominal += nominal
        self.variance += part.weight**2 * whole.histogram[:, 0]
        generated = np.concatenate([[whole.events], whole.found, whole.flow.sum(axis=1)])
        self.generated += generated
        self.expected += part.weight * generated
        self.by_category[len(BEFORE_CATEGORIES) :] += part.weight * whole.flow
