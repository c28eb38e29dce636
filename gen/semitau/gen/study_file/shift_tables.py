"""[[quadratic.form_factors]]: form factors that templates are functions of."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from .rules import Count, Distinct, Identifier, Positive, Table, Text, broken


class FormFactorShifts(Table):
    """Coefficients that move the form factors of D or D*, for e, μ and τ and for B⁺ and B⁰ together.

    Without `parameters` they are the directions of the set's covariance that matter, as in a [[variation]] of kind
    form_factor_directions: NAME_1, NAME_2 ..., each with a unit Gaussian constraint. 1 is one standard deviation of the
    direction, or of the parameter. Amplitudes must be linear in them: so they are in all parameters of BGL and BCL.
    """

    name: Identifier = Field(description="of the coefficients: NAME_1, NAME_2 ... or NAME_PARAMETER")
    label: Text | None = Field(default=None, description="in pictures and tables; the name if left out")
    group: Text = Field(default="form factors", description="row of the budget")
    set: Literal["D", "Dst"] = Field(description="which entry of [form_factors]")
    parameters: Annotated[tuple[Text, ...], Field(min_length=1), Distinct] | None = Field(
        default=None,
        description="parameters of the set, e.g. a1; one that correlates with others of the set has no constraint",
    )
    order: Literal["variance", "effect"] = Field(default="effect", description="of directions, as in [[variation]]")
    keep: Annotated[Positive, Field(le=1)] = Field(default=0.99, description="share of the effect or variance to keep")
    at_most: Count | None = Field(default=None, description="keep no more directions than this")

    @model_validator(mode="after")
    def _one_way(self) -> FormFactorShifts:
        if self.parameters is not None and (both := self.model_fields_set & {"order", "keep", "at_most"}):
            raise broken("has parameters and directions", "one of them", got=", ".join(sorted(both)))
        return self
