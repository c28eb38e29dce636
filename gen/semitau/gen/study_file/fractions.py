"""[branching_fractions]: branching fractions instead of those of the tables."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Annotated, Any, ClassVar

from pydantic import Field, GetCoreSchemaHandler, GetJsonSchemaHandler, model_validator
from pydantic.json_schema import JsonSchemaValue
from pydantic_core import CoreSchema, core_schema
from semitau.core.charm_fractions import Fraction as Measured

from ..decays.branching_fractions import TABLES, BranchingFractions
from ..decays.decay import CHARMS
from ..decays.orbital_states import CHARM_STATES
from .rules import Fraction, Positive, ShortTable, Table, broken, suggestion


class GivenFraction(ShortTable):
    """A branching fraction, or a ratio of two: a bare number, or { value = 0.677, error = 0.005 }."""

    short_schema: ClassVar[dict[str, Any]] = {"type": "number", "minimum": 0, "maximum": 1}

    value: Fraction = Field(description="0 to 1")
    error: Annotated[Positive, Field(le=1)] | None = Field(
        default=None, description="one standard deviation; for [[variation]] tables that do not say how far they go"
    )

    @model_validator(mode="before")
    @classmethod
    def _from_number(cls, given: Any) -> Any:
        if isinstance(given, bool) or not isinstance(given, int | float | dict | GivenFraction):
            raise broken("is no branching fraction", "a number from 0 to 1, or { value = 0.677, error = 0.005 }")
        if isinstance(given, int | float):
            if not 0 <= given <= 1:
                raise broken("is no branching fraction", "0 to 1")
            return {"value": given}
        return given


@dataclass(frozen=True)
class FinalState:
    """Marks a text as one of the final states of a particle, or of what there is an `R` of."""

    particle: str

    @property
    def words(self) -> tuple[str, ...]:
        """Those that are known."""
        return tuple(CHARM_STATES if self.particle == "R" else TABLES[self.particle])

    def check(self, name: str) -> str:
        """The same name, if it is known."""
        if name in self.words:
            return name
        if self.particle == "R" and name in CHARMS:
            remedy = f"Set [fit.injected] {'R_D' if name == 'D' else 'R_Dst'}: the fit measures this ratio."
            raise broken("has no such ratio here", ", ".join(self.words), remedy, got=name)
        what = "is nothing with such a ratio" if self.particle == "R" else f"is no decay of {self.particle} here"
        raise broken(what, ", ".join(self.words), suggestion(name, self.words), got=name)

    def __get_pydantic_core_schema__(self, source: Any, handler: GetCoreSchemaHandler) -> CoreSchema:
        return core_schema.no_info_after_validator_function(self.check, handler(source))

    def __get_pydantic_json_schema__(self, core: CoreSchema, handler: GetJsonSchemaHandler) -> JsonSchemaValue:
        return {"type": "string", "enum": list(self.words)}


class BranchingFractionTables(Table):
    """Branching fractions instead of those of the tables (docs/physics.md), by the particle that decays.

    Final states are named without neutrinos and charge conjugates, e.g. `tau.mu = 0.1739` or `"D*+"."D0 pi+" = 0.677`.
    What is not given stays. The decays of a D** or D* must sum to one: give all that change.

    Of a B, `"D* l"` is the decay to one light lepton, the mean of e and μ; a decay with a τ moves along. `"D D_s+"` and
    so on are those of [[double_charm]], the first D without its charge. Where a semileptonic fraction is given for one
    B alone, the width of the other changes by the same factor. `R` is the fraction with a τ over the one with a light
    lepton; those of D and D* stand in [fit.injected]. `"phi e"` and so on are decays of charm with an electron; those
    with a muon follow from the form factors.
    """

    charged: dict[Annotated[str, FinalState("B+")], GivenFraction] = Field(
        default={}, alias="B+", description="of the B⁺"
    )
    neutral: dict[Annotated[str, FinalState("B0")], GivenFraction] = Field(
        default={}, alias="B0", description="of the B⁰"
    )
    R: dict[Annotated[str, FinalState("R")], GivenFraction] = Field(
        default={}, description="τ over one light lepton, of D** and of systems without a resonance"
    )
    D1: dict[Annotated[str, FinalState("D1(2420)")], GivenFraction] = Field(
        default={}, alias="D1(2420)", description="sum to one"
    )
    D2: dict[Annotated[str, FinalState("D2*(2460)")], GivenFraction] = Field(
        default={}, alias="D2*(2460)", description="sum to one"
    )
    D1_broad: dict[Annotated[str, FinalState("D1'(2430)")], GivenFraction] = Field(
        default={}, alias="D1'(2430)", description="sum to one"
    )
    pairs: dict[Annotated[str, FinalState("pi pi")], GivenFraction] = Field(
        default={}, alias="pi pi", description="two pions beside a D or D* by their charges; sum to one"
    )
    vector_charged: dict[Annotated[str, FinalState("D*+")], GivenFraction] = Field(
        default={}, alias="D*+", description="sum to one"
    )
    vector_neutral: dict[Annotated[str, FinalState("D*0")], GivenFraction] = Field(
        default={}, alias="D*0", description="sum to one"
    )
    tau: dict[Annotated[str, FinalState("tau")], GivenFraction] = Field(default={}, description="of the τ")
    strange_vector: dict[Annotated[str, FinalState("D_s*+")], GivenFraction] = Field(
        default={}, alias="D_s*+", description="sum to one"
    )
    strange: dict[Annotated[str, FinalState("D_s+")], GivenFraction] = Field(
        default={}, alias="D_s+", description="to leptons"
    )
    D0: dict[Annotated[str, FinalState("D0")], GivenFraction] = Field(default={}, description="to leptons")
    Dp: dict[Annotated[str, FinalState("D+")], GivenFraction] = Field(default={}, alias="D+", description="to leptons")

    @property
    def by_particle(self) -> dict[str, dict[str, GivenFraction]]:
        """What is given, by the names of the file, without `R`."""
        fields = type(self).model_fields
        given = {info.alias or name: getattr(self, name) for name, info in fields.items() if name != "R"}
        return {particle: dict(table) for particle, table in given.items() if table}

    @property
    def fractions(self) -> BranchingFractions:
        """As the decay chains take them."""
        return BranchingFractions(
            {particle: _measured(table) for particle, table in self.by_particle.items()}, _measured(self.R)
        )


def _measured(table: dict[str, GivenFraction]) -> dict[str, Measured]:
    return {name: Measured(one.value, one.error or 0.0) for name, one in table.items()}
