"""Laws that a [[background]] draws an observable from, as they stand in the study file. Sampling is in shapes.py.

x is the observable in its unit. Every law is cut to `range` and normalised there.
"""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from .study_rules import Flag, Fraction, Increasing, NotNegative, Number, Table, Text, Value, rule

Range = Annotated[tuple[Value, Value], Increasing]
_NotZero = rule(lambda value: value != 0, "must not be zero")
_Some = rule(lambda values: any(values), "must not all be zero")


class Exponential(Table):
    """exp(−x/scale); a negative scale rises."""

    law: Literal["exponential"]
    scale: Annotated[Value, _NotZero]
    range: Range


class Gaussian(Table):
    """Gaussian of `mean` and `sigma`."""

    law: Literal["gaussian"]
    mean: Value
    sigma: Annotated[Value, Field(gt=0)]
    range: Range


class DoubleGaussian(Table):
    """(1 − wide_fraction) of a core Gaussian and wide_fraction of a wide one about the same or another mean.

    `wide_fraction` counts the Gaussians before they are cut to the range.
    """

    law: Literal["double_gaussian"]
    mean: Value
    sigma: Annotated[Value, Field(gt=0)]
    wide_sigma: Annotated[Value, Field(gt=0)]
    wide_fraction: Fraction
    wide_mean: Value | None = Field(default=None, description="mean of the wide Gaussian; that of the core if left out")
    range: Range


class Power(Table):
    """(x − origin)^exponent, truncated to a range right of the origin."""

    law: Literal["power"]
    exponent: Number
    origin: Value = 0.0
    range: Range


class Threshold(Table):
    """Rise from a threshold and exponential fall: (x − threshold)^power · exp(−(x − threshold)/scale)."""

    law: Literal["threshold"]
    threshold: Value
    power: NotNegative = 0.5
    scale: Annotated[Value, Field(gt=0)]
    range: Range


class EndPoint(Table):
    """Kinematic limit from below: x · (1 − x²/end²)^power · exp(−curvature · (1 − x²/end²)), 0 ≤ x ≤ end."""

    law: Literal["end_point"]
    end: Annotated[Value, Field(gt=0)]
    power: NotNegative = 0.5
    curvature: Number = 0.0
    range: Range


class PhaseSpace(Table):
    """Phase space between two kinematic limits: (x − low)^rise · (high − x)^fall over [low, high] = range."""

    law: Literal["phase_space"]
    rise: NotNegative = 0.5
    fall: NotNegative = 0.5
    range: Range


class Uniform(Table):
    """The same everywhere in the range."""

    law: Literal["uniform"]
    range: Range


class Polynomial(Table):
    """coefficients[0] + coefficients[1]·x + coefficients[2]·x² + ..., nowhere negative in the range."""

    law: Literal["polynomial"]
    coefficients: Annotated[tuple[Number, ...], Field(min_length=1, max_length=12), _Some]
    range: Range


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
    smooth: Flag = False
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
