"""[average]: which measurements this study would join."""

from __future__ import annotations

from pydantic import Field

from .rules import Number, Table, Text


class Shifts(Table):
    """What one standard deviation of a common source does to each ratio, with its sign."""

    R_D: Number = Field(default=0.0, description="shift of R(D)")
    R_Dst: Number = Field(default=0.0, description="shift of R(D*)")


class AverageStudySection(Table):
    """The average of other measurements, and what this study would do to it with the error that it expects.

    The errors and their correlation are those of the fit to the expected set; no fitted value is looked at.
    """

    file: Text = Field(
        description="measurements, sources and prediction as for `semitau average` (docs/average.md), beside the study "
        "file unless absolute; its [average] output is not used"
    )
    name: Text | None = Field(
        default=None, description="of this study in tables and picture; that of [study] if left out"
    )
    sources: dict[Text, Shifts] = Field(
        default={},
        description="common source of the file -> shifts at one standard deviation, parts of the systematic errors",
    )
