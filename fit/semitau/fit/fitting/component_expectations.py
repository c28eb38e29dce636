"""What each component of a template set is expected to bring, for given values of the parameters."""

from __future__ import annotations

from collections.abc import Mapping, Sequence

import numpy as np
from semitau.core.quadratic import contents_at, form_at, injected_values
from semitau.core.templates import Floats, TemplateSet

from ..likelihood.interpolation import bend
from ..likelihood.scaled_parts import growth
from .coefficients import followed_rates


def component_expectations(
    templates: TemplateSet, values: Mapping[str, float], coefficients: Sequence[str] = ()
) -> dict[tuple[str, str], Floats]:
    """Expected events of each (category, component), in the shape of the category's axes.

    values : of every parameter. coefficients : those that are fitted; the others stay at their injected values.
    """
    injected = {parameter.name: parameter.injected for parameter in templates.parameters}
    following = followed_rates(templates, tuple(coefficients))
    point = injected_values(templates) | {name: values[name] for name in coefficients}
    out = {}
    for component in templates.components:
        scale = float(np.prod([values[n] / injected[n] for n in component.scales_with if n not in following]))
        scale /= form_at(component.rate, point) if coefficients else 1.0
        for category in templates.categories:
            template = templates.templates.get((category.name, component.name))
            if template is None:
                continue
            contents, shifts = contents_at(template, point), np.zeros_like(template.nominal)
            for name, plus in template.plus.items():
                minus, theta = template.minus[name], values[name]
                shifts += 0.5 * (plus - minus) * theta
                shifts += (0.5 * (plus + minus) - template.nominal) * bend(theta)[0]
            out[category.name, component.name] = scale * (contents + shifts * growth(template, contents))
    return out
