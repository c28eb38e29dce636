"""Templates -> likelihood -> ratios with errors, goodness of fit, toys, linearity, likelihood curves, budget. The door.

No module of this package may bear the name of a public function: importing it would hide the function.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from semitau.core.quadratic import templates_at as templates_at
    from semitau.core.template_file import read_templates as read_templates

    from .coefficients import deepest as deepest
    from .combination import Average as Average
    from .combination import average as average
    from .compatibility import Prediction as Prediction
    from .compatibility import Tension as Tension
    from .compatibility import tension as tension
    from .constraints import Correlated as Correlated
    from .constraints import Gaussian as Gaussian
    from .constraints import LogNormal as LogNormal
    from .constraints import Uniform as Uniform
    from .covering import IntervalCoverage as IntervalCoverage
    from .covering import interval_coverage as interval_coverage
    from .covering import region_coverage as region_coverage
    from .curves import Profile as Profile
    from .curves import Region as Region
    from .curves import profile as profile
    from .curves import region as region
    from .data import Data as Data
    from .decomposition import Budget as Budget
    from .decomposition import budget as budget
    from .fit_quality import Quality as Quality
    from .fit_quality import quality as quality
    from .interpolation import interpolate as interpolate
    from .measurements import Measured as Measured
    from .measurements import Measurement as Measurement
    from .model import Model as Model
    from .newton import maximise as maximise
    from .neyman import ToyInterval as ToyInterval
    from .neyman import toy_interval as toy_interval
    from .nuisances import NuisanceShift as NuisanceShift
    from .nuisances import held_in_turn as held_in_turn
    from .nuisances import nuisance_shifts as nuisance_shifts
    from .poor_templates import Corrected as Corrected
    from .poor_templates import correct_for_templates as correct_for_templates
    from .prospects import Reach as Reach
    from .prospects import reach as reach
    from .result import FitResult as FitResult
    from .shape_and_rate import mirrored as mirrored
    from .shape_and_rate import one_sided as one_sided
    from .shape_and_rate import split_shape_and_rate as split_shape_and_rate
    from .straightness import Linearity as Linearity
    from .straightness import linearity as linearity
    from .toys import ToyResults as ToyResults
    from .toys import run_toys as run_toys

_HOME = {
    "Average": ".combination",
    "Budget": ".decomposition",
    "Corrected": ".poor_templates",
    "Correlated": ".constraints",
    "Data": ".data",
    "FitResult": ".result",
    "Gaussian": ".constraints",
    "IntervalCoverage": ".covering",
    "Linearity": ".straightness",
    "LogNormal": ".constraints",
    "Measured": ".measurements",
    "Measurement": ".measurements",
    "Model": ".model",
    "NuisanceShift": ".nuisances",
    "Prediction": ".compatibility",
    "Profile": ".curves",
    "Quality": ".fit_quality",
    "Reach": ".prospects",
    "Region": ".curves",
    "Tension": ".compatibility",
    "ToyInterval": ".neyman",
    "ToyResults": ".toys",
    "Uniform": ".constraints",
    "average": ".combination",
    "budget": ".decomposition",
    "correct_for_templates": ".poor_templates",
    "deepest": ".coefficients",
    "held_in_turn": ".nuisances",
    "interpolate": ".interpolation",
    "interval_coverage": ".covering",
    "linearity": ".straightness",
    "maximise": ".newton",
    "mirrored": ".shape_and_rate",
    "nuisance_shifts": ".nuisances",
    "one_sided": ".shape_and_rate",
    "profile": ".curves",
    "quality": ".fit_quality",
    "reach": ".prospects",
    "read_templates": "semitau.core.template_file",
    "region": ".curves",
    "region_coverage": ".covering",
    "run_toys": ".toys",
    "split_shape_and_rate": ".shape_and_rate",
    "templates_at": "semitau.core.quadratic",
    "tension": ".compatibility",
    "toy_interval": ".neyman",
}

__all__ = [
    "Average",
    "Budget",
    "Corrected",
    "Correlated",
    "Data",
    "FitResult",
    "Gaussian",
    "IntervalCoverage",
    "Linearity",
    "LogNormal",
    "Measured",
    "Measurement",
    "Model",
    "NuisanceShift",
    "Prediction",
    "Profile",
    "Quality",
    "Reach",
    "Region",
    "Tension",
    "ToyInterval",
    "ToyResults",
    "Uniform",
    "average",
    "budget",
    "correct_for_templates",
    "deepest",
    "held_in_turn",
    "interpolate",
    "interval_coverage",
    "linearity",
    "maximise",
    "mirrored",
    "nuisance_shifts",
    "one_sided",
    "profile",
    "quality",
    "reach",
    "read_templates",
    "region",
    "region_coverage",
    "run_toys",
    "split_shape_and_rate",
    "templates_at",
    "tension",
    "toy_interval",
]


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(_HOME[name], __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
