"""Templates -> likelihood -> ratios with errors, goodness of fit, toys, linearity, likelihood curves, budget. The door.

No module of this package may bear the name of a public function: importing it would hide the function.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from semitau.core.template_file import read_templates as read_templates

    from .curves import Profile as Profile
    from .curves import Region as Region
    from .curves import profile as profile
    from .curves import region as region
    from .data import Data as Data
    from .decomposition import Budget as Budget
    from .decomposition import budget as budget
    from .interpolation import interpolate as interpolate
    from .model import Model as Model
    from .newton import maximise as maximise
    from .result import FitResult as FitResult
    from .straightness import Linearity as Linearity
    from .straightness import linearity as linearity
    from .toys import ToyResults as ToyResults
    from .toys import run_toys as run_toys

_HOME = {
    "Budget": ".decomposition",
    "Data": ".data",
    "FitResult": ".result",
    "Linearity": ".straightness",
    "Model": ".model",
    "Profile": ".curves",
    "Region": ".curves",
    "ToyResults": ".toys",
    "budget": ".decomposition",
    "interpolate": ".interpolation",
    "linearity": ".straightness",
    "maximise": ".newton",
    "profile": ".curves",
    "read_templates": "semitau.core.template_file",
    "region": ".curves",
    "run_toys": ".toys",
}

__all__ = [
    "Budget",
    "Data",
    "FitResult",
    "Linearity",
    "Model",
    "Profile",
    "Region",
    "ToyResults",
    "budget",
    "interpolate",
    "linearity",
    "maximise",
    "profile",
    "read_templates",
    "region",
    "run_toys",
]


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(_HOME[name], __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
