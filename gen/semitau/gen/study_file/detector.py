"""The [detector] tables: what the invented or planned detector does to momenta, and whom it misses.

Every key has a default of the size usual for a detector at the Υ(4S) (common practice), so a study needs to write only
what differs. Momenta are laboratory momenta in GeV.
"""

from __future__ import annotations

from typing import Annotated, Any, ClassVar, Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray
from pydantic import Field, model_validator
from semitau.core.constants import MIXING_PROBABILITY

from .names import CharmHadron, Parent
from .rules import (
    Angle,
    Fraction,
    Increasing,
    NotNegative,
    PositiveAngle,
    PositiveEnergy,
    ShortTable,
    Table,
    broken,
    rule,
)

Momenta = Annotated[tuple[NotNegative, ...], Increasing]
Acceptance = Annotated[
    tuple[Angle, Angle], rule(lambda a: 0 <= a[0] < a[1] <= 3.1415927, "must increase within 0 to π")
]
Pair = tuple[NotNegative, NotNegative]


class Curve(ShortTable):
    """A probability against momentum: straight lines between the points, constant outside them.

    In the file: a bare number (the same at every momentum), or { momentum = [...], value = [...] }.
    """

    short_schema: ClassVar[dict[str, Any]] = {"type": "number", "minimum": 0, "maximum": 1}

    momentum: Momenta = Field(min_length=1, description="GeV, increasing")
    value: tuple[Fraction, ...] = Field(min_length=1, description="probabilities, as many as momenta")

    @model_validator(mode="before")
    @classmethod
    def _from_number(cls, given: Any) -> Any:
        if isinstance(given, bool | str) or not isinstance(given, int | float | dict | Curve):
            raise broken("must be a number or a table", "0 to 1, or { momentum = [...], value = [...] }")
        if isinstance(given, int | float):
            if not 0 <= given <= 1:
                raise broken("must be a probability", "0 to 1")
            return {"momentum": [0.0], "value": [given]}
        return given

    @model_validator(mode="after")
    def _paired(self) -> Curve:
        if len(self.momentum) != len(self.value):
            raise broken(
                "needs as many values as momenta", got=f"{len(self.momentum)} momenta, {len(self.value)} values"
            )
        return self

    def at(self, momentum: ArrayLike) -> NDArray[np.float64]:
        """Probability at `momentum` (any shape, GeV)."""
        return np.asarray(np.interp(np.asarray(momentum, dtype=np.float64), self.momentum, self.value))


def _curve(*points: tuple[float, float]) -> Curve:
    return Curve(momentum=tuple(p for p, _ in points), value=tuple(v for _, v in points))


def _flat(value: float) -> Curve:
    return Curve(momentum=(0.0,), value=(value,))


class PerParent(Table):
    """A probability for each B species: { "B+" = ..., B0 = ... }."""

    charged: Fraction = Field(alias="B+", description="charged B")
    neutral: Fraction = Field(alias="B0", description="neutral B")

    def __getitem__(self, parent: Parent | str) -> float:
        return {"B+": self.charged, "B0": self.neutral}[parent]


class PerCharm(Table):
    """A probability for each ground-state D: { D0 = ..., "D+" = ... }."""

    neutral: Fraction = Field(alias="D0", description="neutral D")
    charged: Fraction = Field(alias="D+", description="charged D")

    def __getitem__(self, charm: CharmHadron | str) -> float:
        return {"D0": self.neutral, "D+": self.charged}[charm]


class Tag(Table):
    """The other B, reconstructed in full."""

    efficiency: PerParent = Field(
        default=PerParent.model_validate({"B+": 0.0035, "B0": 0.0022}),
        description="chance that a B is reconstructed as a tag, by B species",
    )
    momentum_resolution: PositiveEnergy = Field(
        default=0.022, description="each component of the tag momentum, centre-of-mass frame, right tags"
    )
    wrong_fraction: Fraction = Field(default=0.12, description="tags with a wrong particle in them")
    wrong_momentum_resolution: PositiveEnergy = Field(default=0.16, description="the same for wrong tags")
    wrong_charge_fraction: Fraction = Field(
        default=0.3, description="of the wrong tags, those with the charge of the other B species"
    )
    flavour: Literal["any", "opposite", "same"] = Field(
        default="any", description="of the tag against the lepton's; B⁰ mixing makes it the same for 18.6% of B⁰"
    )

    def kept(self, parent: str) -> float:
        """Chance that a B of this kind is reconstructed beside a lepton of the other B with the flavour asked for."""
        same = MIXING_PROBABILITY if parent == "B0" else 0.0
        share = {"any": 1.0, "opposite": 1.0 - same, "same": same}[self.flavour]
        return self.efficiency[parent] * share


class Tracks(Table):
    """Charged particles."""

    momentum_resolution: Pair = Field(
        default=(0.0015, 0.003), description="a, b of sigma(pt)/pt = a pt + b, in quadrature"
    )
    angle_resolution: PositiveAngle = Field(default=0.0012, description="polar and azimuthal angle")
    polar_acceptance: Acceptance = Field(
        default=(0.2967, 2.618), description="laboratory polar angle, from the electron beam"
    )
    minimum_transverse_momentum: PositiveEnergy = Field(default=0.08, description="softer tracks are lost")
    efficiency: Curve = Field(default=_flat(0.95), description="within acceptance")


