"""Templates of the same analysis with more or fewer data."""

from __future__ import annotations

from dataclasses import replace

from semitau.core.errors import InputError, Problem
from semitau.core.templates import Template, TemplateSet


def enlarged(templates: TemplateSet, factor: float) -> TemplateSet:
    """The templates for `factor` times the data, from the same generated events; observed counts are left out.

    All expected events grow alike, and so do relative errors stay: those of the constraints, of the variations, and of
    the finite templates.

    Raises InputError for a factor that is not positive.
    """
    if not 0.0 < factor < float("inf"):
        raise InputError(Problem("must be positive", "size of the data", f"{factor:g}"))
    return replace(templates, templates={k: _larger(t, factor) for k, t in templates.templates.items()}, data={})


def _larger(template: Template, factor: float) -> Template:
    return Template(
        factor * template.nominal,
        factor**2 * template.variance,
        {name: factor * side for name, side in template.plus.items()},
        {name: factor * side for name, side in template.minus.items()},
        {pair: factor * piece for pair, piece in template.quadratic.items()},
        None if template.moments is None else factor**2 * template.moments,
    )
