"""[[double_charm]]: components of B decays to two charmed mesons, one of which gives the lepton."""

from __future__ import annotations

from typing import Annotated, Literal

from pydantic import Field

from .components import Yield
from .names import Lepton, Parent
from .rules import Count, Distinct, Identifier, Table, Text

FirstMeson = Literal["D", "D*"]
Beside = Literal["D_s", "D_s*", "D K", "D* K"]
Source = Literal["tau", "mu", "eta", "eta'", "phi", "K", "K*", "pi", "rho"]


class DoubleCharm(Table):
    """A component of B → D(*) D_s(*) and B → D(*) D(*) K, made by the decay generator.

    The D(*) of `charm` is reconstructed, and what comes `beside` it gives the lepton: D_s → τν, μν, ηℓν, η'ℓν, φℓν, Kℓν
    and K*ℓν, or D → Kℓν, K*ℓν, πℓν and ρℓν. Rates are branching fractions of the particle data tables. What else there
    is vetoes an event if it is seen as a track, or leaves energy.

    `events` generated decays are shared between all decay chains by their expected rate. There are hundreds of chains,
    and each gets at least 256 decays.
    """

    component: Identifier = Field(description="name of its templates")
    label: Text | None = Field(default=None, description="in pictures and tables; the component's name if left out")
    parents: Annotated[tuple[Parent, ...], Field(min_length=1), Distinct] = Field(
        default=("B+", "B0"), description="decaying mesons"
    )
    charm: Annotated[tuple[FirstMeson, ...], Field(min_length=1), Distinct] = Field(
        default=("D", "D*"), description="meson that is reconstructed"
    )
    beside: Annotated[tuple[Beside, ...], Field(min_length=1), Distinct] = Field(
        default=("D_s", "D_s*", "D K", "D* K"), description="what comes beside it"
    )
    leptons: Annotated[tuple[Lepton, ...], Field(min_length=1), Distinct] = Field(
        default=("e", "mu", "tau"), description="of the charm decay; tau (of D_s → τν) goes on to e and mu"
    )
    yield_: Yield = Field(default=Yield(kind="free"), alias="yield", description="how far the fit may move it")
    events: Count = Field(description="generated decays")

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
    def sources(self) -> set[str]:
        """Where its leptons can come from, as in [[variation]] source."""
        strange = {"D_s", "D_s*"} & set(self.beside)
        other = {"D K", "D* K"} & set(self.beside)
        light = {"e", "mu"} & set(self.leptons)
        found = {"tau"} if strange and "tau" in self.leptons else set()
        found |= {"mu"} if strange and "mu" in self.leptons else set()
        found |= {"eta", "eta'", "phi", "K", "K*"} if strange and light else set()
        return found | ({"K", "K*", "pi", "rho"} if other and light else set())
