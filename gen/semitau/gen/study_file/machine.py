"""[study], [experiment] and [form_factors]: what is studied, at which machine, with which form factors."""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

from pydantic import BeforeValidator, Field, model_validator

from .rules import Fraction, Positive, PositiveEnergy, Seed, ShortTable, Table, Text, broken, rule


class StudySection(Table):
    """What is studied, and where the results go."""

    name: Text = Field(description="title of the report")
    seed: Seed = Field(description="every random number of the study follows from it")
    output: Text = Field(description="folder for everything that is made, from where the command runs")


def _available(kind: Any) -> Any:
    if kind == "hadron-collider":
        raise broken("is not available yet", '"lepton-collider"')
    return kind


class Experiment(Table):
    """The machine. Beams along z, the first beam towards +z."""

    kind: Annotated[Literal["lepton-collider"], BeforeValidator(_available)] = Field(
        description="e⁺e⁻ at the Υ(4S), the other B reconstructed in full"
    )
    beam_energies: Annotated[
        tuple[PositiveEnergy, PositiveEnergy],
        rule(
            lambda beams: 10.5596 < 2 * (beams[0] * beams[1]) ** 0.5 < 10.62,
            "do not meet at the Υ(4S)",
            "beams with 2 √(E1 E2) from 10.560 to 10.620 GeV, e.g. [8.0, 3.4981]",
        ),
    ] = Field(default=(8.0, 3.4981), description="electron, positron")
    energy_spread: PositiveEnergy = Field(default=0.0027, description="standard deviation of the collision energy")
    b_pairs: Positive = Field(description="number of B B̄ pairs")
    charged_fraction: Fraction = Field(default=0.514, description="share of B⁺B⁻ among the pairs")


class FormFactorSource(ShortTable):
    """A set of form factors: the name of a shipped one, or { file = "my_set.toml" } with numbers of one's own.

    Form of the file: docs/form_factors.md.
    """

    short_schema: ClassVar[dict[str, Any]] = {"type": "string"}

    name: Text | None = Field(default=None, description="shipped set; rather written short")
    file: Text | None = Field(default=None, description="TOML or CSV file, beside the study file unless absolute")
    parametrisation: Literal["CLN", "BGL", "BCL", "HQE", "Isgur-Wise", "Isgur-Wise-1/m"] | None = Field(
        default=None, description="of a CSV file, which does not say"
    )

    @model_validator(mode="before")
    @classmethod
    def _from_word(cls, given: Any) -> Any:
        if isinstance(given, str):
            return {"name": given}
        if isinstance(given, FormFactorSource | dict):
            return given
        raise broken("is no form-factor set", 'the name of a shipped set or { file = "my_set.toml" }')

    @model_validator(mode="after")
    def _one_way(self) -> FormFactorSource:
        if (self.name is None) == (self.file is None):
            raise broken("is no form-factor set", 'the name of a shipped set or { file = "my_set.toml" }')
        is_csv = self.file is not None and self.file.lower().endswith(".csv")
        if is_csv and self.parametrisation is None:
            remedy = 'Write { file = "my_set.csv", parametrisation = "BCL" }.'
            raise broken("does not say its parametrisation", remedy=remedy)
        if not is_csv and self.parametrisation is not None:
            raise broken("needs no parametrisation", "that of a CSV file", "Remove it: the set says it itself.")
        return self

    def __str__(self) -> str:
        return str(self.name or self.file)


def _shipped(name: str) -> FormFactorSource:
    return FormFactorSource(name=name)


class FormFactors(Table):
    """The parameter set for each charm family; `semitau rates` shows what a set gives."""

    D: FormFactorSource = Field(default=_shipped("BCL-2021"), description="B → D")
    Dst: FormFactorSource = Field(default=_shipped("CLN-2021"), description="B → D*")
    Dss: FormFactorSource = Field(
        default=_shipped("IW-1998"), description="B → D** (the four orbitally excited states)"
    )
