"""Sizing in results.json: what finite templates cost, how many events are needed, and how to share out the time."""

from __future__ import annotations

from typing import Literal

from pydantic import Field

from ..result_part import Part


class SizingRatio(Part):
    """Expected error of one ratio, from expected information: no fit of data is in it."""

    ratio: str = Field(description="Identifier of the ratio")
    label: str = Field(description="Label for people")
    injected: float = Field(description="Value that the templates were made with")
    exact: float = Field(gt=0, description="Expected error with exact templates")
    now: float = Field(gt=0, description="Expected error with the events as they are")
    templates: float = Field(ge=0, description="Part of the error now, by quadrature, that is template statistics")
    templates_error: float = Field(ge=0, description="Its error from the finite numbers that it is known from")
    with_needed: float = Field(gt=0, description="Expected error with the needed events of every sample")
    bias_now: float | None = Field(
        default=None, description="Pull of the noise of all samples together now, to first order; null if not known"
    )
    bias_needed: float | None = Field(default=None, description="The same with the needed events of every sample")


class SizingSample(Part):
    """What one number of events in the study file generates."""

    sample: str = Field(description="Component of the [[mode]], [[double_charm]] or [[background]]")
    label: str = Field(description="Label for people")
    components: tuple[str, ...] = Field(description="Components of the templates that are made of it")
    generated: int | None = Field(description="Events that were generated; null if that is not known")
    effective: float = Field(ge=0, description="Effective events in the templates: squared sum over sum of squares")
    share: float = Field(gt=0, description="Chosen cost: growth of the error over exact templates, in quadrature")
    needed: float = Field(ge=0, description="Events that do for every ratio, over those now: see SizingCost")
    needed_error: float = Field(ge=0, description="Error of `needed` from the finite events that it is known from")
    needed_events: int | None = Field(description="The same as a number of events; null if `generated` is")
    decisive: str = Field(description="Ratio that asks for the most")
    because: Literal["precision", "bias", "reported error"] = Field(description="Why it does")


class SizingCost(Part):
    """What one sample does to one ratio."""

    sample: str = Field(description="Sample")
    ratio: str = Field(description="Identifier of the ratio")
    part: float = Field(ge=0, description="Part of the error now, by quadrature")
    part_error: float = Field(ge=0, description="Its error from the finite numbers that it is known from")
    cost: float = Field(ge=0, description="Growth of the error with all other samples exact, in quadrature, over it")
    bias: float | None = Field(
        description="Pull of its noise on the fitted ratio now, the largest of all true ratios tried; null if not known"
    )
    bias_error: float | None = Field(description="Its error from the finite numbers that it is known from")
    understated: float | None = Field(
        description="Part by which its noise makes the reported variance too small; null if not known"
    )
    understated_error: float | None = Field(description="Its error from the finite numbers that it is known from")
    needed: float = Field(ge=0, description="Multiple of the events that does for precision, bias and reported error")
    needed_error: float = Field(ge=0, description="Its error from the finite numbers that it is known from")
    decisive: Literal["precision", "bias", "reported error"] = Field(description="Which of the three asks for the most")
    needed_precision: float = Field(ge=0, description="Multiple of the events at which `cost` is the chosen share")
    needed_formula: float = Field(ge=0, description="The same to first order, by the formula: never less")
    needed_bias: float | None = Field(description="Multiple at which the bias is the chosen share of the exact error")
    needed_reported: float | None = Field(description="Multiple at which `understated` is the square of the share")


class SizingCurve(Part):
    """Expected error of one ratio against the events."""

    ratio: str = Field(description="Identifier of the ratio")
    sample: str = Field(description='Sample whose events change, all others exact; "" for all samples at once')
    factors: tuple[float, ...] = Field(description="Multiples of the events")
    errors: tuple[float, ...] = Field(description="Expected error at each")


