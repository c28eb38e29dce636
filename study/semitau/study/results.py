"""`results.json`: what a study found, checked when it is made and again when it is read.

docs/results.md explains every field; `semitau schema --results` writes the same as a JSON schema.
"""

from __future__ import annotations

import json
from pathlib import Path
from typing import Literal

from pydantic import Field, ValidationError
from semitau.core.errors import InputError, Problem

from .averages.part import AverageResults
from .bias.part import Bias
from .design.part import Design
from .inputs.part import Inputs
from .reach.part import Reach
from .result_part import Part as Part
from .sizing.part import Sizing

FORMAT = "semitau results"
VERSION = 1
STATEMENT = "Pseudo-data of an invented detector. Nothing here is a measurement."
UNITS = {
    "momentum, energy": "GeV",
    "mm2, q2": "GeV²",
    "angle": "rad",
    "time": "s",
    "memory": "MB",
    "counts": "events of the study",
    "yields": "relative to the expectation",
    "nuisances": "standard deviations of their constraint",
}


class StudyIdentity(Part):
    """Which study this is, and what its stored parts must agree with."""

    name: str = Field(description="Name of the study")
    seed: int = Field(description="Seed of every random number")
    hash: str = Field(description="SHA-256 of the study file's text")
    key: str = Field(description="SHA-256 of study text, seed, versions and the files that the study names")
    text: str = Field(description="The study file itself")


class DataSource(Part):
    """What was fitted."""

    kind: Literal["expected", "pseudo", "file"] = Field(
        description="Expected events, pseudo-data from independent events, or a ROOT file"
    )
    description: str = Field(description="The same in words, with the file if there is one")
    events: float = Field(description="Events in all categories")


class RatioResult(Part):
    """One fitted ratio, or coefficient of the templates, beside the value that went in."""

    name: str = Field(description="Identifier, e.g. R_D")
    label: str = Field(description="Label for people")
    injected: float = Field(description="Value that the templates or pseudo-data were made with")
    value: float = Field(description="Fitted value; hidden if there is `blinding`")
    error: float = Field(description="Symmetric standard error, all sources")
    pull: float | None = Field(description="(value - injected) / error; null while the ratio is hidden")
    statistical: float | None = Field(description="Error from the finite data, free yields included")
    template_statistics: float | None = Field(description="Error from the finite generated events")
    systematic: float | None = Field(description="Error from all nuisances and constrained yields")


class Parameter(Part):
    """One parameter of the fit."""

    name: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    kind: str = Field(description="ratio, yield, coefficient or nuisance")
    injected: float = Field(description="Value that the model was made with")
    constraint: float | None = Field(description="Standard deviation of its auxiliary measurement; null if free")
    value: float = Field(description="Fitted value")
    error: float = Field(description="Symmetric standard error")


class Goodness(Part):
    """Goodness of fit by the Baker–Cousins likelihood ratio."""

    statistic: float = Field(description="Twice the log likelihood ratio to the saturated model")
    degrees_of_freedom: int = Field(description="Bins minus free parameters")
    p_value: float | None = Field(description="Chance of a worse fit, from the χ² distribution; null without freedom")
    toy_p_value: float | None = Field(description="Share of toys with a worse fit; holds for bins with few events, too")


class Fit(Part):
    """The fit to the data."""

    valid: bool = Field(description="Whether the minimum was found and its covariance is positive definite")
    reasons: tuple[str, ...] = Field(description="Why not, if not")
    minus_log_likelihood: float = Field(description="At the minimum, without constant terms")
    goodness: Goodness | None = Field(description="Null if it could not be computed")
    parameters: tuple[Parameter, ...] = Field(description="In the order of the correlation matrix")
    correlation: tuple[tuple[float, ...], ...] = Field(description="Matrix, one row a parameter")


class BudgetRow(Part):
    """One source of uncertainty."""

    source: str = Field(description="statistical, template_statistics, or a group of nuisances")
    label: str = Field(description="Label for people")
    error: float = Field(
        ge=0, description="Its part of the error; the squares of all parts add up to that of the total"
    )
    held: float | None = Field(
        default=None,
        ge=0,
        description="Fall of the error, in quadrature, with the source held; statistical: error with all others held",
    )


class Budget(Part):
    """The uncertainty of one ratio by source."""

    ratio: str = Field(description="Identifier of the ratio")
    rows: tuple[BudgetRow, ...] = Field(description="Sources")
    total: float = Field(ge=0, description="The whole error")


