"""[wilson] and [quadratic]: couplings beyond the Standard Model, and templates as functions of them."""

from __future__ import annotations

from math import hypot, isfinite
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, PlainSerializer, WithJsonSchema, model_validator

from ..decays.coefficients import LARGEST
from ..decays.decay import WilsonCoefficients
from ..decays.lepton_couplings import LeptonCouplings
from .names import CoefficientName
from .rules import Distinct, Table, broken
from .shift_tables import FormFactorShifts


def _number(given: Any) -> bool:
    return isinstance(given, int | float) and not isinstance(given, bool) and isfinite(given)


def _within(largest: float) -> BeforeValidator:
    """A complex number no larger than the range in which it makes sense."""
    wanted = f"a number or [real, imaginary] of size up to {largest:g}"

    def check(given: Any) -> complex:
        if isinstance(given, complex):
            given = [given.real, given.imag]
        parts = given if isinstance(given, list | tuple) else [given, 0.0]
        if len(parts) != 2 or not all(map(_number, parts)):
            raise broken("is no coefficient", wanted)
        if hypot(*parts) > largest:
            raise broken("is larger than any such coefficient can be", wanted)
        return complex(*parts)

    return BeforeValidator(check)


_SHORT = WithJsonSchema(
    {"anyOf": [{"type": "number"}, {"type": "array", "prefixItems": [{"type": "number"}, {"type": "number"}]}]}
)
_WRITTEN = PlainSerializer(lambda value: [value.real, value.imag] if value.imag else value.real)
Current = Annotated[complex, _within(LARGEST["VL"]), _SHORT, _WRITTEN]
Scalar = Annotated[complex, _within(LARGEST["SL"]), _SHORT, _WRITTEN]
Tensor = Annotated[complex, _within(LARGEST["T"]), _SHORT, _WRITTEN]


class Couplings(Table):
    """Couplings beyond the Standard Model of the modes with a light lepton; keys as in [wilson]."""

    VL: Current = Field(default=0.0, description="left-handed vector current, beside the Standard Model's 1")
    VR: Current = Field(default=0.0, description="right-handed vector current")
    SL: Scalar = Field(default=0.0, description="left-handed scalar current")
    SR: Scalar = Field(default=0.0, description="right-handed scalar current")
    T: Tensor = Field(default=0.0, description="tensor current")

    @property
    def couplings(self) -> WilsonCoefficients:
        """As the decays take them."""
        return WilsonCoefficients(*(complex(getattr(self, name)) for name in ("VL", "VR", "SL", "SR", "T")))


class Wilson(Couplings):
    """Couplings beyond the Standard Model at the b mass scale, of the modes with a tau; docs/physics.md defines them.

    Each is a number, or [real, imaginary]. They act on rates, on the decays that are generated, and on the ratios that
    the templates are made with. Those of electrons and muons stand in [wilson.e] and [wilson.mu]; ratios are over the
    mean of both.
    """

    tensor: Literal["LO", "EOM", "HQE"] = Field(
        default="LO",
        description="tensor form factors: heavy-quark limit, equations of motion, or those of a heavy-quark expansion",
    )

    e: Couplings = Field(default=Couplings(), description="of the modes with an electron")
    mu: Couplings = Field(default=Couplings(), description="of the modes with a muon")

    @property
    def by_lepton(self) -> LeptonCouplings:
        """All of them; `couplings` are those of the tau."""
        return LeptonCouplings(self.e.couplings, self.mu.couplings, self.couplings, self.tensor)


class Quadratic(Table):
    """Templates as exact quadratic functions of chosen real coefficients: couplings of the tau, or form factors.

    From the one sample that [wilson] and [form_factors] draw; a fit then takes any point or floats them
    (docs/statistics.md). `SR` is the real part of a coupling, `Im_SR` its imaginary part.
    """

    coefficients: Annotated[tuple[CoefficientName, ...], Field(min_length=1), Distinct] = Field(
        default=(), description="real and imaginary parts of couplings, which templates of the modes with a tau follow"
    )
    form_factors: Annotated[tuple[FormFactorShifts, ...], Field(min_length=1)] = Field(
        default=(), description="[[quadratic.form_factors]], which templates of all modes of D or D* follow"
    )

    @model_validator(mode="after")
    def _of_something(self) -> Quadratic:
        if not (self.coefficients or self.form_factors):
            raise broken("has no coefficients", "coefficients or form_factors", got="")
        return self
