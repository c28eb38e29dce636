"""Projections and their uncertainty against closed forms and plain sums."""

from __future__ import annotations

import numpy as np
import pytest
from semitau.core.templates import Category, Component, Observable, ScaleParameter, Template, TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.study.parts.fit_parts import component_parts
from semitau.study.parts.projecting import enhanced_starts, projections


def test_uncertainty_of_a_counting_experiment() -> None:
    """One free yield fitted to N events in all: the fitted sum is N with error root N (Poisson, closed form), and each
    bin moves with the yield: its error is its share of that."""
    shape = np.array([100.0, 300.0, 200.0])
    templates = TemplateSet(
        categories=(Category("all", "all", (Observable("x", "x", "", (0, 1, 2, 3)),)),),
        components=(Component("signal", "signal", "signal", ("yield_signal",)),),
        parameters=(ScaleParameter("yield_signal", "yield", "yield", 1.0),),
        nuisances=(),
        templates={("all", "signal"): Template(shape, np.zeros(3))},
    )
    model = Model(templates, template_statistics=False)
    data = model.data({"all": [130.0, 270.0, 229.0]})
    (projection,) = projections(model, maximise(model, data), data)
    total = 130.0 + 270.0 + 229.0
    assert projection.components[0].counts == pytest.approx(shape / 600 * total, rel=1e-6)
    assert projection.uncertainty == pytest.approx(shape / 600 * np.sqrt(total), rel=1e-4)
    assert projection.data == (130.0, 270.0, 229.0)
    assert projection.region == ""


def test_projections_are_sums(templates: TemplateSet) -> None:
    """Brute force: add up data and contributions bin by bin."""
    model = Model(templates)
    data = model.data(templates)
    fitted = maximise(model, data)
    contributions = model.contributions(fitted.values)
    for projection in projections(model, fitted, data):
        counts = templates.data[projection.category]
        start = counts.shape[0] - (len(projection.edges) - 1) if projection.observable == "mm2" else None
        if projection.region and start is None:
            start = next(
                counts.shape[0] - len(p.edges) + 1
                for p in projections(model, fitted, data)
                if p.category == projection.category and p.region and p.observable == "mm2"
            )
        kept = slice(start if projection.region else 0, None)
        axis = 0 if projection.observable == "mm2" else 1
        for i, value in enumerate(projection.data):
            chosen = counts[kept][i, :] if axis == 0 else counts[kept][:, i]
            assert value == pytest.approx(sum(chosen.tolist()))
        for part in projection.components:
            contents = contributions[projection.category, part.component][kept]
            assert part.counts == pytest.approx(contents.sum(axis=1 - axis), abs=1e-12)


def test_region_has_the_best_signal_over_root_of_all(templates: TemplateSet) -> None:
    """Brute force over all edges."""
    contributions = Model(templates).contributions()
    starts = enhanced_starts(templates, contributions)
    assert set(starts) == {category.name for category in templates.categories}
    best, found = -1.0, -1
    for start in range(12):
        signal = sum(c[start:].sum() for (_, name), c in contributions.items() if name.endswith("_tau"))
        everything = sum(c[start:].sum() for c in contributions.values())
        if signal / np.sqrt(everything) > best:
            best, found = signal / np.sqrt(everything), start
    assert set(starts.values()) == {found}
    assert found > 0


def test_without_the_missing_mass_there_is_no_region() -> None:
    templates = TemplateSet(
        categories=(Category("all", "all", (Observable("q2", "q²", "GeV²", (0, 1, 2, 3)),)),),
        components=(Component("signal", "signal", "signal", ("R_D",)),),
        parameters=(ScaleParameter("R_D", "R(D)", "ratio", 0.3),),
        nuisances=(),
        templates={("all", "signal"): Template(np.array([1.0, 2.0, 300.0]), np.zeros(3))},
    )
    assert enhanced_starts(templates, Model(templates).contributions()) == {}


def test_components_are_stacked_by_role(templates: TemplateSet) -> None:
    roles = [component.role for component in component_parts(templates)]
    assert roles == sorted(roles, key=["background", "feed-down", "normalisation", "signal"].index)
