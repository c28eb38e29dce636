"""Reach in results.json: expected errors and significance against the amount of data."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from ..result_part import Part


class ReachError(Part):
    """Expected error of one ratio at one amount of data."""

    ratio: str = Field(description="Identifier of the ratio")
    total: float = Field(ge=0, description="Expected standard error, all sources")
    statistical: float = Field(ge=0, description="Part from the finite data")
    template_statistics: float = Field(ge=0, description="Part from the finite generated events")
    systematic: float = Field(ge=0, description="Part from all nuisances and constrained yields")
    sources: dict[str, float] = Field(description="Row of the budget -> its part; squares add up to the total squared")


class ReachDeviation(Part):
    """A true value that differs from what it is compared with, at one amount of data."""

    name: str = Field(description='Identifier of the ratio, or "together" for all that are compared')
    growth: float = Field(ge=0, description="Expected growth of -2 ln L with the ratios where they are compared")
    degrees_of_freedom: int = Field(description="Ratios that are compared")
    sigmas: float = Field(ge=0, description="Two-sided Gaussian deviation of the same p-value, the median expected one")
    evidence: float = Field(ge=0, le=1, description="Probability to see at least 3 standard deviations")
    discovery: float = Field(ge=0, le=1, description="Probability to see at least 5 standard deviations")


class ReachAmount(Part):
    """What one amount of data brings."""

    factor: float = Field(gt=0, description="Multiple of the study's data")
    amount: float = Field(gt=0, description="The same in `unit`")
    errors: tuple[ReachError, ...] = Field(description="One entry a ratio")
    deviations: tuple[ReachDeviation, ...] = Field(description="One entry a comparison; empty without one")


class ReachWall(Part):
    """From where on more data alone do not help one ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    label: str = Field(description="Label for people")
    factor: float | None = Field(
        description="Multiple of the data where all else weighs as much as the finite data; null outside of the range"
    )
    source: str = Field(description="Largest other source there, or at the largest amount")
    sentence: str = Field(description="The same in words")


class ReachCompared(Part):
    """A ratio, its true value, and what it is compared with."""

    ratio: str = Field(description="Identifier of the ratio")
    label: str = Field(description="Label for people")
    true: float = Field(description="Assumed true value")
    value: float | None = Field(description="What it is compared with; null if it is not")
    error: float | None = Field(description="Error of that; null if it is not compared")


class ReachNeeded(Part):
    """How many data a deviation needs to be seen."""

    name: str = Field(description='Identifier of the ratio, or "together" for all that are compared')
    label: str = Field(description="Label for people")
    evidence: float | None = Field(
        description="Multiple of the data for which 3 standard deviations are expected; null outside of the range"
    )
    discovery: float | None = Field(description="The same for 5 standard deviations")
    sentence: str = Field(description="The same in words")


class Reach(Part):
    """Expected errors and significance against the amount of data, from expected sets: medians, no fluctuations."""

    unit: str = Field(description='Unit of `amount`: "B pairs", "fb⁻¹", or "times the data"')
    generated: Literal["fixed", "grows"] = Field(
        description="Whether generated events stay as many as they are, or grow with the data"
    )
    ratios: tuple[ReachCompared, ...] = Field(description="One entry a fitted ratio")
    amounts: tuple[ReachAmount, ...] = Field(description="In increasing order")
    walls: tuple[ReachWall, ...] = Field(description="One entry a ratio")
    needed: tuple[ReachNeeded, ...] = Field(description="One entry a comparison; empty without one")
