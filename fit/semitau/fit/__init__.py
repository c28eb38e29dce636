"""Templates -> likelihood -> ratios with errors, goodness of fit, toys, linearity, likelihood curves, budget. The door.

No module of this package may bear the name of a public function: importing it would hide the function.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from semitau.core.quadratic import templates_at as templates_at
    from semitau.core.template_file import read_templates as read_templates

    from .averages.combination import Average as Average
    from .averages.combination import average as average
    from .averages.compatibility import Prediction as Prediction
    from .averages.compatibility import Tension as Tension
    from .averages.compatibility import tension as tension
    from .averages.measurements import Measured as Measured
    from .averages.measurements import Measurement as Measurement
    from .fitting.coefficients import deepest as deepest
    from .fitting.data import Data as Data
    from .fitting.model import Model as Model
    from .fitting.newton import maximise as maximise
    from .fitting.result import FitResult as FitResult
    from .fitting.shape_and_rate import mirrored as mirrored
    from .fitting.shape_and_rate import one_sided as one_sided
    from .fitting.shape_and_rate import split_shape_and_rate as split_shape_and_rate
    from .likelihood.constraints import Correlated as Correlated
    from .likelihood.constraints import Gaussian as Gaussian
    from .likelihood.constraints import LogNormal as LogNormal
    from .likelihood.constraints import Uniform as Uniform
    from .likelihood.interpolation import interpolate as interpolate
    from .toys.covering import IntervalCoverage as IntervalCoverage
    from .toys.covering import interval_coverage as interval_coverage
    from .toys.covering import region_coverage as region_coverage
    from .toys.neyman import ToyInterval as ToyInterval
    from .toys.neyman import toy_interval as toy_interval
    from .toys.poor_templates import Corrected as Corrected
    from .toys.poor_templates import correct_for_templates as correct_for_templates
    from .toys.redrawn_templates import toys_with_new_templates as toys_with_new_templates
    from .toys.straightness import Linearity as Linearity
    from .toys.straightness import linearity as linearity
    from .toys.toys import Expectation as Expectation
    from .toys.toys import ToyResults as ToyResults
    from .toys.toys import run_toys as run_toys
    from .uncertainty.allocation import best_events as best_events
    from .uncertainty.allocation import least_events as least_events
    from .uncertainty.covariance_split import split_covariance as split_covariance
    from .uncertainty.covering import covering_error as covering_error
    from .uncertainty.covering import judge_shift as judge_shift
    from .uncertainty.curves import Profile as Profile
    from .uncertainty.curves import Region as Region
    from .uncertainty.curves import profile as profile
    from .uncertainty.curves import region as region
    from .uncertainty.decomposition import Budget as Budget
    from .uncertainty.decomposition import budget as budget
    from .uncertainty.fit_quality import Quality as Quality
    from .uncertainty.fit_quality import quality as quality
    from .uncertainty.foreign_fit import ForeignFit as ForeignFit
    from .uncertainty.foreign_fit import foreign_fit as foreign_fit
    from .uncertainty.foreign_fit import shift_errors as shift_errors
    from .uncertainty.nuisances import NuisanceShift as NuisanceShift
    from .uncertainty.nuisances import held_in_turn as held_in_turn
    from .uncertainty.nuisances import nuisance_shifts as nuisance_shifts
    from .uncertainty.prospects import Reach as Reach
    from .uncertainty.prospects import reach as reach
    from .uncertainty.template_bias import TemplateBias as TemplateBias
    from .uncertainty.template_bias import template_bias as template_bias
    from .uncertainty.template_costs import EventNumbers as EventNumbers
    from .uncertainty.template_costs import event_numbers as event_numbers

_HOME = {
    "Average": ".averages.combination",
    "Budget": ".uncertainty.decomposition",
    "Corrected": ".toys.poor_templates",
    "Correlated": ".likelihood.constraints",
    "Data": ".fitting.data",
    "EventNumbers": ".uncertainty.template_costs",
    "Expectation": ".toys.toys",
    "FitResult": ".fitting.result",
    "ForeignFit": ".uncertainty.foreign_fit",
    "Gaussian": ".likelihood.constraints",
    "IntervalCoverage": ".toys.covering",
    "Linearity": ".toys.straightness",
    "LogNormal": ".likelihood.constraints",
    "Measured": ".averages.measurements",
    "Measurement": ".averages.measurements",
    "Model": ".fitting.model",
    "NuisanceShift": ".uncertainty.nuisances",
    "Prediction": ".averages.compatibility",
    "Profile": ".uncertainty.curves",
    "Quality": ".uncertainty.fit_quality",
    "Reach": ".uncertainty.prospects",
    "Region": ".uncertainty.curves",
    "TemplateBias": ".uncertainty.template_bias",
    "Tension": ".averages.compatibility",
    "ToyInterval": ".toys.neyman",
    "ToyResults": ".toys.toys",
    "Uniform": ".likelihood.constraints",
    "average": ".averages.combination",
    "best_events": ".uncertainty.allocation",
    "budget": ".uncertainty.decomposition",
    "correct_for_templates": ".toys.poor_templates",
    "covering_error": ".uncertainty.covering",
    "deepest": ".fitting.coefficients",
    "event_numbers": ".uncertainty.template_costs",
    "foreign_fit": ".uncertainty.foreign_fit",
    "held_in_turn": ".uncertainty.nuisances",
    "interpolate": ".likelihood.interpolation",
    "interval_coverage": ".toys.covering",
    "judge_shift": ".uncertainty.covering",
    "least_events": ".uncertainty.allocation",
    "linearity": ".toys.straightness",
    "maximise": ".fitting.newton",
    "mirrored": ".fitting.shape_and_rate",
    "nuisance_shifts": ".uncertainty.nuisances",
    "one_sided": ".fitting.shape_and_rate",
    "profile": ".uncertainty.curves",
    "quality": ".uncertainty.fit_quality",
    "reach": ".uncertainty.prospects",
    "read_templates": "semitau.core.template_file",
    "region": ".uncertainty.curves",
    "region_coverage": ".toys.covering",
    "run_toys": ".toys.toys",
    "shift_errors": ".uncertainty.foreign_fit",
    "split_covariance": ".uncertainty.covariance_split",
    "split_shape_and_rate": ".fitting.shape_and_rate",
    "template_bias": ".uncertainty.template_bias",
    "templates_at": "semitau.core.quadratic",
    "tension": ".averages.compatibility",
    "toy_interval": ".toys.neyman",
    "toys_with_new_templates": ".toys.redrawn_templates",
}

__all__ = [
    "Average",
    "Budget",
    "Corrected",
    "Correlated",
    "Data",
    "EventNumbers",
    "Expectation",
    "FitResult",
    "ForeignFit",
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
    "TemplateBias",
    "Tension",
    "ToyInterval",
    "ToyResults",
    "Uniform",
    "average",
    "best_events",
    "budget",
    "correct_for_templates",
    "covering_error",
    "deepest",
    "event_numbers",
    "foreign_fit",
    "held_in_turn",
    "interpolate",
    "interval_coverage",
    "judge_shift",
    "least_events",
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
    "shift_errors",
    "split_covariance",
    "split_shape_and_rate",
    "template_bias",
    "templates_at",
    "tension",
    "toy_interval",
    "toys_with_new_templates",
]


def __getattr__(name: str) -> object:
    if name in _HOME:
        return getattr(import_module(_HOME[name], __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
