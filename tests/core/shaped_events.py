"""A toy world of decays whose amplitudes are linear in form-factor shifts, and its templates by brute force.

Heavy and light decays share the shifts a and b; a detector sees some of them. Every event's weight is known at every
point, so that templates, rates and the ratio are plain sums.
"""

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

NAMES = ("a", "b")
EDGES = (0.0, 0.2, 0.5, 0.7, 1.0)
RATIO = 0.3


class Shaped:
    """Decays with amplitudes m + a u + b v, weighted by their squares over those at `base`, where they are drawn.

    parts : component -> (3, events). seen : component -> (events,) which a detector finds. x : what it measures.
    """

    def __init__(self, base: tuple[float, float] = (0.0, 0.0), events: int = 4000, seed: int = 5) -> None:
        rng = np.random.default_rng(seed)
        self.base = base
        self.x = {name: rng.uniform(0.0, 1.0, events) for name in ("heavy", "light")}
        self.seen = {name: rng.uniform(0.0, 1.0, events) < 0.3 + 0.5 * x for name, x in self.x.items()}
        self.parts = {
            "heavy": np.stack([1.0 + 0.5 * self.x["heavy"], 0.3 - 0.2 * self.x["heavy"], 0.05 + 0.3 * self.x["heavy"]]),
            "light": np.stack([1.5 - self.x["light"], 0.1 - 0.4 * self.x["light"] ** 2, 0.2 * self.x["light"]]),
        }
        self.expected = {"heavy": 900.0, "light": 6000.0}
        self.events = events

    def weights(self, name: str, point: tuple[float, float]) -> np.ndarray:
        """Expected decays of each event, seen or not; decays are drawn with equal weights at `base`."""
        density = [(np.array([1.0, *at]) @ self.parts[name]) ** 2 for at in (point, self.base)]
        return np.asarray(self.expected[name] / self.events * density[0] / density[1])

    def rate(self, name: str, point: tuple[float, float]) -> float:
        """Decays over those at `base`."""
        return float(self.weights(name, point).sum() / self.expected[name])

    def ratio(self, point: tuple[float, float]) -> float:
        return RATIO * self.rate("heavy", point) / self.rate("light", point)

    def seen_shape(self, name: str, point: tuple[float, float]) -> np.ndarray:
        """Expected events by bin for as many decays as at `base`: what a component is whose size is a parameter."""
        weights = self.weights(name, point) / self.rate(name, point)
        return np.asarray(np.histogram(self.x[name], EDGES, weights=weights * self.seen[name])[0])

    def pieces(self, name: str) -> np.ndarray:
        """(pairs, events) what each event counts in each piece."""
        whole, density = self.parts[name], (np.array([1.0, *self.base]) @ self.parts[name]) ** 2
        products = [whole[i] * whole[j] * (1.0 if i == j else 2.0) for i in range(3) for j in range(i, 3)]
        return np.asarray(np.stack(products) * self.expected[name] / self.events / density)

    def form(self, name: str, scale: float = 1.0) -> tuple[tuple[str, str, float], ...]:
        sums = self.pieces(name).sum(axis=1) * scale / self.expected[name]
        return tuple((a, b, float(piece)) for (a, b), piece in zip(pairs_of(NAMES), sums, strict=True))

    def template(self, name: str, tilt: float) -> Template:
        pieces = self.pieces(name) * self.seen[name]
        nominal = self.seen_shape(name, self.base)
        sides = [nominal * (1.0 + sign * tilt * np.array([-1.0, -0.5, 0.5, 1.0])) for sign in (1, -1)]
        return Template(
            nominal,
            np.histogram(self.x[name], EDGES, weights=(self.weights(name, self.base) * self.seen[name]) ** 2)[0],
            {"tag": sides[0]},
            {"tag": sides[1]},
            {
                pair: np.histogram(self.x[name], EDGES, weights=piece)[0]
                for pair, piece in zip(pairs_of(NAMES), pieces, strict=True)
            },
            pieces @ pieces.T,
        )

    def template_set(self) -> TemplateSet:
        """a is a direction of a covariance, b a free shift; a background follows neither."""
        background = Template(np.array([60.0, 80.0, 60.0, 30.0]), np.array([4.0, 5.0, 4.0, 2.0]))
        return TemplateSet(
            categories=(Category("only", "only", (Observable("x", "x", "", EDGES),)),),
            components=(
                Component("heavy", "heavy decays", "signal", ("R_D", "yield_light"), self.form("heavy")),
                Component("light", "light decays", "normalisation", ("yield_light",), self.form("light")),
                Component("rest", "rest", "background", ()),
            ),
            parameters=(
                ScaleParameter("R_D", "R(D)", "ratio", RATIO, None, self.form("heavy", RATIO), self.form("light")),
                ScaleParameter("yield_light", "yield", "yield", 1.0),
            ),
            nuisances=(Nuisance("tag", "tag", "detector"),),
            templates={
                ("only", "heavy"): self.template("heavy", 0.05),
                ("only", "light"): self.template("light", 0.02),
                ("only", "rest"): background,
            },
            coefficients=(
                Coefficient("a", "direction a", self.base[0], 5.0, "shape", 1.0, "form factors"),
                Coefficient("b", "shift b", self.base[1], 2.0, "shape"),
            ),
        )
