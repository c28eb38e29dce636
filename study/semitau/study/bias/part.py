"""Bias matrix in results.json: every alternative of a study fitted with every other."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from ..result_part import Part

BiasStatus = Literal["covered", "not covered", "negligible", "undecided"]


class BiasChange(Part):
    """One changed key of an alternative."""

    key: str = Field(description="Key of the study file, e.g. detector.tag.momentum_resolution")
    before: str = Field(description='Its value in the study, as the file writes it; "" if the file has none')
    after: str = Field(description="Its value in the alternative")


class BiasStudy(Part):
    """What pseudo-data are made with, or fitted with: the study itself, or one of its alternatives."""

    name: str = Field(description='Identifier; "nominal" for the study itself')
    label: str = Field(description="Label for people")
    changes: tuple[BiasChange, ...] = Field(description="Keys of the study file that differ; none for the study itself")
    covered_by: tuple[str, ...] = Field(
        description="Variations or groups meant to cover it; empty for the whole systematic error"
    )


class BiasCoverage(Part):
    """How often the interval of the wrong model held the true ratio."""

    level: float = Field(description="Nominal probability")
    expected: float = Field(description="What it would be for a Gaussian with this shift and pull width 1")
    fraction: float = Field(description="Fraction of valid toys whose interval holds the true ratio")
    low: float = Field(description="Lower end of the 68.3 % binomial interval of the fraction")
    high: float = Field(description="Upper end")


class BiasRatio(Part):
    """One ratio of one pair of studies."""

    ratio: str = Field(description="Identifier of the ratio")
    label: str = Field(description="Label for people")
    true: float = Field(description="Value that the expected set and the toys were made with")
    shift: float = Field(description="Fitted minus true ratio, from the expected set: no fluctuations of the data")
    shift_error: float = Field(ge=0, description="Its error from the finite numbers of generated events of both sides")
    error: float = Field(gt=0, description="Whole error of the fit to the expected set")
    significance: float = Field(description="Shift in units of the whole error")
    covering: float = Field(ge=0, description="Part of the assigned error that is meant to cover the shift")
    covered_by: tuple[str, ...] = Field(
        description="Rows of the budget and variations in `covering`; empty for the whole systematic error"
    )
    status: BiasStatus = Field(
        description="negligible: below the chosen share of the whole error; covered: within the covering error; not "
        "covered: beyond it; undecided: the error of the shift leaves two of these open"
    )
    pull_mean: float | None = Field(description="Mean of (fitted - true) / error of the toys; null without toys")
    pull_mean_error: float | None = Field(description="Its standard error")
    pull_width: float | None = Field(description="Standard deviation of the pulls")
    pull_width_error: float | None = Field(description="Its standard error")
    coverage: tuple[BiasCoverage, ...] = Field(description="At 68.3 % and 95.4 %; empty without toys")


class BiasGoodness(Part):
    """How well the wrong model describes the data that it is fitted to."""

    deviance: float = Field(
        ge=0, description="Twice the log likelihood ratio to the saturated model, of the fit to the expected set"
    )
    degrees_of_freedom: int = Field(description="Bins minus free parameters")
    p_value: float | None = Field(
        description="p-value of a typical (median) data set, noncentral against central χ²; one half for the right "
        "model; null without freedom"
    )
    toy_p_value: float | None = Field(
        description="Share of toys of the right model with a larger statistic than the median one of this pair; null "
        "without toys"
    )


class BiasPair(Part):
    """Expected set and toys made with one study and fitted with the model of another."""

    made_with: str = Field(description="Study that the expected set and the toys are drawn from")
    fitted_with: str = Field(description="Study whose templates and nuisances are fitted")
    valid: bool = Field(description="Whether the fit to the expected set converged; `ratios` is empty otherwise")
    reason: str = Field(description='Why not, if not; "" otherwise')
    outside: float = Field(
        ge=0, description="Expected events in bins where the fitted study expects none: left out of the fit"
    )
    toys: int = Field(ge=0, description="Toys drawn")
    failures: int = Field(ge=0, description="Toys whose fit failed; they are left out of everything else")
    goodness: BiasGoodness | None = Field(description="Null if the fit did not converge")
    ratios: tuple[BiasRatio, ...] = Field(description="One entry a ratio")


class Bias(Part):
    """Bias matrix: the study and its alternatives, each made with each and fitted with each."""

    studies: tuple[BiasStudy, ...] = Field(description="The study itself, then its alternatives")
    negligible: float = Field(description="Share of the whole error below which a shift does not matter")
    not_covered: tuple[str, ...] = Field(
        description="What no systematic covers, in words: first what the study's own fit gets wrong; the worst first"
    )
    sentences: tuple[str, ...] = Field(description="Everything else that is worth saying, in words")
    pairs: tuple[BiasPair, ...] = Field(description="Row by row: all that are made with the first study, and so on")
