"""[study], [experiment] and [form_factors]: what is studied, at which machine, with which form factors."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field

from .rules import Fraction, Positive, PositiveEnergy, Seed, Table, Text, broken, rule


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


class FormFactors(Table):
    """The parameter set for each charm family; `semitau rates` shows what a set gives."""

    D: Text = Field(default="BCL-2021", description="B → D")
    Dst: Text = Field(default="CLN-2021", description="B → D*")
    Dss: Text = Field(default="IW-1998", description="B → D** (the four orbitally excited states)")
