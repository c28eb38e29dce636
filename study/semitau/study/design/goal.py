"""What a search makes small, from the covariance of the ratios."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.templates import Floats


@dataclass(frozen=True, eq=False)
class Goal:
    """kind : "mean" of relative errors, "area" of the joint region, or the ratio that counts alone.

    chosen : places of the ratios that count. values : injected values of all ratios.
    """

    kind: str
    chosen: tuple[int, ...]
    values: Floats

    @classmethod
    def of(cls, kind: str, ratios: Sequence[str], values: Floats) -> Goal:
        """A ratio stands for those of B⁺ and B⁰ if they are separate. InputError if it is not fitted."""
        names = [k for k, name in enumerate(ratios) if kind in ("mean", "area", name) or name.startswith(f"{kind}_B")]
        if not names:
            raise InputError(
                Problem("is no fitted ratio", where="[design] minimise", got=kind, wanted=", ".join(ratios))
            )
        return cls(kind, tuple(names), values)

    def merit(self, covariance: Floats | None) -> float:
        """The number to make small; infinite if the ratios cannot be told. covariance : (ratios, ratios)."""
        if covariance is None:
            return float("inf")
        inner = covariance[np.ix_(self.chosen, self.chosen)] / np.outer(*[self.values[list(self.chosen)]] * 2)
        if self.kind == "area":
            return float(np.linalg.det(inner) ** (0.5 / len(self.chosen)))
        return float(np.sqrt(np.diag(inner)).mean())

    def slope(self, covariance: Floats) -> Floats:
        """(ratios, ratios) derivative of the merit in the covariance, symmetric and positive."""
        out = np.zeros_like(covariance)
        place = np.ix_(self.chosen, self.chosen)
        if self.kind == "area":
            out[place] = self.merit(covariance) * 0.5 / len(self.chosen) * np.linalg.inv(covariance[place])
        else:
            for k in self.chosen:
                out[k, k] = 0.5 / (len(self.chosen) * self.values[k] * np.sqrt(covariance[k, k]))
        return out
