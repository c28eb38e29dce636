"""Template sets that the tests of the core share: a small fixed one, and hypothesis strategies for any."""

from __future__ import annotations

import numpy as np
from hypothesis import strategies as st
from hypothesis.extra.numpy import arrays
from semitau.core.templates import Category, Component, Nuisance, Observable, ScaleParameter, Template, TemplateSet

MM2 = Observable("mm2", "m²", "GeV²", (-1.0, 0.1, 1.0, 9.0))
EL = Observable("el", "E", "GeV", (0.2, 1.0, 2.5))
Q2 = Observable("q2", "q²", "", (4.0, 6.0, 8.0, 11.0))


def sample() -> TemplateSet:
    """One, two and three axes, a variation on one side of the set, a missing pair, data in one category."""
    categories = (
        Category("one", "eins", (MM2,)),
        Category("two", "D⁰ μ", (MM2, EL)),
        Category("three", "", (MM2, EL, Q2)),
    )
    components = (
        Component("signal", "B → D τ ν", "signal", ("R_D", "yield_light")),
        Component("light", "B → D ℓ ν", "normalisation", ("yield_light",)),
    )
    parameters = (
        ScaleParameter("R_D", "R(D)", "ratio", 0.299),
        ScaleParameter("yield_light", "yield", "yield", 1.0, 0.25),
    )
    nuisances = (Nuisance("tag", "tag resolution", "detector"), Nuisance("rho2", "ρ²", "form factors"))
    templates = {}
    for number, category in enumerate(categories):
        bins = np.arange(1.0, 1 + np.prod(category.shape)).reshape(category.shape) / 3
        templates[category.name, "signal"] = Template(bins, bins / 7)
        if number:
            sides = {"tag": bins * 1.1, "rho2": bins - 0.1}, {"tag": bins * 0.9, "rho2": bins + 0.1}
            templates[category.name, "light"] = Template(bins * 5, bins, *sides)
    provenance = {"seed": 20261201, "study": "name = 'Marlow'\n", "versions": {"numpy": "2"}}
    data = {"two": np.array([[1.0, 0.0], [2.0, 5.0], [12.0, 3.0]])}
    return TemplateSet(categories, components, parameters, nuisances, templates, data, provenance)


names = st.text("abcXYZ019_", min_size=1, max_size=6).filter(lambda name: name not in {"data", "meta"})
texts = st.text(st.characters(exclude_categories=["Cs"]), max_size=8)
finite = st.floats(allow_nan=False, allow_infinity=False)
edge_lists = st.lists(st.floats(-1e6, 1e6), min_size=2, max_size=5, unique=True).map(
    lambda edges: tuple(sorted({round(edge, 3) for edge in edges}))
)
observables = st.builds(Observable, names, texts, texts, edge_lists.filter(lambda edges: len(edges) >= 2))
categories = st.builds(
    Category, names, texts, st.lists(observables, min_size=1, max_size=3, unique_by=lambda o: o.name).map(tuple)
)


@st.composite
def template_sets(draw: st.DrawFn) -> TemplateSet:
    """Any valid template set, with extreme numbers and any text in its labels."""
    chosen = draw(st.lists(categories, min_size=1, max_size=3, unique_by=lambda category: category.name))
    keys = draw(st.lists(names, min_size=4, max_size=6, unique=True))
    nuisances = tuple(Nuisance(name, draw(texts), draw(texts)) for name in keys[3:])
    positive = st.floats(1e-300, 1e300)
    parameters = (
        ScaleParameter(keys[1], draw(texts), "ratio", draw(positive), draw(st.none() | positive)),
        ScaleParameter(keys[2], draw(texts), "yield", 1.0),
    )
    components = (
        Component(keys[0], draw(texts), "signal", (keys[1], keys[2])),
        Component(keys[1], draw(texts), "background", ()),
    )
    templates, data = {}, {}
    for category in chosen:
        numbers = arrays(np.float64, category.shape, elements=finite)
        counts = arrays(np.float64, category.shape, elements=st.floats(0, 1e300))
        for component in components:
            if draw(st.booleans()):
                acting = draw(st.sets(st.sampled_from([nuisance.name for nuisance in nuisances])))
                plus, minus = ({name: draw(numbers) for name in acting} for _ in range(2))
                templates[category.name, component.name] = Template(draw(numbers), draw(counts), plus, minus)
        if draw(st.booleans()):
            data[category.name] = draw(counts)
    provenance = draw(st.dictionaries(texts, st.none() | st.booleans() | finite | texts | st.lists(texts, max_size=2)))
    return TemplateSet(tuple(chosen), components, parameters, nuisances, templates, data, provenance)


def assert_same(first: TemplateSet, second: TemplateSet) -> None:
    """Equal to the last bit, signs of zeros included."""
    for name in ("categories", "components", "parameters", "nuisances"):
        assert getattr(first, name) == getattr(second, name)
    assert dict(first.provenance) == dict(second.provenance)
    assert first.data.keys() == second.data.keys()
    assert first.templates.keys() == second.templates.keys()
    for category, counts in first.data.items():
        assert counts.tobytes() == second.data[category].tobytes()
    for key, template in first.templates.items():
        other = second.templates[key]
        assert template.nominal.shape == other.nominal.shape
        assert template.nominal.tobytes() == other.nominal.tobytes()
        assert template.variance.tobytes() == other.variance.tobytes()
        for side in ("plus", "minus"):
            arrays_of = getattr(template, side), getattr(other, side)
            assert arrays_of[0].keys() == arrays_of[1].keys()
            for name in arrays_of[0]:
                assert arrays_of[0][name].tobytes() == arrays_of[1][name].tobytes()
