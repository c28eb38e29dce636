"""Components of a study: [[mode]] (made by the decay generator) and [[background]] (made from shapes)."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

import numpy as np
from numpy.typing import NDArray
from pydantic import Field, model_validator

from .laws import Law
from .names import CharmFamily, Lepton, Parent, RatioName, TauDecay
from .rules import (
    ByObservable,
    Count,
    Distinct,
    Flag,
    Identifier,
    NotNegative,
    Number,
    ObservableKey,
    Positive,
    ShortTable,
    Table,
    Text,
    broken,
    suggestion,
)


class Yield(ShortTable):
    """How far the fit may move a component's yield from the expectation.

    In the file: "free", "fixed", or { uncertainty = 0.3 }, the relative standard deviation of a Gaussian constraint.
    """

    short_schema: ClassVar[dict[str, Any]] = {"enum": ["free", "fixed"]}

    kind: Literal["free", "fixed", "gaussian"] = Field(default="gaussian", description="rather written short")
    uncertainty: Positive | None = Field(default=None, description="relative, one standard deviation")

    @model_validator(mode="before")
    @classmethod
    def _from_word(cls, given: Any) -> Any:
        if isinstance(given, Yield | dict):
            return given
        if given in ("free", "fixed"):
            return {"kind": given}
        raise broken("is no yield", '"free", "fixed" or { uncertainty = 0.3 }', suggestion(given, ("free", "fixed")))

    @model_validator(mode="after")
    def _complete(self) -> Yield:
        if (self.kind == "gaussian") != (self.uncertainty is not None):
            raise broken("is no yield", '"free", "fixed" or { uncertainty = 0.3 }')
        return self


class Mode(Table):
    """A component made by the decay generator.

    `tau_to` says which decays of a tau are followed. With a hadronic one among them, the pions fill the categories
    that have pions, and through the misidentification tables those of leptons; a π⁰ leaves residual energy.

    `charm` names hadrons without their charge; charges follow from the parents, charge conjugates are implied.
    `events` generated decays are shared between all decay chains of the mode by their expected rate.

    A mode with `scales_with` is a numerator: its yield is the ratio times the yield of the mode that it `follows`,
    which is found by itself if it is the one mode with the same charm and leptons e and mu. A mode that `follows`
    another without a ratio scales with the other's yield besides its own.
    """

    component: Identifier = Field(description="name of its templates")
    label: Text | None = Field(default=None, description="in pictures and tables; the component's name if left out")
    parents: Annotated[tuple[Parent, ...], Field(min_length=1), Distinct] = Field(
        default=("B+", "B0"), description="decaying mesons"
    )
    charm: Annotated[tuple[CharmFamily, ...], Field(min_length=1), Distinct] = Field(
        description="charm hadrons of the B decay"
    )
    leptons: Annotated[tuple[Lepton, ...], Field(min_length=1), Distinct] = Field(description="of the B decay")
    tau_to: Annotated[tuple[TauDecay, ...], Field(min_length=1), Distinct] = Field(
        default=("e", "mu"), description="decays of the tau: rho is ππ⁰, a1 three tracks, a1_1prong ππ⁰π⁰"
    )
    scales_with: RatioName | None = Field(default=None, description="the ratio that the fit measures with this mode")
    follows: Identifier | None = Field(default=None, description="component whose yield this one scales with")
    yield_: Yield | None = Field(
        default=None, alias="yield", description='"free" for a mode without ratio, none for one with a ratio'
    )
    events: Count = Field(description="generated decays")

    @model_validator(mode="after")
    def _consistent(self) -> Mode:
        if self.scales_with and self.yield_:
            raise broken(
                "has both scales_with and yield",
                remedy="Remove yield: the ratio sets it.",
                got="",
            )
        if self.scales_with and self.leptons != ("tau",):
            raise broken(
                f"scales with {self.scales_with} but its leptons are not tau alone",
                'leptons = ["tau"]',
                got=str(list(self.leptons)),
            )
        if "tau" not in self.leptons and self.tau_to != ("e", "mu"):
            raise broken("has tau_to but no tau", remedy="Remove tau_to.", got=str(list(self.tau_to)))
        return self

    @property
    def name(self) -> str:
        """The component's name."""
        return self.component

    @property
    def yield_constraint(self) -> Yield:
        """Free unless the file says otherwise; fixed (it is the ratio that moves) for a mode with a ratio."""
        return self.yield_ or Yield(kind="fixed" if self.scales_with else "free")

    @property
    def role(self) -> str:
        """As in core.templates.Component: "signal", "normalisation" or "feed-down"."""
        if self.scales_with:
            return "signal"
        if set(self.charm) <= {"D", "D*"} and "tau" not in self.leptons:
            return "normalisation"
        return "feed-down"


