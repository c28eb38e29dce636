"""What an average found: `average.json`, and a part of results.json. docs/average.md explains every field."""

from __future__ import annotations

import json
from typing import Literal

from pydantic import Field

from ..result_part import Part


class AveragedRatio(Part):
    """One averaged ratio."""

    name: str = Field(description="Identifier, e.g. R_D")
    label: str = Field(description="Label for people")
    value: float = Field(description="Averaged value")
    error: float = Field(description="Symmetric standard error, all sources")
    up: float = Field(description="Error upwards; the symmetric one in the linear form")
    down: float = Field(description="Error downwards, without a sign")
    statistical: float = Field(description="Part of the error from statistical errors")
    systematic: float = Field(description="Part of the error from systematic errors")


class TensionPart(Part):
    """Average against prediction."""

    each: dict[str, float] = Field(description="Ratio -> average minus prediction in standard deviations, it alone")
    chi2: float = Field(description="Chi-squared of all ratios together")
    degrees_of_freedom: int = Field(description="Ratios that are compared")
    p_value: float = Field(description="Chance of a larger chi-squared")
    sigmas: float = Field(description="Two-sided Gaussian deviation of the same p-value")


class AverageInputPart(Part):
    """One ratio of one measurement, and its part in the average."""

    measurement: str = Field(description="Name of the measurement")
    ratio: str = Field(description="Identifier of the ratio")
    value: float = Field(description="What was found")
    statistical: tuple[float, float] = Field(description="Statistical error: up, down")
    systematic: tuple[float, float] = Field(description="Systematic error: up, down")
    weights: dict[str, float] = Field(description="Averaged ratio -> weight in it; may be negative")
    pull: float | None = Field(description="Residual over its own error; null if it alone makes the average")


class SourcePart(Part):
    """A common source of systematic errors."""

    name: str = Field(description="Name")
    label: str = Field(description="Label for people")
    correlation: float = Field(description="Between different measurements")
    errors: dict[str, float] = Field(description="Averaged ratio -> part of its systematic error from the source")


class PredictedPart(Part):
    """One predicted ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    value: float = Field(description="Predicted value")
    error: float = Field(description="Its error")


class RegionPart(Part):
    """Where both averaged ratios lie with some probability."""

    probability: float = Field(description="Probability that the region holds the true ratios")
    outline: tuple[tuple[float, float], ...] = Field(description="Points around it, each in the order of `ratios`")


class WhatIf(Part):
    """The average with a planned measurement."""

    planned: str = Field(description="Name of the planned measurement")
    found_at: Literal["average", "prediction"] = Field(description="Where it is assumed to find its ratios")
    errors: dict[str, float] = Field(description="Ratio -> its total error")
    ratios: tuple[AveragedRatio, ...] = Field(description="The new average")
    correlation: float | None = Field(description="Correlation of the two averaged ratios; null if there is one")
    tension: TensionPart | None = Field(description="New tension; null without a prediction")


class AverageResults(Part):
    """An average of measurements; `average.json` holds the same."""

    format: Literal["semitau average"] = Field(default="semitau average", description="Always this text")
    version: Literal[1] = Field(default=1, description="Version of this layout")
    name: str = Field(description="Title")
    note: str = Field(description="Note of the file on its inputs")
    hash: str = Field(description="SHA-256 of the file's text")
    versions: dict[str, str] = Field(description="Program -> version")
    form: Literal["linear", "likelihood"] = Field(description="How the average was made")
    ratios: tuple[AveragedRatio, ...] = Field(description="The average")
    correlation: float | None = Field(description="Correlation of the two averaged ratios; null if there is one")
    chi2: float = Field(description="Chi-squared of the inputs with the average")
    degrees_of_freedom: int = Field(description="Inputs minus averaged ratios")
    p_value: float | None = Field(description="Chance of a larger chi-squared; null without freedom")
    inputs: tuple[AverageInputPart, ...] = Field(description="One entry a measured ratio")
    input_correlation: tuple[tuple[float, ...], ...] = Field(description="Of the total errors of the inputs, a matrix")
    sources: tuple[SourcePart, ...] = Field(description="Common sources")
    prediction: tuple[PredictedPart, ...] = Field(description="What the average is compared with; empty without one")
    prediction_correlation: float = Field(description="Of the errors of the prediction")
    tension: TensionPart | None = Field(description="Null without a prediction")
    regions: tuple[RegionPart, ...] = Field(
        default=(), description="Regions of the two averaged ratios, what the picture shows; empty if there is one"
    )
    planned: tuple[WhatIf, ...] = Field(description="One entry for each planned measurement and assumed outcome")

    def text(self) -> str:
        """The content of average.json."""
        return json.dumps(self.model_dump(mode="json"), indent=1, ensure_ascii=False) + "\n"
