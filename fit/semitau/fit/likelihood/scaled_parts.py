"""Components as parts that products of parameters scale.

A component is one part, scaled by its scale parameters, unless its templates follow floated coefficients: then it is
the sum of c_a c_b times a piece (core/quadratic.py), and each piece is a part of its own, scaled by c_a and c_b too. So
the compiled likelihood, its gradient and its Hessian know nothing of coefficients but that a parameter may stand twice.

A variation keeps its relative change of each bin, so every piece n_ab gets the shifts plus * n_ab / nominal. Bins that
only variations fill have nothing to be relative to: their shifts, and the templates' variances, which stay those of the
injected point, make a last part that follows no coefficient.
"""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from semitau.core.quadratic import contracted, injected_values, pairs_of
from semitau.core.templates import ONE, Floats, Template, TemplateSet


@dataclass(frozen=True, eq=False)
class Part:
    """Templates by category that one product of parameters scales.

    component : whose part it is. scales : names of the parameters; a coefficient may stand twice.
    of_variance : whether it is there for its variance alone.
    """

    component: str
    scales: tuple[str, ...]
    templates: Mapping[str, Template]
    of_variance: bool = False


def parts_of(
    templates: TemplateSet,
    floated: Sequence[str] = (),
    following: Sequence[str] = (),
    sizes: Mapping[str, str] | None = None,
) -> tuple[Part, ...]:
    """The parts of all components; coefficients that are not floated stay at their injected values.

    following : ratios that follow the floated coefficients: the templates do so themselves, and need no such factor.
    sizes : component -> the parameter that takes what floated coefficients do to its size away again.
    """
    found: list[Part] = []
    for component in templates.components:
        here = {c: t for (c, name), t in templates.templates.items() if name == component.name}
        scales = tuple(name for name in component.scales_with if name not in following)
        if sizes is not None and component.name in sizes:
            scales = (*scales, sizes[component.name])
        if floated and any(template.quadratic for template in here.values()):
            found += _pieces(component.name, scales, here, floated, injected_values(templates))
        else:
            found.append(Part(component.name, scales, here))
    return tuple(found)


def _pieces(
    component: str,
    scales: tuple[str, ...],
    here: Mapping[str, Template],
    floated: Sequence[str],
    values: Mapping[str, float],
) -> Iterator[Part]:
    left = {category: contracted(template.quadratic, values, floated) for category, template in here.items()}
    for pair in pairs_of(floated):
        chosen = {category: _piece(here[category], pieces[pair]) for category, pieces in left.items() if pair in pieces}
        if chosen:
            yield Part(component, (*scales, *(name for name in pair if name != ONE)), chosen)
    rest = {category: _rest(template) if template.quadratic else template for category, template in here.items()}
    yield Part(component, scales, rest, of_variance=True)


def growth(template: Template, contents: Floats) -> Floats:
    """Contents over the nominal ones, 1 where there are none: what the shifts of variations are multiplied with."""
    there = template.nominal != 0.0
    return np.where(there, contents / np.where(there, template.nominal, 1.0), 1.0)


def _piece(template: Template, contents: Floats) -> Template:
    """A quadratic piece with the relative shifts of the whole template."""
    there = template.nominal != 0.0
    share = np.where(there, contents / np.where(there, template.nominal, 1.0), 0.0)
    sides = [
        {name: np.where(there, values * share, contents) for name, values in side.items()}
        for side in (template.plus, template.minus)
    ]
    return Template(contents, np.zeros_like(contents), sides[0], sides[1])


def _rest(template: Template) -> Template:
    """Shifts of bins without nominal contents, and all variances."""
    hollow = template.nominal == 0.0
    sides = [
        {name: np.where(hollow, values, 0.0) for name, values in side.items()}
        for side in (template.plus, template.minus)
    ]
    return Template(np.zeros_like(template.nominal), template.variance, sides[0], sides[1])
