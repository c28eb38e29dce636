"""Model problems for the fit, one bin to real size. Contents are invented; answers come from outside the project."""

from __future__ import annotations

import os

import numpy as np
from semitau.core.templates import (
    Category,
    Coefficient,
    Component,
    Nuisance,
    Observable,
    ScaleParameter,
    Template,
    TemplateSet,
)

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
"""Of everything random in these tests; statistical ones state how often another seed may fail."""


def axes(name: str, *bins: int) -> Category:
    observables = tuple(
        Observable(f"x{number}", f"x{number}", "", tuple(float(edge) for edge in range(count + 1)))
        for number, count in enumerate(bins)
    )
    return Category(name, name, observables)


def one_bin(signal: float = 40.0, background: float = 60.0, *, variance: float = 0.0) -> TemplateSet:
    """One bin, one free ratio, a fixed background: everything has a closed form."""
    return TemplateSet(
        categories=(axes("only", 1),),
        components=(Component("signal", "signal", "signal", ("R_D",)), Component("rest", "rest", "background", ())),
        parameters=(ScaleParameter("R_D", "R(D)", "ratio", 0.3),),
        nuisances=(),
        templates={
            ("only", "signal"): Template(np.array([signal]), np.array([variance])),
            ("only", "rest"): Template(np.array([background]), np.array([0.0])),
        },
    )


def linear(scale: float = 1.0) -> TemplateSet:
    """Three free yields in twelve bins, exact templates: at large `scale` weighted least squares is the answer."""
    x = (np.arange(12) + 0.5) / 12
    shapes = {"a": np.exp(-3 * x), "b": np.exp(-0.5 * ((x - 0.4) / 0.12) ** 2), "c": 0.3 + 0.5 * x}
    return TemplateSet(
        categories=(axes("wide", 12),),
        components=tuple(Component(name, name, "background", (f"yield_{name}",)) for name in shapes),
        parameters=tuple(ScaleParameter(f"yield_{name}", name, "yield", 1.0) for name in shapes),
        nuisances=(),
        templates={("wide", name): Template(scale * shape, np.zeros(12)) for name, shape in shapes.items()},
    )


def small(*, factor: float = 1.0, sparse: bool = False, variance: float = 1.0) -> TemplateSet:
    """Two categories, two ratios that multiply light yields, a constrained background, three nuisances.

    factor : of all expected events; variance : of the templates, times their usual one.
    """
    rng = np.random.default_rng(4)
    factor *= 0.04 if sparse else 1.0
    categories = (axes("D0", 9), axes("Dst", 4, 3))
    components = (
        Component("D_tau", "D tau", "signal", ("R_D", "yield_D_light")),
        Component("Dst_tau", "D* tau", "signal", ("R_Dst", "yield_Dst_light")),
        Component("D_light", "D light", "normalisation", ("yield_D_light",)),
        Component("Dst_light", "D* light", "normalisation", ("yield_Dst_light",)),
        Component("other", "other", "background", ("yield_other",)),
    )
    parameters = (
        ScaleParameter("R_D", "R(D)", "ratio", 0.299),
        ScaleParameter("R_Dst", "R(D*)", "ratio", 0.254),
        ScaleParameter("yield_D_light", "D light", "yield", 1.0),
        ScaleParameter("yield_Dst_light", "D* light", "yield", 1.0),
        ScaleParameter("yield_other", "other", "yield", 1.0, 0.2),
    )
    nuisances = (
        Nuisance("slow_pion", "slow pion", "efficiency"),
        Nuisance("lepton_id", "lepton identification", "efficiency"),
        Nuisance("R0", "R0(1)", "form factors"),
    )
    means = {
        "D_tau": (0.75, 0.3),
        "Dst_tau": (0.7, 0.7),
        "D_light": (0.15, 0.1),
        "Dst_light": (0.2, 0.2),
        "other": (0.5, 0.5),
    }
    events = {"D_tau": (90, 10), "Dst_tau": (70, 90), "D_light": (700, 60), "Dst_light": (600, 900), "other": (150, 80)}
    templates = {}
    for component in components:
        for number, category in enumerate(categories):
            size = int(np.prod(category.shape))
            x = (np.arange(size) + 0.5) / size
            shape = np.exp(-0.5 * ((x - means[component.name][number]) / 0.18) ** 2) + 0.02
            nominal = factor * events[component.name][number] * shape / shape.sum()
            plus, minus = {}, {}
            for index, nuisance in enumerate(nuisances):
                if (index + len(component.name)) % 3 == 0:
                    continue
                tilt = 0.12 * (x - 0.4) * (1 + index) + 0.02 * rng.normal(size=size)
                plus[nuisance.name] = (nominal * (1 + tilt)).reshape(category.shape)
                minus[nuisance.name] = (nominal * (1 - 0.8 * tilt + 0.5 * tilt**2)).reshape(category.shape)
            templates[category.name, component.name] = Template(
                nominal.reshape(category.shape),
                (variance * nominal * (0.08 if component.name != "other" else 0.3)).reshape(category.shape),
                plus,
                minus,
            )
    return TemplateSet(categories, components, parameters, nuisances, templates)


