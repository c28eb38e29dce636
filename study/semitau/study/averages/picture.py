"""The picture of an average, and where it is stored."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from numpy.typing import NDArray
from semitau.fit.averages.compatibility import ellipse

from ..pictures.ratio_plane import Drawn, Interval, RatioPlane, ratio_plane
from ..pictures.sheet import Picture, Sheet
from .part import AveragedRatio, AverageInputPart, AverageResults
from .tables import RATIOS

CAPTION = (
    "Each measurement as an ellipse whose shadows on the axes are its errors, or as a band of one standard deviation; "
    "the regions hold the average with the given probability. One-ratio intervals at the right."
)
CAPTION_WITH_PLANS = f"{CAPTION} Dashed: the average with a planned measurement that finds just the average."


def average_picture(results: AverageResults) -> Sheet:
    """Measurements, average and prediction in the plane of the ratios, or in rows if there is one ratio; dashed what
    planned measurements would make of the average if they found it again."""
    order = [ratio.name for ratio in results.ratios]
    return ratio_plane(
        RatioPlane(
            heading=results.name,
            note=results.note,
            labels=[RATIOS[name] for name in order],
            measurements=_measurements(results, order),
            average=Drawn("average", _intervals(results.ratios)),
            regions={f"{100 * region.probability:.1f} %": np.array(region.outline) for region in results.regions},
            prediction=_prediction(results, order),
            planned=[
                Drawn(f"+ {case.planned}", _intervals(case.ratios), _outline(case.ratios, case.correlation))
                for case in results.planned
                if case.found_at == "average" and [ratio.name for ratio in case.ratios] == order
            ],
        )
    )


def caption(results: AverageResults) -> str:
    """What the picture shows."""
    return CAPTION_WITH_PLANS if results.planned else CAPTION


def saved_picture(results: AverageResults, folder: Path) -> Picture:
    """The picture as average.svg and average.png in a folder."""
    return average_picture(results).save(folder, "average", results.name, caption(results))


def _measurements(results: AverageResults, order: list[str]) -> list[Drawn]:
    """In the order of the inputs; rows of one measurement stand together."""
    drawn = []
    for name in dict.fromkeys(entry.measurement for entry in results.inputs):
        places = [i for i, entry in enumerate(results.inputs) if entry.measurement == name]
        intervals: dict[int, Interval] = {}
        for i in places:
            entry = results.inputs[i]
            up, down = np.hypot(entry.statistical, entry.systematic)
            intervals[order.index(entry.ratio)] = (entry.value - down, entry.value, entry.value + up)
        intervals = dict(sorted(intervals.items()))
        outline = None
        if len(intervals) == 2:
            correlation = results.input_correlation[places[0]][places[1]]
            both = _ordered(results, places)
            widths = [float(np.hypot(np.mean(entry.statistical), np.mean(entry.systematic))) for entry in both]
            centre = np.array([interval[1] for interval in intervals.values()])
            outline = centre + _stretched(_ellipse(np.zeros(2), widths, correlation), intervals)
        drawn.append(Drawn(name, intervals, outline))
    return drawn


def _ordered(results: AverageResults, places: Sequence[int]) -> list[AverageInputPart]:
    order = [ratio.name for ratio in results.ratios]
    return sorted((results.inputs[i] for i in places), key=lambda entry: order.index(entry.ratio))


def _intervals(ratios: Sequence[AveragedRatio]) -> dict[int, Interval]:
    return {k: (ratio.value - ratio.down, ratio.value, ratio.value + ratio.up) for k, ratio in enumerate(ratios)}


def _outline(ratios: Sequence[AveragedRatio], correlation: float | None) -> NDArray[np.float64] | None:
    """One standard deviation of both ratios, as for the measurements."""
    if len(ratios) != 2 or correlation is None:
        return None
    return _ellipse(np.array([ratio.value for ratio in ratios]), [ratio.error for ratio in ratios], correlation)


def _ellipse(centre: NDArray[np.float64], errors: Sequence[float], correlation: float) -> NDArray[np.float64]:
    covariance = np.outer(errors, errors) * (np.eye(2) + correlation * (1.0 - np.eye(2)))
    return ellipse(centre, covariance, 1.0)


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
    centre = np.array([entries[0].value, entries[1].value])
    errors = [entries[0].error, entries[1].error]
    return Drawn("prediction", intervals, _ellipse(centre, errors, results.prediction_correlation))
