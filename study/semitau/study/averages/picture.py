"""The picture of an average, from the average itself."""

from __future__ import annotations

from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from semitau.fit.averages.combination import Average
from semitau.fit.averages.compatibility import contour, ellipse
from semitau.fit.averages.input_vector import inputs
from semitau.fit.averages.measurements import Measurement, sides

from ..pictures.ratio_plane import Drawn, Interval, RatioPlane, ratio_plane
from ..pictures.sheet import Picture, Sheet
from .document import AverageResults
from .tables import RATIOS

REGIONS = {"68.3 %": 0.6827, "95.4 %": 0.9545, "99.7 %": 0.9973}
CAPTION = (
    "Each measurement as an ellipse whose shadows on the axes are its errors, or as a band of one standard deviation; "
    "the regions hold the average with the given probability. One-ratio intervals at the right."
)


def average_picture(found: Average, results: AverageResults) -> Sheet:
    """Measurements, average and prediction in the plane of the ratios, or in rows if there is one ratio."""
    order = [ratio.name for ratio in results.ratios]
    columns = [found.ratios.index(name) for name in order]
    best = Drawn("average", {k: (r.value - r.down, r.value, r.value + r.up) for k, r in enumerate(results.ratios)})
    return ratio_plane(
        RatioPlane(
            heading=results.name,
            note=results.note,
            labels=[RATIOS[name] for name in order],
            measurements=[_measurement(m, order) for m in found.inputs.measurements],
            average=best,
            regions={w: contour(found, p)[:, columns] for w, p in REGIONS.items()} if len(order) == 2 else {},
            prediction=_prediction(results, order),
        )
    )


def saved_picture(found: Average, results: AverageResults, folder: Path) -> Picture:
    """The picture as average.svg and average.png in a folder."""
    return average_picture(found, results).save(folder, "average", results.name, CAPTION)


def _measurement(measurement: Measurement, order: list[str]) -> Drawn:
    intervals: dict[int, Interval] = {}
    for k, ratio in enumerate(order):
        if (measured := measurement.ratios.get(ratio)) is not None:
            up, down = np.hypot(sides(measured.statistical), sides(measured.systematic))
            intervals[k] = (measured.value - down, measured.value, measured.value + up)
    if len(intervals) < 2:
        return Drawn(measurement.name, intervals)
    alone = inputs([Measurement(
        measurement.name, {ratio: measurement.ratios[ratio] for ratio in order},
        measurement.statistical_correlation, measurement.systematic_correlation,
    )])  # fmt: skip
    outline = ellipse(np.zeros(2), alone.covariances().sum(axis=0), 1.0)
    return Drawn(measurement.name, intervals, alone.values + _stretched(outline, intervals))


def _stretched(outline: NDArray[np.float64], intervals: dict[int, Interval]) -> NDArray[np.float64]:
    """An ellipse with its sides drawn out to asymmetric errors: its shadows are the intervals."""
    for k, (low, value, high) in intervals.items():
        mean = 0.5 * (high - low)
        outline[:, k] *= np.where(outline[:, k] > 0.0, (high - value) / mean, (value - low) / mean)
    return outline


def _prediction(results: AverageResults, order: list[str]) -> Drawn | None:
    entries = {order.index(entry.ratio): entry for entry in results.prediction if entry.ratio in order}
    if not entries:
        return None
    intervals = {k: (e.value - e.error, e.value, e.value + e.error) for k, e in sorted(entries.items())}
    if len(entries) < 2:
        return Drawn("prediction", intervals)
    errors = np.array([entries[0].error, entries[1].error])
    covariance = np.outer(errors, errors) * (np.eye(2) + results.prediction_correlation * (1.0 - np.eye(2)))
    centre = np.array([entries[0].value, entries[1].value])
    return Drawn("prediction", intervals, ellipse(centre, covariance, 1.0))