def real_size(*, events: float = 1.0, seed: int = 1) -> TemplateSet:
    """Eight categories of 72 bins, eleven components, fourteen nuisances, as the Marlow study has."""
    rng = np.random.default_rng(seed)
    categories = tuple(axes(f"c{number}", 12, 6) for number in range(8))
    names = ["D_tau", "Dst_tau", "D_light", "Dst_light", "Dss_light", "Dss_tau", "b1", "b2", "b3", "b4", "b5"]
    scales = {
        "D_tau": ("R_D", "yield_D_light"),
        "Dst_tau": ("R_Dst", "yield_Dst_light"),
        **{name: (f"yield_{name}",) for name in names[2:]},
    }
    parameters = (
        ScaleParameter("R_D", "R(D)", "ratio", 0.299),
        ScaleParameter("R_Dst", "R(D*)", "ratio", 0.254),
        *(
            ScaleParameter(f"yield_{name}", name, "yield", 1.0, 0.2 if name in ("Dss_tau", "b3", "b4", "b5") else None)
            for name in names[2:]
        ),
    )
    nuisances = tuple(Nuisance(f"n{number}", f"n{number}", f"group{number % 4}") for number in range(14))
    sizes = [60, 60, 700, 900, 120, 15, 100, 60, 40, 30, 30]
    grid = np.stack(np.meshgrid(np.linspace(0, 1, 12), np.linspace(0, 1, 6), indexing="ij"))
    templates = {}
    for name, size in zip(names, sizes, strict=True):
        centre, width = rng.uniform(0, 1, 2), rng.uniform(0.1, 0.5, 2)
        for category in categories:
            middle = centre + rng.normal(scale=0.1, size=2)
            shape = np.exp(-0.5 * (((grid.T - middle) / width) ** 2).sum(-1)).T + 0.01
            nominal = events * size * rng.uniform(0.4, 1.6) * shape / shape.sum()
            plus, minus = {}, {}
            for nuisance in nuisances:
                slope = rng.normal(scale=0.1, size=2)
                tilt = ((grid.T - 0.5) * slope).sum(-1).T + rng.normal(scale=0.01)
                plus[nuisance.name] = nominal * (1 + tilt)
                minus[nuisance.name] = nominal * (1 - tilt + 0.3 * tilt**2)
            templates[category.name, name] = Template(nominal, 0.05 * nominal, plus, minus)
    return TemplateSet(
        categories, tuple(Component(n, n, "background", scales[n]) for n in names), parameters, nuisances, templates
    )


def following(*, events: float = 1.0, at: tuple[float, float, float] = (0.0, 0.0, 0.0)) -> TemplateSet:
    """`small` with tau templates that are quadratic functions of three coefficients, and ratios that follow.

    In each bin the weight is |1 + a SR + b T|² + (b Im_T)² with a, b that vary over the bins; R(c) is the same with
    the mean of the weights over the decays. at : the injected point.
    """
    plain = small(factor=events, variance=0.02)
    names = ("SR", "T", "Im_T")
    point = dict(zip(("one", *names), (1.0, *at), strict=True))
    strengths = {"D_tau": (0.9, 0.3), "Dst_tau": (0.12, -2.4)}
    templates, rates = dict(plain.templates), {}
    for component, (scalar, tensor) in strengths.items():
        rates[component] = _weight_pieces(np.array(scalar), np.array(tensor), 0.15)
        for category in plain.categories:
            here = plain.templates[category.name, component]
            x = np.linspace(0.0, 1.0, here.nominal.size).reshape(here.nominal.shape)
            weights = _weight_pieces(scalar * (0.4 + 1.2 * x), tensor * (1.3 - 0.8 * x), 0.1)
            pieces = {pair: here.nominal * weight for pair, weight in weights.items()}
            nominal = sum(point[a] * point[b] * piece for (a, b), piece in pieces.items())
            grown = nominal / here.nominal
            templates[category.name, component] = Template(
                nominal,
                here.variance * grown,
                {name: side * grown for name, side in here.plus.items()},
                {name: side * grown for name, side in here.minus.items()},
                pieces,
            )
    parameters = []
    for parameter in plain.parameters:
        form = rates.get({"R_D": "D_tau", "R_Dst": "Dst_tau"}.get(parameter.name, ""))
        if form is not None:
            rate = tuple((a, b, float(parameter.injected * piece)) for (a, b), piece in form.items())
            injected = sum(point[a] * point[b] * piece for a, b, piece in rate)
            parameter = ScaleParameter(parameter.name, parameter.label, "ratio", injected, None, rate)
        parameters.append(parameter)
    coefficients = tuple(Coefficient(name, name, point[name], 4.0 if name == "SR" else 1.0) for name in names)
    return TemplateSet(
        plain.categories, plain.components, tuple(parameters), plain.nuisances, templates, coefficients=coefficients
    )


def _weight_pieces(a: np.ndarray, b: np.ndarray, own: float) -> dict[tuple[str, str], np.ndarray]:
    """|1 + a SR + b T|² + own (SR² + T²) + (1 + own) b² Im_T² by pairs of coefficients."""
    one = np.ones_like(a)
    return {
        ("one", "one"): one,
        ("one", "SR"): 2.0 * a,
        ("one", "T"): 2.0 * b,
        ("SR", "SR"): a * a + own,
        ("SR", "T"): 2.0 * a * b,
        ("T", "T"): b * b + own,
        ("Im_T", "Im_T"): (1.0 + own) * b * b,
    }
