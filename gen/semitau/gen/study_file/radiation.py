"""[radiation]: photons that charged leptons radiate, and what the reconstruction does with them."""

from __future__ import annotations

from typing import Annotated

from pydantic import Field, model_validator

from .rules import Angle, Flag, PositiveEnergy, Table, broken, rule


class RadiationSection(Table):
    """Photons from charged leptons; docs/physics.md describes the model. Without `photons` nothing radiates.

    A photon in the photon acceptance leaves its energy in the calorimeter with the chance of any lost neutral particle,
    unless it is found, with the photon efficiency, within `recovery_angle` of a track called an electron: then its
    momentum is added to that of the electron.
    """

    photons: Flag = Field(default=False, description="whether leptons radiate")
    minimum_energy: Annotated[
        PositiveEnergy, rule(lambda e: 1e-5 <= e <= 1.0, "is out of range", "0.01 MeV to 1 GeV")
    ] = Field(default=0.001, description="softer photons are not made; in the frame of the W or τ")
    recovery_angle: Annotated[
        Angle, rule(lambda a: 0.0 <= a <= 1.0, "is out of range", "0 (none is recovered) to 1 rad")
    ] = Field(default=0.0, description="largest angle of a recovered photon to an electron, laboratory")

    @model_validator(mode="after")
    def _used(self) -> RadiationSection:
        if not self.photons and self.recovery_angle > 0.0:
            raise broken("recovers photons that are not made", remedy="Set photons = true.", got="photons = false")
        return self

    @property
    def least(self) -> float | None:
        """Lowest photon energy in GeV; None if nothing radiates."""
        return self.minimum_energy if self.photons else None
