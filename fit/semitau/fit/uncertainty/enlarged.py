"""Templates of the same analysis with more or fewer data."""

from __future__ import annotations

from dataclasses import replace

from semitau.core.errors import InputError, Problem
from semitau.core.templates import Template, TemplateSet


def enlarged(templates: TemplateSet, factor: float, *, generated: float = 1.0) -> TemplateSet:
    """The templates for `factor` times the data; observed counts are left out.

    All expected events grow alike, and so relative errors stay: those of the constraints, of the variations, and of the
    finite templates, unless `generated` times as many events are generated, as if with the same contents.

    Raises InputError for a factor that is not positive.
    """
    if not 0.0 < factor < float("inf"):
        raise InputError(Problem("must be positive", "size of the data", f"{factor:g}"))
    larger = {name: _larger(template, factor, generated) for name, template in templates.templates.items()}
    return replace(templates, templates=larger, data={})


def _larger(template: Template, factor: float, generated: float) -> Template:
    return Template(
        factor * template.nominal,
        factor**2 / generated * template.variance,
        {name: factor * side for name, side in template.plus.items()},
        {name: factor * side for name, side in template.minus.items()},
        {pair: factor * piece for pair, piece in template.quadratic.items()},
        None if template.moments is None else factor**2 / generated * template.moments,
    )
