"""[design]: which cuts and binnings are tried for the smallest expected error."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field, model_validator

from .categories import Axis
from .rules import ByObservable, Count, Flag, Fraction, ObservableKey, Positive, Several, Table, Value, broken

Goal = Literal["mean", "area", "R_D", "R_Dst"]
Range = tuple[Value, Value]


class ScannedCut(Table):
    """Ranges over which a cut of the selection is tried. The cut itself must lie in its range.

    A cut on an observable that is an axis as well moves the end of the axis with it.
    """

    min: Range | None = Field(default=None, description="lowest and highest value of the lower limit")
    max: Range | None = Field(default=None, description="lowest and highest value of the upper limit")
    steps: Annotated[Several, Field(le=100)] = Field(
        default=8, description="values of each range; that of the study is added"
    )
    by_category: Flag = Field(default=False, description="a value of its own for each [[category]] table")

    @model_validator(mode="after")
    def _open(self) -> ScannedCut:
        if self.min is None and self.max is None:
            raise broken("scans nothing", "a range for min, max or both", got="")
        for name, ends in (("min", self.min), ("max", self.max)):
            if ends is not None and ends[0] >= ends[1]:
                raise broken(f"{name} is no range", "lowest before highest", got=f"{ends[0]:g} to {ends[1]:g}")
        if self.min is not None and self.max is not None and self.min[1] >= self.max[0]:
            got = f"min up to {self.min[1]:g}, max from {self.max[0]:g} on"
            raise broken("could remove everything", "all of min below all of max", got=got)
        return self


class DesignSection(Table):
    """The search for the selection and binning with the smallest total expected error.

    Cuts go over their ranges; edges of axes are taken away from the finest ones as long as the error allows; other axes
    are tried. Without [design], `semitau design` changes the binning alone.
    """

    minimise: Goal = Field(
        default="mean",
        description="mean of the relative errors of all ratios; area of their joint region; or the error of one ratio",
    )
    cuts: Annotated[dict[ObservableKey, ScannedCut], ByObservable] = Field(
        default={}, description="by observable; delta_m cannot be scanned, because it decides what is a D*"
    )
    axes: Annotated[dict[ObservableKey, Axis], ByObservable] = Field(
        default={}, description="finest edges to try, besides those of the study; without, its bins are halved"
    )
    binning: Flag = Field(default=True, description="whether binnings may change")
    most_axes: Annotated[Count, Field(le=3)] = Field(default=3, description="of a category")
    least: Positive = Field(default=5.0, description="expected events that a bin should hold")
    poor: Fraction = Field(
        default=0.05, description="share of the events of a [[category]] table that may lie in bins with less"
    )
    loss: Fraction = Field(default=0.002, description="relative rise of the error that fewer bins may cost")
    flat: Positive = Field(default=0.01, description="relative rise of the error up to which a cut counts as flat")
    events: Count | None = Field(
        default=None, description="most decays to generate of each component; those of the study if left out"
    )
    points: Count = Field(default=5000, description="most selections to look at")
    memory: Annotated[Count, Field(ge=16)] = Field(
        default=512, description="MB for the sums of candidates, of the search and again of the confirmation"
    )
