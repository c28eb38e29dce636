"""The model of a study before there are templates: which parameters there are and what is known of them."""

from __future__ import annotations

import numpy as np
from semitau.core.templates import Template, TemplateSet
from semitau.fit.fitting.model import Model
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.fit_components import components_and_parameters, template_categories, template_nuisances

from ..run.study_model import study_model


def skeleton_model(study: StudyConfig) -> Model:
    """A model with the parameters of the study's and an event in each bin; its expectations mean nothing.

    Raises InputError for what [fit] says of parameters that are not there.
    """
    components, parameters = components_and_parameters(study)
    categories = template_categories(study)
    return study_model(
        study,
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
        ),
    )