class SizingToyRatio(Part):
    """Toys in which templates and data are drawn anew: one ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    true: float = Field(description="Value that the data were drawn with")
    expected: float = Field(gt=0, description="Expected error with that many events, at the injected ratios")
    mean_error: float = Field(ge=0, description="Mean error that the fits report")
    spread: float = Field(ge=0, description="Standard deviation of the fitted values: the error that is true")
    spread_error: float = Field(ge=0, description="Its standard error")
    bias: float = Field(description="Mean fitted minus true value")
    bias_error: float = Field(ge=0, description="Its standard error")
    pull_width: float = Field(ge=0, description="Standard deviation of the pulls")
    pull_width_error: float = Field(ge=0, description="Its standard error")
    coverage: float = Field(description="Share of intervals of one error that hold the true value")
    coverage_low: float = Field(description="Lower end of its 68.3 % binomial interval")
    coverage_high: float = Field(description="Upper end")


class SizingToys(Part):
    """Toys in which templates and data are drawn anew, at one number of events and one set of true ratios."""

    what: Literal["all", "needed", "alone"] = Field(
        description="all: the events of all samples times `factor`; needed: the needed events of each; alone: those of "
        "`sample` times `factor`, the others as they are"
    )
    sample: str = Field(description='Sample of "alone", else ""')
    factor: float | None = Field(description='Multiple of the events; null for "needed"')
    multiple: float = Field(gt=0, description="True ratios over those that the templates were made with")
    number: int = Field(description="Toys drawn")
    failures: int = Field(description="Toys whose fit failed; they are left out of everything else")
    ratios: tuple[SizingToyRatio, ...] = Field(description="One entry a ratio")


class SizingCheck(Part):
    """Predicted and generated template error of one sample and one ratio."""

    sample: str = Field(description='Sample that is generated anew; "" for all at once')
    ratio: str = Field(description="Identifier of the ratio")
    predicted: float = Field(ge=0, description="Part of the error, from the templates of the study and the formula")
    predicted_error: float = Field(ge=0, description="Its error from the finite numbers that it is known from")
    measured: float = Field(ge=0, description="The same part as the new templates show it themselves, mean of the sets")
    measured_error: float = Field(ge=0, description="Standard error of that mean")
    scatter: float | None = Field(
        description="Standard deviation of the ratio fitted with each set's templates of the sample to the expected "
        "set of the study: the template error as it is; null with one set"
    )
    scatter_error: float | None = Field(description="Its standard error")
    p_value: float | None = Field(description="Two-sided, of the scatter if the prediction holds, from the χ² law")


class SizingVerification(Part):
    """Templates generated anew with other numbers of events, independent of those of the study."""

    what: Literal["fewer", "needed"] = Field(
        description="fewer: a fraction of the events of all samples; needed: the needed events of each"
    )
    sets: int = Field(description="Independent sets of templates")
    fraction: float = Field(gt=0, description="Events over those of the study, or over the needed ones")
    events: int = Field(description="Generated for all sets together")
    checks: tuple[SizingCheck, ...] = Field(description="Every sample and all together, for each ratio")


class SizingShareOfTime(Part):
    """Events of one sample in the best allocation."""

    sample: str = Field(description="Sample")
    nanoseconds: float = Field(gt=0, description="Processor time of one event, measured")
    nanoseconds_error: float | None = Field(
        description="Standard error, from the scatter between generated sets; null from one"
    )
    now: int = Field(description="Events as they are")
    best: int = Field(description="Events that make template statistics smallest in the time")
    cheapest: int = Field(description="Events that reach `aim` in the least time")


class SizingGain(Part):
    """What the best allocation does for one ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    templates_now: float = Field(ge=0, description="Template statistics with the events as they are, by quadrature")
    templates_best: float = Field(ge=0, description="The same with the best allocation")
    error_now: float = Field(gt=0, description="Expected error with the events as they are")
    error_best: float = Field(gt=0, description="The same with the best allocation")
    error_cheapest: float = Field(gt=0, description="The same with the cheapest allocation that reaches `aim`")


class SizingAllocation(Part):
    """Events of each sample for a given processor time. It rests on measured times, which differ from run to run."""

    target: str = Field(description='Ratio whose error it serves; "all" for the sum of relative variances')
    seconds: float = Field(gt=0, description="Processor time to be shared out")
    seconds_now: float = Field(gt=0, description="Processor time that the events take as they are")
    aim: float = Field(gt=0, description="Cost of all samples together that the cheapest allocation reaches")
    seconds_aim: float = Field(gt=0, description="Least processor time that reaches it")
    seconds_aim_as_now: float = Field(gt=0, description="Time that reaches it with the events shared out as they are")
    samples: tuple[SizingShareOfTime, ...] = Field(description="One entry a sample")
    gains: tuple[SizingGain, ...] = Field(description="One entry a ratio")
    snippet: str = Field(description="Lines for the study file that make the best allocation")


class Sizing(Part):
    """What finite templates cost, how many events are needed, and how to share out the time."""

    ratios: tuple[SizingRatio, ...] = Field(description="One entry a ratio")
    samples: tuple[SizingSample, ...] = Field(description="In the order of the study file")
    costs: tuple[SizingCost, ...] = Field(description="Every sample for each ratio")
    curves: tuple[SizingCurve, ...] = Field(description="All samples at once, then each by itself, for each ratio")
    toys: tuple[SizingToys, ...] = Field(description="Precision and coverage against the events; empty without toys")
    verifications: tuple[SizingVerification, ...] = Field(description="Empty if nothing was generated for it")
    allocation: SizingAllocation | None = Field(description="Null where the times are not known")
    snippet: str = Field(description='Lines for the study file that generate the needed events; "" if not known')
    sentences: tuple[str, ...] = Field(description="What was found, in words")
