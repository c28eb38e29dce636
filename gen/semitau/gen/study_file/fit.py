"""[fit] and [toys]: what is fitted, and how often."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import BeforeValidator, Field, model_validator

from .fit_parameters import Bounds, Constraint, Correlated
from .names import COEFFICIENTS, RatioName
from .rules import (
    Distinct,
    Flag,
    Identifier,
    Increasing,
    Number,
    Positive,
    Several,
    ShortTable,
    Table,
    Text,
    broken,
    suggestion,
)


class FitData(ShortTable):
    """What is fitted: "expected", "pseudo" (independent events), "import" ([import.data]), or { file = "data.root" }.

    The file holds histograms <category>/data with the axes of the study.
    """

    short_schema: ClassVar[dict[str, Any]] = {"enum": ["expected", "pseudo", "import"]}

    kind: Literal["expected", "pseudo", "import", "file"] = Field(default="file", description="rather written short")
    file: Text | None = Field(default=None, description="ROOT file, beside the study file unless absolute")

    @model_validator(mode="before")
    @classmethod
    def _from_word(cls, given: Any) -> Any:
        if isinstance(given, FitData | dict):
            return given
        if given in ("expected", "pseudo", "import"):
            return {"kind": given}
        near = suggestion(given, ("expected", "pseudo", "import"))
        raise broken("is no data", '"expected", "pseudo", "import" or { file = "data.root" }', near)

    @model_validator(mode="after")
    def _complete(self) -> FitData:
        if (self.kind == "file") != (self.file is not None):
            raise broken("is no data", '"expected", "pseudo", "import" or { file = "data.root" }')
        return self


class FitSection(Table):
    """What is fitted, and how."""

    ratios: Literal["isospin", "separate"] = Field(
        default="isospin", description='"separate": R_D and R_Dst for B⁺ and B⁰ on their own'
    )
    template_statistics: Flag = Field(default=True, description="finite template statistics in the likelihood")
    likelihood: Literal["light", "approximate", "exact"] = Field(
        default="light", description="its form for finite templates (docs/statistics.md)"
    )
    data: FitData = Field(default=FitData(kind="expected"), description="what is fitted")
    injected: dict[RatioName, Positive] = Field(
        default={}, description="ratios that templates are made with; those of the form factors if left out"
    )
    coefficients: Annotated[tuple[Identifier, ...], Distinct] = Field(
        default=(), description="of [quadratic], fitted; the others stay as the templates were made"
    )
    fixed: dict[Identifier, Number] = Field(default={}, description="parameters held, and at which value")
    functions: dict[Identifier, Text] = Field(
        default={}, description='parameters that follow others, e.g. R_Dst_B0 = "R_Dst_Bp" or yield_b = "1.1 * yield_a"'
    )
    constraints: dict[Identifier, Constraint] = Field(default={}, description="of single parameters")
    correlated: tuple[Correlated, ...] = Field(default=(), description="parameters measured together")
    bounds: dict[Identifier, Bounds] = Field(default={}, description="ranges that the fit keeps to")
    apart: Annotated[tuple[Identifier, ...], Distinct] = Field(
        default=(), description="variations whose shape and rate become two nuisances, NAME_shape and NAME_rate"
    )
    mirrored: dict[Identifier, Literal["plus", "minus"]] = Field(
        default={}, description="variations of which one side is kept and the other is its mirror image"
    )

    @property
    def couplings(self) -> tuple[str, ...]:
        """The fitted coefficients that ratios follow; others leave them free."""
        return tuple(name for name in self.coefficients if name in COEFFICIENTS)


class Linearity(ShortTable):
    """Toys at several injected ratios. In the file: a table, or false."""

    short_schema: ClassVar[dict[str, Any]] = {"const": False}

    factors: Annotated[tuple[Positive, ...], Field(min_length=2), Increasing] = Field(
        default=(0.8, 1.0, 1.2, 1.4), description="of all injected ratios at once"
    )
    number: Several = Field(default=500, description="toys at each")


class Toys(Table):
    """Pseudo-experiments that try the fit."""

    number: Several = Field(default=2000, description="toys at the injected ratios")
    linearity: Annotated[Linearity | None, BeforeValidator(lambda given: None if given is False else given)] = Field(
        default=Linearity(), description="false switches it off"
    )
