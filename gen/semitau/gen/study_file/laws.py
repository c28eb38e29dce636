"""Laws that a [[background]] draws an observable from, as they stand in the study file. Sampling is in shapes.py.

x is the observable in its unit. Every law is cut to `range` and normalised there.
"""

from __future__ import annotations

from typing import Annotated, Literal

import numpy as np
from pydantic import Field, model_validator

from .rules import Flag, Fraction, Increasing, NotNegative, Number, Table, Text, Value, broken, rule

Range = Annotated[tuple[Value, Value], Increasing]
_NotZero = rule(lambda value: value != 0, "must not be zero")
_Some = rule(lambda values: any(values), "must not all be zero")


_FAR = 30.0  # standard deviations; beyond it a Gaussian is zero for every purpose


def _near(mean: float, sigma: float, limits: tuple[float, float]) -> None:
    if mean + _FAR * sigma < limits[0] or mean - _FAR * sigma > limits[1]:
        got = f"mean {mean:g}, sigma {sigma:g}, range {list(limits)}"
        raise broken("misses its range", f"a range within {_FAR:g} sigma of the mean", got=got)


class Exponential(Table):
    """exp(−x/scale); a negative scale rises."""

    law: Literal["exponential"]
    scale: Annotated[Value, _NotZero] = Field(description="length over which it falls by e")
    range: Range = Field(description="limits within which it is drawn")


class Gaussian(Table):
    """Gaussian of `mean` and `sigma`."""

    law: Literal["gaussian"]
    mean: Value = Field(description="of the Gaussian, or of the core")
    sigma: Annotated[Value, Field(gt=0)] = Field(description="standard deviation before the cut to the range")
    range: Range = Field(description="limits within which it is drawn")

    @model_validator(mode="after")
    def _met(self) -> Gaussian:
        _near(self.mean, self.sigma, self.range)
        return self


class DoubleGaussian(Table):
    """(1 − wide_fraction) of a core Gaussian and wide_fraction of a wide one about the same or another mean.

    `wide_fraction` counts the Gaussians before they are cut to the range.
    """

    law: Literal["double_gaussian"]
    mean: Value = Field(description="of the Gaussian, or of the core")
    sigma: Annotated[Value, Field(gt=0)] = Field(description="standard deviation before the cut to the range")
    wide_sigma: Annotated[Value, Field(gt=0)] = Field(description="standard deviation of the wide Gaussian")
    wide_fraction: Fraction = Field(description="share of the wide Gaussian")
    wide_mean: Value | None = Field(default=None, description="mean of the wide Gaussian; that of the core if left out")
    range: Range = Field(description="limits within which it is drawn")

    @model_validator(mode="after")
    def _met(self) -> DoubleGaussian:
        _near(self.mean, self.sigma, self.range)
        _near(self.mean if self.wide_mean is None else self.wide_mean, self.wide_sigma, self.range)
        return self


class Power(Table):
    """(x − origin)^exponent, truncated to a range right of the origin."""

    law: Literal["power"]
    exponent: Number = Field(description="negative ones fall")
    origin: Value = Field(default=0.0, description="where the power is zero or infinite")
    range: Range = Field(description="limits within which it is drawn")

    @model_validator(mode="after")
    def _right_of_origin(self) -> Power:
        low = self.range[0]
        if low < self.origin:
            raise broken("must stay right of the origin", f"from {self.origin:g}", got=f"range from {low:g}")
        if low == self.origin and self.exponent < -0.99:
            wanted = "an exponent from -0.99, or a range that starts above the origin"
            raise broken("has all its area at the origin", wanted, got=f"{self.exponent:g}")
        return self


class Threshold(Table):
    """Rise from a threshold and exponential fall: (x − threshold)^power · exp(−(x − threshold)/scale)."""

    law: Literal["threshold"]
    threshold: Value = Field(description="nothing lies below")
    power: NotNegative = Field(default=0.5, description="of the rise")
    scale: Annotated[Value, Field(gt=0)] = Field(description="length over which it falls by e")
    range: Range = Field(description="limits within which it is drawn")

    @model_validator(mode="after")
    def _past_threshold(self) -> Threshold:
        if self.range[1] <= self.threshold:
            raise broken("ends below the threshold", f"a range beyond {self.threshold:g}", got=f"{self.range[1]:g}")
        return self


