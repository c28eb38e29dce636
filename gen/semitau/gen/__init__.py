"""Generation: decays, detector response, selection, templates. The door: public names, loaded when first used.

No module of this package may bear the name of a public function: importing it would hide the function.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .decays.decay import Decay as Decay
    from .decays.decay import WilsonCoefficients as WilsonCoefficients
    from .decays.double_charm import DoubleCharmChain as DoubleCharmChain
    from .decays.double_charm import double_charm_chains as double_charm_chains
    from .decays.form_factor_set import form_factor_sets as form_factor_sets
    from .decays.form_factor_set import form_factors as form_factors
    from .decays.form_factor_set import read_form_factors as read_form_factors
    from .decays.rates import differential_rate as differential_rate
    from .decays.rates import observables as observables
    from .decays.rates import ratio as ratio
    from .truth.double_charm_events import simulate_double_charm as simulate_double_charm
    from .truth.event_weights import weights as weights
    from .truth.simulation import simulate as simulate

_HOME = {
    "Decay": "decays.decay",
    "DoubleCharmChain": "decays.double_charm",
    "WilsonCoefficients": "decays.decay",
    "differential_rate": "decays.rates",
    "double_charm_chains": "decays.double_charm",
    "form_factor_sets": "decays.form_factor_set",
    "form_factors": "decays.form_factor_set",
    "observables": "decays.rates",
    "ratio": "decays.rates",
    "read_form_factors": "decays.form_factor_set",
    "simulate": "truth.simulation",
    "simulate_double_charm": "truth.double_charm_events",
    "weights": "truth.event_weights",
}

__all__ = [
    "Decay",
    "DoubleCharmChain",
    "WilsonCoefficients",
    "differential_rate",
    "double_charm_chains",
    "form_factor_sets",
    "form_factors",
    "observables",
    "ratio",
    "read_form_factors",
    "simulate",
    "simulate_double_charm",
    "weights",
]


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(f".{_HOME[name]}", __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
