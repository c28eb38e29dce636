"""From the measurements of a file to everything that is said of their average."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

import numpy as np
from semitau.core.code_digest import versions
from semitau.fit.averages.combination import Average, average
from semitau.fit.averages.compatibility import Prediction, contour, tension
from semitau.fit.averages.measurements import sides

from .measurement_file import AverageInput
from .part import (
    AveragedRatio,
    AverageInputPart,
    AverageResults,
    PredictedPart,
    RegionPart,
    SourcePart,
    TensionPart,
    WhatIf,
)
from .tables import RATIOS

REGIONS = (0.6826895, 0.9544997, 0.9973002)
"""Probabilities of the regions that are told."""


@dataclass(frozen=True)
class Averaged:
    """The average itself, for pictures, and all that is told of it."""

    average: Average
    results: AverageResults


def averaged(given: AverageInput) -> Averaged:
    """The average of the measurements, its tension with the prediction, and what planned measurements would change.

    Raises
    ------
    RunError : a likelihood with asymmetric errors has no minimum or does not rise by one.
    """
    found = average(given.measurements, given.common, given.section.form)
    predicted = {} if given.prediction is None else given.prediction.ratios
    results = AverageResults(
        name=given.section.name,
        note=given.section.note,
        hash=given.digest,
        versions=versions(),
        form=found.form,
        ratios=_ratios(found),
        correlation=_correlation(found),
        chi2=found.chi2,
        degrees_of_freedom=found.degrees_of_freedom,
        p_value=found.p_value,
        inputs=tuple(_inputs(found)),
        input_correlation=_input_correlation(found),
        sources=tuple(
            SourcePart(
                name=name,
                label=given.source_labels[name],
                correlation=correlation,
                errors=_by_ratio(found, found.source_errors(name)),
            )
            for name, correlation in given.common.items()
        ),
        prediction=tuple(PredictedPart(ratio=r, value=value, error=error) for r, (value, error) in predicted.items()),
        prediction_correlation=0.0 if given.prediction is None else given.prediction.correlation,
        tension=_tension(found, given.prediction),
        regions=tuple(_regions(found)),
        planned=tuple(_what_ifs(found, given)),
    )
    return Averaged(found, results)


def _regions(found: Average) -> Iterator[RegionPart]:
    if len(found.ratios) != 2:
        return
    columns = [found.ratios.index(name) for name in sorted(found.ratios, key=list(RATIOS).index)]
    for probability in REGIONS:
        outline = contour(found, probability)[:, columns]
        yield RegionPart(probability=probability, outline=tuple((float(x), float(y)) for x, y in outline))


def _ratios(found: Average) -> tuple[AveragedRatio, ...]:
    return tuple(
        AveragedRatio(
            name=name,
            label=RATIOS.get(name, name),
            value=float(found.values[k]),
            error=float(found.errors[k]),
            up=float(found.up[k]),
            down=float(found.down[k]),
            statistical=float(np.sqrt(found.statistical[k, k])),
            systematic=float(np.sqrt(found.systematic[k, k])),
        )
        for k, name in sorted(enumerate(found.ratios), key=lambda item: list(RATIOS).index(item[1]))
    )


def _correlation(found: Average) -> float | None:
    return float(found.correlation[0, 1]) if len(found.ratios) == 2 else None


def _by_ratio(found: Average, values: np.ndarray) -> dict[str, float]:
    return {ratio: float(value) for ratio, value in zip(found.ratios, values, strict=True)}


def _inputs(found: Average) -> Iterator[AverageInputPart]:
    entries = [measured for owner in found.inputs.measurements for measured in owner.ratios.values()]
    for i, (name, ratio) in enumerate(found.inputs.names):
        yield AverageInputPart(
            measurement=name,
            ratio=ratio,
            value=entries[i].value,
            statistical=sides(entries[i].statistical),
            systematic=sides(entries[i].systematic),
            weights=_by_ratio(found, found.weights[:, i]),
            pull=float(found.pulls[i]) if np.isfinite(found.pulls[i]) else None,
        )


def _input_correlation(found: Average) -> tuple[tuple[float, ...], ...]:
    total = found.inputs.covariances().sum(axis=0)
    width = np.sqrt(np.diag(total))
    return tuple(map(tuple, (total / np.outer(width, width)).tolist()))


def _tension(found: Average, prediction: Prediction | None) -> TensionPart | None:
    result = None if prediction is None else tension(found, prediction)
    if result is None:
        return None
    return TensionPart(
        each=dict(result.each),
        chi2=result.chi2,
        degrees_of_freedom=result.degrees_of_freedom,
        p_value=result.p_value,
        sigmas=result.sigmas,
    )


def _what_ifs(found: Average, given: AverageInput) -> Iterator[WhatIf]:
    """Each planned measurement at the average and, if there is one, at the prediction; no fluctuation is added."""
    at_average = _by_ratio(found, found.values)
    at_prediction = {} if given.prediction is None else {r: v for r, (v, _) in given.prediction.ratios.items()}
    for planned in given.planned:
        # a ratio that one of them lacks is taken from the other
        outcomes: dict[Literal["average", "prediction"], Mapping[str, float]] = {"average": at_prediction | at_average}
        if at_prediction:
            outcomes["prediction"] = at_average | at_prediction
        for found_at, values in outcomes.items():
            joined = found.joined_by(planned, values)
            yield WhatIf(
                planned=planned.name,
                found_at=found_at,
                errors={
                    ratio: float(np.hypot(np.mean(sides(m.statistical)), np.mean(sides(m.systematic))))
                    for ratio, m in planned.ratios.items()
                },
                ratios=_ratios(joined),
                correlation=_correlation(joined),
                tension=_tension(joined, given.prediction),
            )
