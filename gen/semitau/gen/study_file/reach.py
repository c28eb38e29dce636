"""[reach]: which amounts of data are looked at, and what the ratios are compared with."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator

from .rules import Identifier, Increasing, NotNegative, Number, Positive, ShortTable, Table, broken


class ComparedValue(ShortTable):
    """What a ratio is compared with: a number, or { value = ..., error = ... }."""

    short_schema: ClassVar[dict[str, Any]] = {"type": "number"}

    value: Number = Field(description="the value, e.g. that of the Standard Model")
    error: NotNegative = Field(default=0.0, description="its error")

    @model_validator(mode="before")
    @classmethod
    def _from_number(cls, given: Any) -> Any:
        if isinstance(given, ComparedValue | dict):
            return given
        if isinstance(given, bool | str) or not isinstance(given, int | float):
            raise broken("is nothing to compare with", "a number or { value = ..., error = ... }")
        return {"value": given}


class ReachSection(Table):
    """Expected errors, and the significance of a deviation, against the amount of data; from expected sets alone.

    Names are those of ratios that are fitted: R_D, R_Dst, or with `ratios = "separate"` R_D_Bp and so on.
    """

    factors: Annotated[tuple[Positive, ...], Field(min_length=2), Increasing] = Field(
        default=(0.1, 0.2, 0.5, 1.0, 2.0, 5.0, 10.0, 20.0, 50.0, 100.0), description="multiples of the study's data"
    )
    true: dict[Identifier, Positive] = Field(default={}, description="true ratios; those of the templates if left out")
    against: dict[Identifier, ComparedValue] = Field(
        default={}, description="what ratios are compared with; no significance without it"
    )
    generated: Literal["fixed", "grows"] = Field(
        default="fixed", description="generated events stay as many as they are, or grow with the data"
    )
    pairs: Positive | None = Field(
        default=None, description="B B̄ pairs of the study's data, for the axis; [experiment] b_pairs if left out"
    )
    luminosity: Positive | None = Field(
        default=None, description="integrated luminosity of the study's data in fb⁻¹, for the axis instead of pairs"
    )

    @model_validator(mode="after")
    def _one_axis(self) -> ReachSection:
        if self.pairs is not None and self.luminosity is not None:
            raise broken("has two axes", "either pairs or luminosity", "Leave one of them out.", got="")
        return self