Shape = Annotated[dict[ObservableKey, Law], ByObservable]


class Background(Table):
    """A component made from shapes: each observable drawn from its own law, the same in every category of `expected`.

    `shape_in` replaces laws in a category ("Dstp_mu"), or in all categories of a charm hadron ("D*+"); a category goes
    before a hadron. `expected` counts events before [selection] within the ranges of the laws; a cut acts on a
    background only if the background draws the cut's observable.

    `correlation` is the correlation of a Gaussian copula, written `el.mm2 = 0.3`; it needs one pair once.

    A background with `misidentified` stands for hadrons taken for leptons: it must draw p_lepton, the momentum of the
    hadrons before identification, which is multiplied by the detector's misidentification table and normalised again.
    """

    component: Identifier = Field(description="name of its templates")
    label: Text | None = Field(default=None, description="in pictures and tables; the component's name if left out")
    events: Count = Field(description="drawn events, shared evenly between its categories")
    yield_: Yield = Field(default=Yield(kind="free"), alias="yield", description="all categories move together")
    misidentified: Flag = Field(default=False, description="stands for hadrons taken for leptons")
    expected: Annotated[dict[str, NotNegative], Field(min_length=1)] = Field(description="events by category")
    shape: Shape = Field(description="law of each observable")
    shape_in: dict[str, Shape] = Field(default={}, description="laws that differ, by category or charm hadron")
    correlation: dict[ObservableKey, dict[ObservableKey, Annotated[Number, Field(gt=-1, lt=1)]]] = Field(
        default={}, description="of the Gaussian copula, by observable and observable"
    )

    @property
    def name(self) -> str:
        """The component's name."""
        return self.component

    @property
    def yield_constraint(self) -> Yield:
        """How far the fit may move the yield."""
        return self.yield_

    @property
    def role(self) -> str:
        """As in core.templates.Component."""
        return "background"

    @property
    def events_in(self) -> dict[str, int]:
        """Drawn events of each category that expects any: an even share, the first ones take what is left over."""
        filled = [name for name, expected in self.expected.items() if expected]
        share, left = divmod(self.events, len(filled)) if filled else (0, 0)
        return {name: share + (i < left) for i, name in enumerate(filled)}

    def overrides(self, category: str, charm: str) -> tuple[str, ...]:
        """Keys of `shape_in` that apply to a category and its charm hadron, the stronger first."""
        return tuple(key for key in (category, charm) if key in self.shape_in)

    def laws(self, category: str, charm: str) -> dict[str, Law]:
        """Law of each observable in a category, which has this charm hadron."""
        laws = dict(self.shape)
        for key in reversed(self.overrides(category, charm)):
            laws |= self.shape_in[key]
        return laws

    @property
    def correlated(self) -> tuple[str, ...]:
        """Observables in the correlation table, in the order of `shape`."""
        named = {name for first, row in self.correlation.items() for name in (first, *row)}
        return tuple(name for name in self.shape if name in named)

    @property
    def correlation_matrix(self) -> NDArray[np.float64]:
        """(n, n) float64, in the order of `correlated`."""
        names = self.correlated
        matrix = np.eye(len(names))
        for first, row in self.correlation.items():
            for second, value in row.items():
                i, j = names.index(first), names.index(second)
                matrix[i, j] = matrix[j, i] = value
        return matrix
