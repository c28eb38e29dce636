"""[[alternative]] and [bias]: worlds that are not quite the study's, to see what its fit makes of them."""

from __future__ import annotations

from typing import Annotated, Any

from pydantic import Field, WithJsonSchema, model_validator

from .rules import Count, Distinct, Identifier, NotNegative, Positive, Table, Text, broken

NOMINAL = "nominal"
"""Name of the study itself among its alternatives."""

_Changes = Annotated[
    dict[str, Any],
    Field(min_length=1),
    WithJsonSchema({"type": "object", "minProperties": 1, "additionalProperties": True}),
]


class Alternative(Table):
    """The study with other values of some of its keys. Everything else stays, random numbers included.

    `change` holds the keys as the study file has them: `[alternative.change.detector.tag] momentum_resolution = "26
    MeV"`. Elements of [[mode]], [[double_charm]], [[background]], [[variation]] and [[import.component]] are addressed
    by their component or name: `[alternative.change.mode.D_tau] events = 1e6`. A table changes only the keys that it
    has, unless it has another `law` or `kind`: then it takes the place of the old one, as a list does.

    All fits need the same bins, components and parameters: categories and names do not change, nor do [study],
    [quadratic] and [toys].
    """

    name: Identifier = Field(description="of the alternative")
    label: Text | None = Field(default=None, description="in pictures and tables; the name if left out")
    change: _Changes = Field(description="keys of the study file with other values")
    covered_by: Annotated[tuple[Text, ...], Field(min_length=1), Distinct] | None = Field(
        default=None,
        description="variations, groups of them, or constrained yields that are meant to cover it; the whole "
        "systematic error if left out",
    )

    @model_validator(mode="after")
    def _not_the_study(self) -> Alternative:
        if self.name == NOMINAL:
            raise broken("is the name of the study itself", remedy="Rename the alternative.", got=self.name)
        return self


class BiasSection(Table):
    """The bias matrix: the study and its alternatives, each made with each and fitted with each."""

    toys: Annotated[int, Field(strict=True, ge=0)] = Field(
        default=300, description="for each pair; 0 for none, then without pull widths and coverages"
    )
    negligible: NotNegative = Field(
        default=0.1, description="share of the whole error below which a shift does not matter"
    )
    replicas: Annotated[Count, Field(ge=4), WithJsonSchema({"type": "integer", "minimum": 4})] = Field(
        default=10, description="independent sets of events that tell the error of the shifts from finite templates"
    )
    replica_events: Annotated[Positive, Field(le=1)] = Field(
        default=0.25, description="events of all replicas together, relative to those of the templates"
    )
