"""Writing and reading template files: the study's own, and one of the size of a whole analysis."""

from __future__ import annotations

import tempfile
from pathlib import Path

import numpy as np
from semitau.core.template_file import read_templates, write_templates
from semitau.core.templates import Category, Component, Nuisance, Observable, ScaleParameter, Template, TemplateSet

from .figures import Figure
from .timing import interleaved


def whole_analysis() -> TemplateSet:
    """8 categories of 300 bins, 11 components, 15 variations with two sides that act everywhere: 2728 histograms."""
    random = np.random.default_rng(1)
    axes = [Observable(name, name, "", tuple(np.linspace(0, 1, bins + 1))) for name, bins in (("mm2", 25), ("el", 12))]
    categories = tuple(Category(f"category{i}", "", tuple(axes)) for i in range(8))
    components = tuple(Component(f"component{i}", "", "signal", ("R",)) for i in range(11))
    nuisances = tuple(Nuisance(f"nuisance{i}", "", "") for i in range(15))

    def template() -> Template:
        nominal = random.gamma(2.0, 5.0, (25, 12))
        plus, minus = (
            {nuisance.name: nominal * random.normal(1.0, 0.05, nominal.shape) for nuisance in nuisances}
            for _ in range(2)
        )
        return Template(nominal, nominal / 10, plus, minus)

    templates = {(category.name, component.name): template() for category in categories for component in components}
    return TemplateSet(categories, components, (ScaleParameter("R", "", "ratio", 0.3),), nuisances, templates)


def file_figures(templates: TemplateSet, repetitions: int) -> list[Figure]:
    figures = []
    for label, content in {"of the study": templates, "of a whole analysis": whole_analysis()}.items():
        histograms = sum(1 + 2 * len(template.plus) for template in content.templates.values())
        with tempfile.TemporaryDirectory() as folder:
            path = Path(folder) / "templates.root"
            timings = interleaved(
                {"write": lambda: write_templates(content, path), "read": lambda: read_templates(path)},  # noqa: B023
                repetitions,
            )
            note = f"{histograms} histograms, {path.stat().st_size / 1e6:.1f} MB"
        figures.append(Figure(f"template file {label}: write", timings["write"].wall, "s", note=note))
        figures.append(Figure(f"template file {label}: read and check", timings["read"].wall, "s"))
    return figures
