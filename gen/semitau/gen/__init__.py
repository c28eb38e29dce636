"""Generation: decays, detector response, selection, templates. The door: public names, loaded when first used.

No module of this package may bear the name of a public function: importing it would hide the function.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .decay import Decay as Decay
    from .decay import WilsonCoefficients as WilsonCoefficients
    from .event_weights import weights as weights
    from .form_factor_set import form_factor_sets as form_factor_sets
    from .form_factor_set import form_factors as form_factors
    from .rates import differential_rate as differential_rate
    from .rates import observables as observables
    from .rates import ratio as ratio
    from .simulation import simulate as simulate

_HOME = {
    "Decay": "decay",
    "WilsonCoefficients": "decay",
    "differential_rate": "rates",
    "form_factor_sets": "form_factor_set",
    "form_factors": "form_factor_set",
    "observables": "rates",
    "ratio": "rates",
    "simulate": "simulation",
    "weights": "event_weights",
}

__all__ = [
    "Decay",
    "WilsonCoefficients",
    "differential_rate",
    "form_factor_sets",
    "form_factors",
    "observables",
    "ratio",
    "simulate",
    "weights",
]


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(f".{_HOME[name]}", __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
