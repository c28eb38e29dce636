"""The tables of a file for `semitau average`."""

from __future__ import annotations

from dataclasses import replace
from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator
from semitau.fit.averages.measurements import Measured, Measurement
from semitau.gen.study_file.average import Shifts
from semitau.gen.study_file.rules import NotNegative, Number, ShortTable, Table, Text, broken

RATIOS = {"R_D": "R(D)", "R_Dst": "R(D*)"}
"""Ratios that can be averaged, and their labels."""

Correlation = Annotated[Number, Field(ge=-1, le=1)]


class AverageSection(Table):
    """[average]"""

    name: Text = Field(description="title of tables and picture")
    output: Text = Field(description="folder for results and picture, from where the command runs")
    form: Literal["linear", "likelihood"] = Field(
        default="linear", description="linear: best linear unbiased estimate; likelihood: with asymmetric errors"
    )
    note: str = Field(default="", strict=True, description="stands under the title, e.g. where the inputs come from")


class Size(ShortTable):
    """One standard deviation: a positive number, or { up = ..., down = ... }, both positive."""

    short_schema: ClassVar[dict[str, Any]] = {"type": "number", "minimum": 0}

    up: NotNegative = Field(description="upwards")
    down: NotNegative = Field(description="downwards, without a sign")

    @model_validator(mode="before")
    @classmethod
    def _from_number(cls, given: Any) -> Any:
        if isinstance(given, bool | str) or not isinstance(given, int | float | dict | Size):
            raise broken("must be a number or a table", "a positive number, or { up = ..., down = ... }")
        if isinstance(given, int | float):
            if not 0.0 <= given < float("inf"):
                raise broken("must be a standard deviation", "a positive number", "Errors carry no sign.")
            return {"up": float(given), "down": float(given)}
        return given

    @property
    def sides(self) -> tuple[float, float]:
        """Upwards, downwards."""
        return self.up, self.down


NONE = Size(up=0.0, down=0.0)


class PlannedRatio(Table):
    """The errors that one ratio will have."""

    statistical: Size = Field(default=NONE, description="statistical error")
    systematic: Size = Field(default=NONE, description="systematic error, common sources included")


class MeasuredRatio(PlannedRatio):
    """One ratio of a measurement."""

    value: Number = Field(description="what was found")


class _Joint(Table):
    """What measured and planned results share."""

    name: Text = Field(description="name in tables and picture")
    statistical_correlation: Correlation = Field(default=0.0, description="of the statistical errors of R_D and R_Dst")
    systematic_correlation: Correlation = Field(
        default=0.0, description="of their systematic errors, common sources included"
    )
    sources: dict[Text, Shifts] = Field(
        default={}, description="common source -> shifts at one standard deviation, parts of the systematic errors"
    )

    def _shifts(self, ratios: list[str]) -> dict[str, dict[str, float]]:
        moves = {source: shifts.model_dump() for source, shifts in self.sources.items()}
        # a shift of 0 of a ratio that is not measured need not be complained of
        return {s: {r: x for r, x in move.items() if x != 0.0 or r in ratios} for s, move in moves.items()}


class MeasurementTable(_Joint):
    """[[measurement]]: one published result."""

    R_D: MeasuredRatio | None = Field(default=None, description="R(D)")
    R_Dst: MeasuredRatio | None = Field(default=None, description="R(D*)")

    def measurement(self) -> Measurement:
        """The same for the fit package."""
        tables = {ratio: table for ratio in RATIOS if (table := getattr(self, ratio)) is not None}
        return Measurement(
            self.name,
            {r: Measured(t.value, t.statistical.sides, t.systematic.sides) for r, t in tables.items()},
            self.statistical_correlation,
            self.systematic_correlation,
            self._shifts(list(tables)),
        )


class PlannedTable(_Joint):
    """[[planned]]: a measurement that does not exist yet; its values are assumed, its errors are given here or come
    from a study."""

    results: Text | None = Field(
        default=None, description="results.json of a study, whose expected errors and correlation are taken"
    )
    R_D: PlannedRatio | None = Field(default=None, description="errors of R(D), without `results`")
    R_Dst: PlannedRatio | None = Field(default=None, description="errors of R(D*), without `results`")

    @model_validator(mode="after")
    def _one_way(self) -> PlannedTable:
        by_hand = self.R_D is not None or self.R_Dst is not None
        if by_hand == (self.results is not None):
            what = "has errors from a study and its own" if by_hand else "has no errors"
            raise broken(what, "either results, or R_D and R_Dst", got="")
        if self.results is not None and (self.statistical_correlation or self.systematic_correlation):
            raise broken("has correlations beside those of the study", remedy="Take them away.", got="")
        return self

    def measurement(self, study: Measurement | None) -> Measurement:
        """The same for the fit package, with values of 0. study : what the named study expects."""
        if study is not None:
            return replace(study, name=self.name, sources=self._shifts(list(study.ratios)))
        tables = {ratio: table for ratio in RATIOS if (table := getattr(self, ratio)) is not None}
        return Measurement(
            self.name,
            {r: Measured(0.0, t.statistical.sides, t.systematic.sides) for r, t in tables.items()},
            self.statistical_correlation,
            self.systematic_correlation,
            self._shifts(list(tables)),
        )


class SourceTable(Table):
    """[[source]]: a source of systematic errors that measurements have in common."""

    name: Text = Field(description="name in the `sources` of measurements")
    label: str = Field(default="", strict=True, description="label for people")
    correlation: Correlation = Field(default=1.0, description="between different measurements")


class PredictedRatio(Table):
    """One predicted ratio."""

    value: Number = Field(description="predicted value")
    error: NotNegative = Field(default=0.0, description="its error")


class PredictionTable(Table):
    """[prediction]: what the average is compared with."""

    R_D: PredictedRatio | None = Field(default=None, description="R(D)")
    R_Dst: PredictedRatio | None = Field(default=None, description="R(D*)")
    correlation: Correlation = Field(default=0.0, description="of the two errors")


class AverageTables(Table):
    """The whole file."""

    average: AverageSection
    sources: tuple[SourceTable, ...] = Field(default=(), alias="source")
    measurements: tuple[MeasurementTable, ...] = Field(alias="measurement", min_length=1)
    prediction: PredictionTable | None = None
    planned: tuple[PlannedTable, ...] = ()
