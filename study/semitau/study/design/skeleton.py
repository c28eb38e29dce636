"""The model of a study before there are templates: which parameters there are and what is known of them."""

from __future__ import annotations

import numpy as np
from semitau.core.templates import Template, TemplateSet
from semitau.fit.fitting.model import Model
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.fit_components import (
    components_and_parameters,
    template_categories,
    template_coefficients,
    template_nuisances,
)

from ..run.study_model import study_model


def skeleton_model(study: StudyConfig) -> Model:
    """A model with the parameters of the study's and an event in each bin; its expectations mean nothing.

    Coefficients of the templates are held where these are made, whatever [fit] floats: ratios are free.

    Raises InputError for what [fit] says of parameters that are not there.
    """
    components, parameters = components_and_parameters(study)
    categories = template_categories(study)
    return study_model(
        _with_coefficients_held(study),
        TemplateSet(
            categories=categories,
            components=components,
            parameters=parameters,
            nuisances=template_nuisances(study),
            templates={
                (category.name, component.name): Template(np.ones(category.shape), np.ones(category.shape))
                for category in categories
                for component in components
            },
            coefficients=template_coefficients(study),
        ),
    )


def _with_coefficients_held(study: StudyConfig) -> StudyConfig:
    floated, fit = study.fit.coefficients, study.fit
    if not floated:
        return study
    kept = {
        key: {name: value for name, value in getattr(fit, key).items() if name not in floated}
        for key in ("fixed", "constraints", "bounds", "functions")
    }
    together = tuple(block for block in fit.correlated if not set(block.parameters) & set(floated))
    changed = fit.model_copy(update={**kept, "correlated": together, "coefficients": ()})
    return study.model_copy(update={"fit": changed})
