"""The model of a study: its templates, and what [fit] says of the parameters."""

from __future__ import annotations

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.shape_and_rate import mirrored, split_shape_and_rate
from semitau.fit.likelihood.constraints import Constraint, Correlated, Gaussian, LogNormal, Uniform
from semitau.gen.study_file import fit_parameters as given
from semitau.gen.study_file.study import StudyConfig


def study_model(study: StudyConfig, templates: TemplateSet) -> Model:
    """The model that [fit] describes.

    Raises InputError for names that no parameter of the templates has, and for contradictions.
    """
    fit = study.fit
    try:
        return Model(
            split_shape_and_rate(mirrored(templates, fit.mirrored), fit.apart),
            template_statistics=fit.template_statistics,
            likelihood=fit.likelihood,
            fixed=fit.fixed,
            constraints={name: _law(constraint) for name, constraint in fit.constraints.items()},
            correlated=[_together(block) for block in fit.correlated],
            bounds={name: (ends.min, ends.max) for name, ends in fit.bounds.items()},
            functions=fit.functions,
            coefficients=fit.coefficients,
        )
    except InputError as error:
        raise InputError(*(_in_study(problem) for problem in error.problems)) from None


def _law(constraint: given.Constraint) -> Constraint | None:
    if constraint.gaussian is not None:
        return Gaussian(constraint.gaussian)
    if constraint.log_normal is not None:
        return LogNormal(constraint.log_normal)
    return None if constraint.uniform is None else Uniform(*constraint.uniform)


def _together(block: given.Correlated) -> Correlated:
    errors = np.array(block.errors)
    return Correlated(block.parameters, np.array(block.correlations) * np.outer(errors, errors))


def _in_study(problem: Problem) -> Problem:
    return problem if problem.where.startswith("category") else problem.inside("[fit]")
