"""Couplings beyond the standard model, lepton by lepton."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field, replace

from semitau.core.errors import InputError, Problem

from .decay import LEPTONS, WilsonCoefficients

LIGHT = ("e", "mu")
Given = WilsonCoefficients | Mapping[str, complex] | None


@dataclass(frozen=True)
class LeptonCouplings:
    """Wilson coefficients of the decays with each lepton, and the model of their tensor form factors.

    Where a light lepton has none, its decays are those of the standard model, whatever the tensor model.
    """

    e: WilsonCoefficients = field(default_factory=WilsonCoefficients)
    mu: WilsonCoefficients = field(default_factory=WilsonCoefficients)
    tau: WilsonCoefficients = field(default_factory=WilsonCoefficients)
    tensor: str = "LO"

    @classmethod
    def of(cls, wilson: Given = None, tensor: str = "LO", light: Mapping[str, Given] | None = None) -> LeptonCouplings:
        """From the couplings of the tau and those of "e" and "mu". InputError for other leptons or coefficients."""
        unknown = [name for name in light or () if name not in LIGHT]
        if unknown:
            raise InputError(*(Problem("no such light lepton", got=repr(n), wanted=", ".join(LIGHT)) for n in unknown))
        lights = {name: WilsonCoefficients.of(given) for name, given in (light or {}).items()}
        return cls(**lights, tau=WilsonCoefficients.of(wilson), tensor=tensor)

    def __getitem__(self, lepton: str) -> WilsonCoefficients:
        couplings: WilsonCoefficients = {name: getattr(self, name) for name in LEPTONS}[lepton]
        return couplings

    def model(self, lepton: str) -> str:
        """Tensor model of the decays with a lepton, as `Decay` takes it."""
        return self.tensor if lepton == "tau" or self[lepton] != WilsonCoefficients() else "LO"

    def with_tau(self, couplings: WilsonCoefficients) -> LeptonCouplings:
        """The same with other couplings of the tau."""
        return replace(self, tau=couplings)
