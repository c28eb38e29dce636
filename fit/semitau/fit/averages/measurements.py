"""Measurements of ratios as they are published: values, errors of two kinds, and what the errors have in common."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field, replace
from types import MappingProxyType
from typing import NamedTuple

import numpy as np

Spread = float | tuple[float, float]
"""A standard deviation, or two of them: upwards and downwards, both as positive numbers."""

Place = tuple[str | int, ...]


@dataclass(frozen=True)
class Measured:
    """One ratio of one measurement: its value, and one standard deviation of each kind."""

    value: float
    statistical: Spread = 0.0
    systematic: Spread = 0.0


@dataclass(frozen=True)
class Measurement:
    """One result: one or two ratios that were measured together.

    ratios : ratio, e.g. "R_D" -> what was found.
    statistical_correlation, systematic_correlation : of the two ratios, the latter with all sources in it.
    sources : common source -> ratio -> the signed shift at one standard deviation of the source, part of `systematic`.
    """

    name: str
    ratios: Mapping[str, Measured]
    statistical_correlation: float = 0.0
    systematic_correlation: float = 0.0
    sources: Mapping[str, Mapping[str, float]] = field(default_factory=lambda: MappingProxyType({}))

    def moved_to(self, values: Mapping[str, float]) -> Measurement:
        """The same errors around other values, ratio -> value."""
        moved = {name: replace(found, value=values.get(name, found.value)) for name, found in self.ratios.items()}
        return replace(self, ratios=moved)


class Fault(NamedTuple):
    """What is wrong with measurements, and where: ("measurement", number, key, ...) or ("source", name)."""

    place: Place
    what: str
    got: str = ""
    wanted: str = ""
    remedy: str = ""


def sides(spread: Spread) -> tuple[float, float]:
    """Standard deviation upwards and downwards."""
    return (spread[0], spread[1]) if isinstance(spread, tuple) else (spread, spread)


def faults_in(measurements: Sequence[Measurement], common: Mapping[str, float]) -> list[Fault]:
    """Everything that keeps single measurements from being averaged; rules between them: `input_vector.inputs`.

    common : source -> its correlation between different measurements.
    """
    found = []
    if not measurements:
        found.append(Fault((), "there is no measurement to average"))
    for source, correlation in common.items():
        if not -1.0 <= correlation <= 1.0:
            found.append(Fault(("source", source, "correlation"), "is no correlation", f"{correlation:g}", "-1 to 1"))
    names = [measurement.name for measurement in measurements]
    for i, measurement in enumerate(measurements):
        place: Place = ("measurement", i)
        if measurement.name in names[:i]:
            found.append(Fault((*place, "name"), "is the name of another measurement", measurement.name))
        if not measurement.ratios:
            found.append(Fault(place, "measures no ratio"))
        if len(measurement.ratios) > 2:
            found.append(Fault(place, "measures too many ratios", ", ".join(measurement.ratios), "one or two"))
        for ratio, measured in measurement.ratios.items():
            found += _faults_of_ratio((*place, ratio), measured)
        found += _faults_of_correlations(place, measurement)
        found += _faults_of_sources((*place, "sources"), measurement, common)
    return found


def _faults_of_ratio(place: Place, measured: Measured) -> list[Fault]:
    found = []
    if not np.isfinite(measured.value):
        found.append(Fault((*place, "value"), "must be finite", f"{measured.value}"))
    for kind in ("statistical", "systematic"):
        spread = sides(getattr(measured, kind))
        if not all(np.isfinite(side) and side >= 0.0 for side in spread):
            shown = ", ".join(f"{side:g}" for side in spread)
            remedy = "Give downward errors without a sign."
            found.append(Fault((*place, kind), "is no error", shown, "positive numbers", remedy))
    if not found and min(np.hypot(sides(measured.statistical), sides(measured.systematic))) <= 0.0:
        remedy = "Give its statistical or systematic error, both sides above 0."
        found.append(Fault(place, "has no error", remedy=remedy))
    return found


def _faults_of_correlations(place: Place, measurement: Measurement) -> list[Fault]:
    found = []
    for kind in ("statistical", "systematic"):
        correlation = getattr(measurement, f"{kind}_correlation")
        if not -1.0 <= correlation <= 1.0:
            key = (*place, f"{kind}_correlation")
            found.append(Fault(key, "is no correlation", f"{correlation:g}", "-1 to 1"))
    return found


def _faults_of_sources(place: Place, measurement: Measurement, common: Mapping[str, float]) -> list[Fault]:
    found = []
    shifts = dict.fromkeys(measurement.ratios, 0.0)  # squares, added up
    for source, moves in measurement.sources.items():
        if source not in common:
            listed = ", ".join(common) or "none"
            remedy = "List it with its correlation between measurements."
            found.append(Fault((*place, source), "is no listed source", source, listed, remedy))
        for ratio, shift in moves.items():
            if ratio not in shifts:
                measured = ", ".join(shifts)
                found.append(Fault((*place, source, ratio), "is not measured here", ratio, measured))
            else:
                shifts[ratio] += shift**2
    for ratio, squared in shifts.items():
        whole = float(np.mean(sides(measurement.ratios[ratio].systematic)))
        if squared > (whole * (1.0 + 1e-9)) ** 2:
            found.append(
                Fault(
                    place,
                    f"exceed the systematic error of {ratio}",
                    f"{np.sqrt(squared):.4g} together",
                    f"up to {whole:.4g}",
                    "The sources are parts of the systematic error.",
                )
            )
    return found
