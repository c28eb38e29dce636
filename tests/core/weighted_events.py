"""A toy world of weighted events, and its quadratic templates by brute force: every event's weight at every point."""

from __future__ import annotations

import numpy as np
from semitau.core.quadratic import pairs_of
from semitau.core.templates import (
    Category,
    Coefficient,
    Component,
    Nuisance,
    Observable,
    ScaleParameter,
    Template,
    TemplateSet,
)

NAMES = ("SR", "T")
EDGES = (0.0, 0.2, 0.5, 0.7, 1.0)


class World:
    """Events with amplitudes m + c_SR s + c_T t (complex), weighted by |amplitude|² over that at `base`."""

    def __init__(self, base: tuple[float, float] = (0.1, -0.05), events: int = 400, seed: int = 5) -> None:
        rng = np.random.default_rng(seed)
        self.base = base
        self.x = rng.uniform(0.0, 1.0, events)
        self.scale = 0.25
        m = 1.0 + 0.5j * self.x
        self.parts = np.stack([m, 0.4 * self.x + 0.1j, 0.8 - 1.5 * self.x + 0.3j * rng.normal(size=events)])

    def weights(self, point: tuple[float, float]) -> np.ndarray:
        """Expected events of each event at a point."""
        there, home = (np.abs(np.array([1.0, *at]) @ self.parts) ** 2 for at in (point, self.base))
        return np.asarray(self.scale * there / home)

    def histogram(self, weights: np.ndarray) -> np.ndarray:
        return np.asarray(np.histogram(self.x, EDGES, weights=weights)[0])

    def rate(self, point: tuple[float, float]) -> float:
        """A ratio that follows the coefficients."""
        return 0.3 * (1.0 + 1.2 * point[0] + 0.8 * point[0] ** 2 - 2.0 * point[1] + 9.0 * point[1] ** 2)

    def pieces(self) -> np.ndarray:
        """(pairs, events): contribution of each event to each piece."""
        density = np.abs(np.array([1.0, *self.base]) @ self.parts) ** 2
        products = []
        for i in range(3):
            for j in range(i, 3):
                product = (self.parts[i].conj() * self.parts[j]).real * (1.0 if i == j else 2.0)
                products.append(self.scale * product / density)
        return np.stack(products)

    def template_set(self) -> TemplateSet:
        """A signal that follows the coefficients, a light mode that does not, one variation."""
        pieces, pairs = self.pieces(), pairs_of(NAMES)
        nominal = self.histogram(self.weights(self.base))
        tilt = np.array([0.9, 0.95, 1.05, 1.1])
        signal = Template(
            nominal,
            self.histogram(self.weights(self.base) ** 2),
            {"tag": nominal * tilt},
            {"tag": nominal / tilt},
            {pair: self.histogram(piece) for pair, piece in zip(pairs, pieces, strict=True)},
            pieces @ pieces.T,
        )
        light = Template(np.array([700.0, 200.0, 60.0, 20.0]), np.array([30.0, 10.0, 3.0, 1.0]))
        rate = (0.3, 0.3 * 1.2, -0.3 * 2.0, 0.3 * 0.8, 0.0, 0.3 * 9.0)
        return TemplateSet(
            categories=(Category("only", "only", (Observable("x", "x", "", EDGES),)),),
            components=(
                Component("signal", "signal", "signal", ("R_D", "yield_light")),
                Component("light", "light", "normalisation", ("yield_light",)),
            ),
            parameters=(
                ScaleParameter(
                    "R_D", "R(D)", "ratio", self.rate(self.base), None,
                    tuple((a, b, piece) for (a, b), piece in zip(pairs, rate, strict=True)),
                ),
                ScaleParameter("yield_light", "yield", "yield", 1.0),
            ),
            nuisances=(Nuisance("tag", "tag", "detector"),),
            templates={("only", "signal"): signal, ("only", "light"): light},
            coefficients=tuple(
                Coefficient(name, f"Re C_{name}", value, limit)
                for name, value, limit in zip(NAMES, self.base, (4.0, 1.0), strict=True)
            ),
        )  # fmt: skip