class RatioShift(Part):
    """What one constrained parameter does to one ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    down: float | None = Field(description="Change of the ratio with the parameter held one fitted error lower")
    up: float | None = Field(description="The same one fitted error higher; null if that fit failed")


class NuisanceResult(Part):
    """One constrained parameter: what the fit learned of it, and what it does to the ratios."""

    name: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    group: str = Field(description="Row of the budget")
    pull: float = Field(description="Fitted value minus auxiliary measurement, over that measurement's error")
    constraint: float = Field(ge=0, description="Fitted error over that of the auxiliary measurement")
    shifts: tuple[RatioShift, ...] = Field(description="One entry a ratio")


class CategoryQuality(Part):
    """Goodness of fit of one category."""

    category: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    statistic: float = Field(description="Sum of the contributions of its bins")
    bins: int = Field(description="Bins that expect something")
    p_value: float = Field(description="Share of toys with a larger statistic")


class ProjectionQuality(Part):
    """Shape of one projection (Kolmogorov)."""

    category: str = Field(description="Identifier of the category")
    label: str = Field(description="Label of the category")
    observable: str = Field(description="Label of the observable")
    distance: float = Field(description="Largest difference of the cumulated shares of data and fit")
    p_value: float = Field(description="Share of toys with a larger distance")


class BinQuality(Part):
    """One bin."""

    category: str = Field(description="Label of the category")
    where: str = Field(description="Its ranges in words")
    observed: float = Field(description="Counts")
    expected: float = Field(description="Counts of the fit")
    significance: float = Field(description="Root of its contribution; positive for an excess")


class Quality(Part):
    """Goodness of fit in parts, each judged by the toys."""

    bins: float = Field(description="Part of the statistic from the bins")
    constraints: float = Field(description="Part of the statistic from the constraints")
    categories: tuple[CategoryQuality, ...] = Field(description="One entry a category")
    projections: tuple[ProjectionQuality, ...] = Field(description="One entry an observable of each category")
    worst: tuple[BinQuality, ...] = Field(description="Bins with the largest contributions; none rich in hidden signal")
    worst_p_value: float = Field(description="Share of toys whose worst bin is worse")


class Blinding(Part):
    """How the ratios are hidden."""

    kind: str = Field(description="offset or factor")
    width: float = Field(description="As in the study file")
    fingerprint: str = Field(description="Tells whether a passphrase is the same one; says nothing of the offsets")


class Coverage(Part):
    """How often the interval held the injected value."""

    level: float = Field(description="Nominal probability")
    fraction: float = Field(description="Fraction of valid toys whose interval holds the injected value")
    low: float = Field(description="Lower end of the 68.3 % binomial interval of the fraction")
    high: float = Field(description="Upper end")


class PullHistogram(Part):
    """Pulls of the toys, binned."""

    edges: tuple[float, ...] = Field(description="Bin edges, in standard deviations")
    counts: tuple[int, ...] = Field(description="Toys per bin")
    outside: int = Field(description="Valid toys outside the edges")


class ToyRatio(Part):
    """What the toys say about one ratio."""

    ratio: str = Field(description="Identifier of the ratio")
    label: str = Field(description="Label for people")
    injected: float = Field(description="Value that the toys were made with")
    mean: float = Field(description="Mean fitted value")
    bias: float = Field(description="Mean minus injected")
    bias_error: float = Field(description="Standard error of the bias")
    mean_error: float = Field(description="Mean error that the fits report")
    pull_mean: float = Field(description="Mean of (value - injected) / error")
    pull_mean_error: float = Field(description="Its standard error")
    pull_width: float = Field(description="Standard deviation of the pulls")
    pull_width_error: float = Field(description="Its standard error")
    coverage: tuple[Coverage, ...] = Field(description="At 68.3 % and 95.4 %")
    pulls: PullHistogram = Field(description="Histogram of the pulls")
    judgement: str = Field(description="unbiased, biased or undecided: what the toys say of the mean")
    significance: float | None = Field(description="Bias in standard deviations of its own error; null if undefined")
    excluded: float | None = Field(description="A bias beyond this share of the fit's error is excluded at 95 %")
    toys_needed: int = Field(description="Toys that would exclude a bias above a tenth of the error")
    covers: bool = Field(description="Whether pull width and coverage agree with their nominal values within 3 σ")
    verdict: str = Field(description="The judgement in words")


class Toys(Part):
    """Toys at one set of injected ratios."""

    number: int = Field(description="Toys drawn")
    failures: int = Field(description="Toys whose fit failed; they are left out of everything else")
    failure_reasons: dict[str, int] = Field(description="Reason -> toys")
    ratios: tuple[ToyRatio, ...] = Field(description="One entry a ratio")


class LinearityPoint(Part):
    """Toys at one injected value of a ratio."""

    injected: float = Field(description="Injected value")
    mean: float = Field(description="Mean fitted value")
    mean_error: float = Field(description="Standard error of the mean")
    spread: float = Field(description="Mean error that the fits report")
    toys: int = Field(description="Valid toys")
    failures: int = Field(description="Failed toys")


class Linearity(Part):
    """Fitted against injected value of one ratio, with a straight line through the points."""

    ratio: str = Field(description="Identifier of the ratio")
    label: str = Field(description="Label for people")
    points: tuple[LinearityPoint, ...] = Field(description="In the order of the injected values")
    slope: float = Field(description="Slope of the line; 1 is ideal")
    slope_error: float = Field(description="Its standard error")
    intercept: float = Field(description="Where the line meets an injected value of 0; 0 is ideal")
    intercept_error: float = Field(description="Its standard error")
    p_value: float | None = Field(description="Chance of points further from the line; null for two points")
    verdict: str = Field(description="The judgement in words")


class Verdict(Part):
    """The judgement on the fit."""

    status: Literal["sound", "doubtful", "unsound", "undecided"] = Field(
        description="sound: errors cover and a bias above a tenth of the error is excluded; doubtful: a departure of "
        "three standard deviations that is small, or not in the mean; unsound: biased; undecided: too few toys"
    )
    sentences: tuple[str, ...] = Field(description="What was found, with its statistical significance")


class CutFlowStep(Part):
    """One step of the selection for one component."""

    name: str = Field(description="Step, in the order of application")
    events: float = Field(ge=0, description="Expected events of the study after it")
    efficiency: float = Field(description="Events after over events before the step")


class CutFlowComponent(Part):
    """The selection of one component."""

    component: str = Field(description="Identifier")
    label: str = Field(description="Label for people")
    steps: tuple[CutFlowStep, ...] = Field(description="Steps")
    purity: float = Field(description="Share of the component among all selected events")


class StackedComponent(Part):
    """One component of a projection."""

    component: str = Field(description="Identifier")
    counts: tuple[float, ...] = Field(description="Fitted events per bin")


class Projection(Part):
    """One observable of one category after the fit, summed over the others."""

    category: str = Field(description="Identifier of the category")
    observable: str = Field(description="Identifier of the observable")
    label: str = Field(description="Label of the observable")
    unit: str = Field(description='Unit, "" if none')
    region: str = Field(description='Cut on another observable in words; "" for the whole category')
    edges: tuple[float, ...] = Field(description="Bin edges")
    data: tuple[float, ...] = Field(description="Fitted data")
    components: tuple[StackedComponent, ...] = Field(description="In stacking order, from below")
    uncertainty: tuple[float, ...] = Field(description="Standard error of the fitted sum per bin")


class Named(Part):
    """Identifier and label of a category or component."""

    name: str = Field(description="Identifier")
    label: str = Field(description="Label for people")


class ComponentInfo(Named):
    """A component and what scales it."""

    role: str = Field(description="signal, normalisation, feed-down or background")
    scales_with: tuple[str, ...] = Field(description="Ratios and yields that multiply it")


class StageTime(Part):
    """Time of one stage."""

    stage: str = Field(description="Stage")
    seconds: float = Field(ge=0, description="Wall-clock time")
    reused: bool = Field(description="Whether stored output of an earlier run was taken")


class Timing(Part):
    """What the run cost. With `sizing.allocation`, which rests on times, all that two runs of a study differ in."""

    started: str = Field(description="Date and time, UTC, ISO 8601")
    stages: tuple[StageTime, ...] = Field(description="In order")
    total: float = Field(ge=0, description="Seconds of wall-clock time until results.json is written")
    workers: int = Field(description="Worker threads")
    peak_memory: float = Field(description="Largest resident memory, MB")


class Reweighting(Part):
    """How many events are behind what weights make of a component."""

    component: str = Field(description="Identifier of the component")
    label: str = Field(description="Label for people")
    source: str = Field(description="Variation, or coefficient")
    where: str = Field(description="Its worse side; of a coefficient at half its limit")
    events: float = Field(description="Effective events without it")
    effective: float = Field(description="Square of the sum of weights over the sum of their squares")
    share: float = Field(description="The one over the other, at most 1; a warning tells of shares below 0.1")


class Results(Part):
    """Everything that a study found."""

    format: Literal["semitau results"] = Field(default="semitau results", description="Always this text")
    version: Literal[1] = Field(default=1, description="Version of this layout")
    statement: str = Field(default=STATEMENT, description="What these numbers are not")
    study: StudyIdentity = Field(description="Which study this is")
    versions: dict[str, str] = Field(description="Program -> version")
    units: dict[str, str] = Field(default=UNITS, description="Quantity -> unit")
    data: DataSource = Field(description="What was fitted")
    ratios: tuple[RatioResult, ...] = Field(description="The answer")
    verdict: Verdict = Field(description="The judgement on the fit")
    fit: Fit = Field(description="The fit to the data")
    budget: tuple[Budget, ...] = Field(description="Uncertainty by source, one entry a ratio")
    nuisances: tuple[NuisanceResult, ...] = Field(default=(), description="Constrained parameters, the strongest first")
    quality: Quality | None = Field(default=None, description="Goodness of fit in parts; null without toys or data")
    blinding: Blinding | None = Field(default=None, description="How the ratios are hidden; null if they are not")
    toys: Toys | None = Field(description="Toys at the injected ratios; null if none were asked for")
    linearity: tuple[Linearity, ...] = Field(description="One entry a ratio; empty if not asked for")
    categories: tuple[Named, ...] = Field(description="Categories of the fit")
    components: tuple[ComponentInfo, ...] = Field(description="Components in stacking order, from below")
    projections: tuple[Projection, ...] = Field(description="What the pictures show")
    cut_flow: tuple[CutFlowComponent, ...] = Field(description="Selection per component")
    reweightings: tuple[Reweighting, ...] = Field(
        default=(), description="Effective events of what is made by weights, one entry a component and source"
    )
    bias: Bias | None = Field(
        default=None, description="What alternatives do to the ratios; null without [[alternative]]"
    )
    design: Design | None = Field(default=None, description="The best selection and binning; null without [design]")
    sizing: Sizing | None = Field(default=None, description="How many events are needed; null without [sizing]")
    reach: Reach | None = Field(default=None, description="What more data would bring; null if not asked for")
    average: AverageResults | None = Field(
        default=None, description="Average with other measurements, and what this study would change; null if not asked"
    )
    inputs: Inputs | None = Field(default=None, description="What went in; null in results of before it was kept")
    warnings: tuple[str, ...] = Field(description="What should be looked at")
    timing: Timing = Field(description="What the run cost")

    def text(self) -> str:
        """The content of results.json."""
        return json.dumps(self.model_dump(mode="json"), indent=1, ensure_ascii=False) + "\n"


def read_results(path: Path | str) -> Results:
    """Read results.json.

    Raises
    ------
    InputError : there is no such file, it is not JSON, of another version, or not of this layout.
    """
    remedy = "Run `semitau study` again to make it."
    try:
        content = Path(path).read_bytes()
    except FileNotFoundError:
        raise InputError(Problem("there is no such file", where=str(path), remedy=remedy)) from None
    except IsADirectoryError:
        raise InputError(Problem("this is a folder, not a file", where=str(path), remedy=remedy)) from None
    try:
        document = json.loads(content)
    except ValueError as error:
        raise InputError(Problem(f"not a whole JSON file: {error}", where=str(path), remedy=remedy)) from None
    if not isinstance(document, dict) or document.get("format") != FORMAT:
        raise InputError(Problem(f'not results of a study: "format" is not "{FORMAT}"', where=str(path), remedy=remedy))
    if document.get("version") != VERSION:
        raise InputError(
            Problem(
                "results of another version",
                where=str(path),
                got=repr(document.get("version")),
                wanted=str(VERSION),
                remedy=remedy,
            )
        )
    try:
        return Results.model_validate_json(content)
    except ValidationError as error:
        raise InputError(
            *(
                Problem(
                    item["msg"],
                    where=f"{path}: {'.'.join(map(str, item['loc']))}",
                    got=repr(item["input"])[:60],
                    remedy=remedy,
                )
                for item in error.errors()[:5]
            )
        ) from None
