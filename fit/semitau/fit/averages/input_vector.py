"""Measurements as one vector with one covariance, whose widths may depend on the true value."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from semitau.core.errors import InputError, Problem

from .measurements import Fault, Measurement, Place, faults_in, sides

Floats = NDArray[np.float64]
LEAST_WIDTH = 0.1
"""Asymmetric errors are followed down to this share of their mean."""
SINGULAR = 1e-9
KINDS = ("statistical", "systematic")


@dataclass(frozen=True)
class Inputs:
    """Entry i is the ratio `names[i][1]` of the measurement `names[i][0]`.

    values : (inputs,). up, down : (2, inputs) standard deviations, statistical and systematic.
    correlations : (2, inputs, inputs), statistical and systematic.
    """

    measurements: tuple[Measurement, ...]
    common: Mapping[str, float]
    names: tuple[tuple[str, str], ...]
    values: Floats
    up: Floats
    down: Floats
    correlations: Floats

    @property
    def ratios(self) -> tuple[str, ...]:
        """The ratios that are measured, in order of first appearance."""
        return tuple(dict.fromkeys(ratio for _, ratio in self.names))

    @property
    def design(self) -> Floats:
        """(inputs, ratios): 1 where an input measures a ratio."""
        return np.array([[float(ratio == name) for ratio in self.ratios] for _, name in self.names])

    def widths(self, shifts: Floats | None = None) -> Floats:
        """(2, inputs) standard deviations of both kinds for true values that lie `shifts` above the measured ones.

        None takes the mean of both sides. Otherwise each width is a straight line in the true value that gives the
        downward error where the true value is one (total) downward error below the measured one, and the upward error
        one upward error above: with a single kind of error the Gaussian of linear width of R. Barlow,
        arXiv:physics/0406120, and with two the interval of a single measurement is still the sum in quadrature.
        """
        mean = 0.5 * (self.up + self.down)
        if shifts is None:
            return mean
        far_up, far_down = np.sqrt((self.up**2).sum(axis=0)), np.sqrt((self.down**2).sum(axis=0))
        along = (shifts + far_down) / (far_up + far_down)
        return np.asarray(np.maximum(self.down + (self.up - self.down) * along, LEAST_WIDTH * mean))

    def covariances(self, shifts: Floats | None = None) -> Floats:
        """(2, inputs, inputs) statistical and systematic covariance, with the widths that `shifts` give."""
        widths = self.widths(shifts)
        return np.asarray(widths[:, :, None] * self.correlations * widths[:, None, :])

    def source_covariance(self, source: str) -> Floats:
        """(inputs, inputs): the part of the systematic covariance that a common source makes, errors symmetrised."""
        entries = [(owner, ratio) for owner in self.measurements for ratio in owner.ratios]
        shift = np.array([owner.sources.get(source, {}).get(ratio, 0.0) for owner, ratio in entries])
        same = np.array([[a is b for b, _ in entries] for a, _ in entries])
        return np.asarray(np.where(same, 1.0, self.common[source]) * np.outer(shift, shift))


def inputs(measurements: Sequence[Measurement], common: Mapping[str, float] | None = None) -> Inputs:
    """Measurements as a vector.

    Inside a measurement the published correlations hold. Between measurements i and j the covariance is the sum over
    the common sources of (correlation of the source) x (signed shift of i) x (signed shift of j); a source widens and
    narrows with the systematic error that holds it.

    common : source -> its correlation between different measurements, -1 to 1; inside one it is full.

    Raises
    ------
    InputError : a measurement that cannot be averaged; correlations that cannot be (the pair is named).
    """
    measurements, common = tuple(measurements), dict(common or {})
    found = faults_in(measurements, common)
    if not found:
        made = _stacked(measurements, common)
        found = impossible_correlations(made)
        if not found:
            return made
    raise InputError(*(Problem(f.what, _words(f.place, measurements), f.got, f.wanted, f.remedy) for f in found))


def faults_of(measurements: Sequence[Measurement], common: Mapping[str, float]) -> list[Fault]:
    """All that `inputs` would reject."""
    return faults_in(measurements, common) or impossible_correlations(_stacked(tuple(measurements), common))


def _words(place: Place, measurements: Sequence[Measurement]) -> str:
    words = [str(part) for part in place]
    if len(place) > 1 and isinstance(place[1], int):
        words[1] = measurements[place[1]].name
    return ": ".join((" ".join(words[:2]), *words[2:]))


def _stacked(measurements: tuple[Measurement, ...], common: Mapping[str, float]) -> Inputs:
    entries = [(owner, ratio, found) for owner in measurements for ratio, found in owner.ratios.items()]
    up, down = (
        np.array([[sides(getattr(found, kind))[side] for _, _, found in entries] for kind in KINDS]) for side in (0, 1)
    )
    same = np.array([[a is b for b, _, _ in entries] for a, _, _ in entries])
    inside = np.array([[getattr(owner, f"{kind}_correlation") for owner, _, _ in entries] for kind in KINDS])
    correlations = np.where(np.eye(len(entries), dtype=bool), 1.0, np.where(same, inside[:, :, None], 0.0))
    systematic = 0.5 * (up[1] + down[1])
    for source, across in common.items():
        shift = np.array([owner.sources.get(source, {}).get(ratio, 0.0) for owner, ratio, _ in entries])
        share = np.divide(shift, systematic, out=np.zeros_like(shift), where=systematic > 0.0)
        correlations[1] += np.where(same, 0.0, across * np.outer(share, share))
    return Inputs(
        measurements,
        common,
        tuple((owner.name, ratio) for owner, ratio, _ in entries),
        np.array([found.value for _, _, found in entries]),
        up,
        down,
        correlations,
    )


def impossible_correlations(made: Inputs) -> list[Fault]:
    """Correlations that no errors can have together, with the pair that is most at fault."""
    found = [fault for i, owner in enumerate(made.measurements) for fault in _remainder(i, owner)]
    if found:
        return found
    lowest, pair, correlation = _weakest(made.correlations[1])
    if lowest < -SINGULAR:
        what = "the systematic correlations and common sources cannot hold together"
        remedy = "Weaken the common sources that this pair shares, or the correlation of those sources."
    else:
        total = made.covariances().sum(axis=0)
        width = np.sqrt(np.diag(total))
        lowest, pair, correlation = _weakest(total / np.outer(width, width))
        if lowest > SINGULAR:
            return []
        what = "the errors and correlations make a covariance that is not positive definite"
        remedy = "Weaken the correlation of this pair, or the common sources that it shares."
    names = " and ".join(f"{made.names[i][1]} of {made.names[i][0]}" for i in pair)
    owner = [measurement.name for measurement in made.measurements].index(made.names[pair[1]][0])
    place = ("measurement", owner, made.names[pair[1]][1])
    got = f"correlation {correlation:.3f}, smallest eigenvalue {lowest:.2g}"
    return [Fault(place, f"{what}, foremost those of {names}", got, remedy=remedy)]


def _weakest(correlation: Floats) -> tuple[float, tuple[int, int], float]:
    """Smallest eigenvalue, the pair of entries that carries it, their correlation."""
    if len(correlation) == 1:
        return 1.0, (0, 0), 1.0
    values, vectors = np.linalg.eigh(correlation)
    first, second = sorted(np.argsort(-np.abs(vectors[:, 0]), kind="stable")[:2].tolist())
    return float(values[0]), (first, second), float(correlation[first, second])


def _remainder(number: int, owner: Measurement) -> list[Fault]:
    """A fault if what the common sources leave of the systematic errors cannot have the correlation that they leave."""
    if len(owner.ratios) < 2 or not owner.sources:
        return []
    whole = np.array([np.mean(sides(found.systematic)) for found in owner.ratios.values()])
    shifts = np.array([[moves.get(ratio, 0.0) for ratio in owner.ratios] for moves in owner.sources.values()])
    rest = np.outer(whole, whole) - shifts.T @ shifts
    off = owner.systematic_correlation * whole[0] * whole[1] - (shifts.T @ shifts)[0, 1]
    if off**2 <= (rest[0, 0] + SINGULAR * whole[0] ** 2) * (rest[1, 1] + SINGULAR * whole[1] ** 2):
        return []
    first, second = owner.ratios
    room = float(np.sqrt(max(rest[0, 0] * rest[1, 1], 0.0)))
    return [
        Fault(
            ("measurement", number, "sources"),
            f"leave an impossible correlation between the systematic errors of {first} and {second}",
            f"covariance {off:.3g} beside the sources",
            f"{-room:.3g} to {room:.3g}",
            "Check the signs of the shifts, or systematic_correlation, which includes the sources.",
        )
    ]
