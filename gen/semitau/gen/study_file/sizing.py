"""[sizing]: what templates may cost, how that is tried, and how time is shared out."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from .rules import Count, Flag, Identifier, Increasing, Positive, Table, broken

_NotNegativeCount = Annotated[int, Field(strict=True, ge=0)]


class SizingSection(Table):
    """How many events to generate, and of what.

    The cost of a component is the growth of the error of a ratio over that with exact templates of this component, in
    quadrature: a share of 0.1 is an error larger by 0.5%. Names are those of [[mode]], [[double_charm]] and
    [[background]].
    """

    share: Annotated[Positive, Field(le=1)] = Field(default=0.1, description="cost that each component may have")
    shares: dict[Identifier, Annotated[Positive, Field(le=1)]] = Field(
        default={}, description="costs of single components"
    )
    together: Annotated[Positive, Field(le=1)] | None = Field(
        default=None,
        description="cost of all components at once that the cheapest allocation reaches; `share` if left out",
    )
    target: Identifier = Field(
        default="all",
        description='ratio whose error the allocation serves, e.g. R_D, or "all" for the sum of relative variances',
    )
    seconds: Positive | None = Field(
        default=None, description="processor time to be shared out, s; what the events take now if left out"
    )
    least: Count = Field(default=10_000, description="events of each component that no allocation goes below")
    toys: _NotNegativeCount = Field(
        default=300, description="with templates drawn anew, for each factor and multiple; 0 for none"
    )
    factors: Annotated[tuple[Positive, ...], Field(min_length=1), Increasing] = Field(
        default=(0.03, 0.1, 0.3, 1.0, 3.0), description="multiples of all events that toys are drawn at"
    )
    multiples: Annotated[tuple[Positive, ...], Field(min_length=1), Increasing] = Field(
        default=(1.0, 1.2), description="true ratios of the toys over those of the templates"
    )
    alone: Flag = Field(
        default=True, description="toys, too, with the lowest factor on one component alone, at the highest multiple"
    )
    sets: _NotNegativeCount = Field(
        default=12, description="of templates generated anew, to verify the prediction; 0 for none"
    )
    fraction: Annotated[Positive, Field(le=1)] = Field(
        default=0.125, description="of the events, in each of these sets"
    )
    events_at_most: Count = Field(
        default=100_000_000, description="generated to verify; with more, sets become fewer and the needed events less"
    )

    @model_validator(mode="after")
    def _scatter(self) -> SizingSection:
        if 0 < self.sets < 4:
            raise broken("sets are too few to scatter", "4 or more, or 0 for none", got=str(self.sets))
        return self