class EndPoint(Table):
    """Kinematic limit from below: x · (1 − x²/end²)^power · exp(−curvature · (1 − x²/end²)), 0 ≤ x ≤ end."""

    law: Literal["end_point"]
    end: Annotated[Value, Field(gt=0)] = Field(description="nothing lies above")
    power: NotNegative = Field(default=0.5, description="of the fall towards the end")
    curvature: Annotated[Number, Field(ge=-500, le=500)] = Field(default=0.0, description="of the exponential")
    range: Range = Field(description="limits within which it is drawn")

    @model_validator(mode="after")
    def _within_limit(self) -> EndPoint:
        if self.range[0] >= self.end or self.range[1] <= 0:
            raise broken("misses the law", f"a range that meets 0 to {self.end:g}", got=str(list(self.range)))
        return self


class PhaseSpace(Table):
    """Phase space between two kinematic limits: (x − low)^rise · (high − x)^fall over [low, high] = range."""

    law: Literal["phase_space"]
    rise: NotNegative = Field(default=0.5, description="power at the lower limit")
    fall: NotNegative = Field(default=0.5, description="power at the upper limit")
    range: Range = Field(description="limits within which it is drawn")


class Uniform(Table):
    """The same everywhere in the range."""

    law: Literal["uniform"]
    range: Range = Field(description="limits within which it is drawn")


def _lowest(coefficients: tuple[float, ...], limits: tuple[float, float]) -> tuple[float, float]:
    """Place and value of the polynomial's minimum; values within rounding of zero count as zero."""
    falling = np.array(coefficients[::-1])
    turns = [float(root.real) for root in np.roots(np.polyder(falling)) if abs(root.imag) < 1e-9 * (1 + abs(root))]
    places = np.array([*limits, *(turn for turn in turns if limits[0] < turn < limits[1])])
    values = np.polyval(falling, places)
    rounding = 1e-12 * np.max(np.polyval(np.abs(falling), np.abs(places)))
    lowest = int(np.argmin(values))
    return float(places[lowest]), float(values[lowest]) if values[lowest] < -rounding else 0.0


class Polynomial(Table):
    """coefficients[0] + coefficients[1]·x + coefficients[2]·x² + ..., nowhere negative in the range."""

    law: Literal["polynomial"]
    coefficients: Annotated[tuple[Number, ...], Field(min_length=1, max_length=12), _Some] = Field(
        description="of the powers of x in the observable's unit, from the constant on"
    )
    range: Range = Field(description="limits within which it is drawn")

    @model_validator(mode="after")
    def _positive(self) -> Polynomial:
        x, low = _lowest(self.coefficients, self.range)
        if low < 0:
            raise broken("is negative within its range", "no negative value", got=f"{low:g} at {x:g}")
        return self


class Histogram(Table):
    """A one-dimensional histogram of a ROOT file, even within each bin; under- and overflow are left out."""

    law: Literal["histogram"]
    file: Text = Field(description="ROOT file, beside the study file unless absolute")
    name: Text = Field(description="path of the histogram within the file")
    range: Range | None = Field(default=None, description="all bins if left out")


class Column(Table):
    """A column of a tree in a ROOT file: entries are drawn at random, with replacement.

    Observables of one background that take columns of the same tree get them from the same entry, so that they keep
    their correlation. With `smooth` a column by itself is drawn between its sorted values instead of at them.
    """

    law: Literal["column"]
    file: Text = Field(description="ROOT file, beside the study file unless absolute")
    tree: Text = Field(description="TTree or RNTuple within the file")
    branch: Text = Field(description="a column of numbers, one an entry")
    smooth: Flag = Field(default=False, description="draw between the values instead of at them")
    range: Range | None = Field(default=None, description="entries outside are left out; all are taken if left out")


Law = Annotated[
    Exponential
    | Gaussian
    | DoubleGaussian
    | Power
    | Threshold
    | EndPoint
    | PhaseSpace
    | Uniform
    | Polynomial
    | Histogram
    | Column,
    Field(discriminator="law"),
]

FormulaLaw = Exponential | Gaussian | DoubleGaussian | Power | Threshold | EndPoint | PhaseSpace | Uniform | Polynomial