class Photons(Table):
    """Photons of D* → D γ; the resolutions also serve the neutral soft pion as one object."""

    energy_resolution: Pair = Field(default=(0.018, 0.012), description="a, b of sigma(E)/E = a/√E + b, in quadrature")
    angle_resolution: PositiveAngle = Field(default=0.008, description="polar and azimuthal angle")
    polar_acceptance: Acceptance = Field(
        default=(0.2443, 2.705), description="laboratory polar angle, from the electron beam"
    )
    efficiency: Curve = Field(
        default=_curve((0.02, 0.05), (0.05, 0.4), (0.1, 0.65), (0.2, 0.75), (0.5, 0.8)), description="within acceptance"
    )


class RandomSoft(Table):
    """Chance of a random soft candidate within `window` around a D that has none."""

    charged: Fraction = Field(default=0.03, description="random charged pion beside a D⁰")
    neutral: Fraction = Field(default=0.12, description="random neutral pion")
    photon: Fraction = Field(default=0.1, description="random photon")


class SoftPion(Table):
    """The slow pion of D* → D π."""

    charged: Curve = Field(
        default=_curve((0.04, 0.05), (0.06, 0.35), (0.1, 0.6), (0.15, 0.7), (0.2, 0.75), (0.4, 0.8)),
        description="efficiency for charged pions, within acceptance; it stands in place of the track efficiency",
    )
    neutral: Curve = Field(
        default=_curve((0.03, 0.15), (0.06, 0.3), (0.1, 0.4), (0.15, 0.45), (0.2, 0.48), (0.4, 0.5)),
        description="efficiency for neutral pions, within photon acceptance",
    )
    random: RandomSoft = Field(default=RandomSoft(), description="random soft candidates, which feed D up into D*")
    random_window: Annotated[tuple[PositiveEnergy, PositiveEnergy], Increasing] = Field(
        default=(0.1351, 0.18), description="mass difference m(D soft) − m(D) that random candidates fill evenly"
    )


class LeptonIdentification(Table):
    """Chances to be called a lepton, against momentum."""

    e: Curve = Field(
        default=_curve((0.3, 0.4), (0.5, 0.75), (0.8, 0.9), (1.2, 0.93), (2.0, 0.94)), description="electrons called e"
    )
    mu: Curve = Field(
        default=_curve((0.5, 0.1), (0.7, 0.5), (0.9, 0.75), (1.2, 0.87), (2.0, 0.9)), description="muons called mu"
    )
    hadron_as_e: Curve = Field(default=_curve((0.3, 0.004), (1.0, 0.002), (2.0, 0.001)), description="hadrons called e")
    hadron_as_mu: Curve = Field(
        default=_curve((0.5, 0.035), (1.0, 0.025), (2.0, 0.015)), description="hadrons called mu"
    )
    pi: Curve = Field(default=_flat(0.9), description="charged pions called pions, where categories ask for them")
    e_as_pi: Curve = Field(
        default=_curve((0.3, 0.06), (0.6, 0.02), (1.0, 0.01)), description="electrons called pions, likewise"
    )
    mu_as_pi: Curve = Field(
        default=_curve((0.5, 0.5), (0.7, 0.3), (0.9, 0.15), (1.2, 0.08), (2.0, 0.06)),
        description="muons called pions, likewise",
    )
    e_as_mu: Curve = Field(default=_flat(0.0005), description="electrons called mu")
    mu_as_e: Curve = Field(default=_flat(0.0005), description="muons called e")


class Charm(Table):
    """The D is followed as K⁻π⁺ (D⁰) or K⁻π⁺π⁺ (D⁺), which stand for all channels that a real analysis would use."""

    reconstructed: PerCharm = Field(
        default=PerCharm.model_validate({"D0": 0.3, "D+": 0.25}),
        description="sum of branching fraction times efficiency of the channels, acceptance of the tracks apart",
    )


class ResidualEnergy(Table):
    """Calorimeter energy that belongs to no reconstructed particle: noise, and what the decay lost."""

    noise_mean: PositiveEnergy = Field(default=0.12, description="mean of the exponential noise, if there is any")
    clean_fraction: Fraction = Field(default=0.35, description="events with no residual cluster at all")
    wrong_tag_mean: PositiveEnergy = Field(default=0.45, description="mean of what a wrong tag adds")
    lost_neutral_probability: Fraction = Field(
        default=0.7, description="chance that a lost soft neutral leaves its energy"
    )


class Detector(Table):
    """The detector of a lepton collider. Every key has a default of the size usual at the Υ(4S) (common practice)."""

    tag: Tag = Field(default=Tag(), description="the other B")
    tracks: Tracks = Field(default=Tracks(), description="charged particles")
    photons: Photons = Field(default=Photons(), description="photons, resolution of soft neutral pions")
    soft_pion: SoftPion = Field(default=SoftPion(), description="slow pions of D*, random ones")
    lepton_id: LeptonIdentification = Field(default=LeptonIdentification(), description="lepton identification")
    charm: Charm = Field(default=Charm(), description="reconstruction of the D")
    residual_energy: ResidualEnergy = Field(default=ResidualEnergy(), description="left-over calorimeter energy")
