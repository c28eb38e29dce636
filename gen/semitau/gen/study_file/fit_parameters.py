"""[fit.constraints], [fit.bounds], [[fit.correlated]]: what is known of the fit's parameters."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import Field, model_validator

from .rules import Distinct, Identifier, Number, Positive, ShortTable, Table, broken, suggestion

_WORDS = '"free", { gaussian = 0.1 }, { log_normal = 0.1 } or { uniform = [0.5, 1.5] }'


class Constraint(ShortTable):
    """What is known of one parameter before the fit: "free", or one law.

    Yields are relative to the expectation, ratios are themselves, nuisances are in standard deviations. It replaces the
    constraint that the parameter has by itself.
    """

    short_schema: ClassVar[dict[str, Any]] = {"enum": ["free"]}

    kind: Literal["free", "law"] = Field(default="law", description="rather written short")
    gaussian: Positive | None = Field(default=None, description="standard deviation")
    log_normal: Positive | None = Field(
        default=None, description="standard deviation of the logarithm; the parameter stays positive"
    )
    uniform: tuple[Number, Number] | None = Field(default=None, description="lower and upper end")

    @model_validator(mode="before")
    @classmethod
    def _from_word(cls, given: Any) -> Any:
        if isinstance(given, Constraint | dict):
            return given
        if given == "free":
            return {"kind": "free"}
        raise broken("is no constraint", _WORDS, suggestion(given, ("free",)))

    @model_validator(mode="after")
    def _one_law(self) -> Constraint:
        laws = [law for law in (self.gaussian, self.log_normal, self.uniform) if law is not None]
        if len(laws) != (self.kind == "law"):
            raise broken("is no constraint", _WORDS)
        if self.uniform is not None and not self.uniform[0] < self.uniform[1]:
            raise broken("must increase", "lower end before the upper one")
        return self


class Bounds(Table):
    """The fit keeps a parameter inside."""

    min: Number | None = Field(default=None, description="lower end")
    max: Number | None = Field(default=None, description="upper end")

    @model_validator(mode="after")
    def _in_order(self) -> Bounds:
        if self.min is None and self.max is None:
            raise broken("bounds nothing", "min, max or both")
        if self.min is not None and self.max is not None and not self.min < self.max:
            raise broken("has its ends in the wrong order", "min below max")
        return self


class Correlated(Table):
    """Parameters that were measured together; it replaces their own constraints."""

    parameters: Annotated[tuple[Identifier, ...], Field(min_length=2), Distinct] = Field(description="their names")
    errors: tuple[Positive, ...] = Field(description="standard deviation of each")
    correlations: tuple[tuple[Number, ...], ...] = Field(description="matrix, 1 on its diagonal")

    @model_validator(mode="after")
    def _square(self) -> Correlated:
        size = len(self.parameters)
        if len(self.errors) != size:
            raise broken("needs as many errors as parameters", f"{size} numbers", got=str(len(self.errors)))
        if len(self.correlations) != size or any(len(row) != size for row in self.correlations):
            raise broken("needs a square matrix of correlations", f"{size} rows of {size} numbers")
        for i in range(size):
            for j in range(size):
                wrong = self.correlations[i][j] != (1.0 if i == j else self.correlations[j][i])
                if wrong or abs(self.correlations[i][j]) > 1.0:
                    raise broken("is no matrix of correlations", "symmetric, 1 on the diagonal, within -1 and 1")
        return self
