"""How the forms of the likelihood cover when templates are finite: `python -m benchmarks.finite_templates [toys]`.

Nothing of the fit is used to make the toys. In each, every template is drawn anew, event by event where weights vary,
with the variance that this sample shows; the counts are Poisson numbers of the true expectation; the centre of each
constraint fluctuates. Then all forms fit the same toy. Prints the table of docs/statistics.md.
"""

from __future__ import annotations

import sys
from collections.abc import Callable, Iterator
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray
from semitau.core.templates import (
    Category,
    Component,
    Nuisance,
    Observable,
    ScaleParameter,
    Template,
    TemplateSet,
)
from semitau.fit import Data, Model, maximise
from semitau.fit.toys.pulls import Summary, summarise

Floats = NDArray[np.float64]
FORMS = ("none", "light", "approximate", "exact")


@dataclass(frozen=True)
class World:
    """True templates, and how many events are generated for each expected one.

    generated : component -> generated events over expected ones. spread : weights are drawn from an exponential law
    instead of being all the same, which doubles the variance.
    """

    name: str
    templates: TemplateSet
    generated: dict[str, float]
    spread: bool = False

    def sample(self, random: np.random.Generator) -> TemplateSet:
        """The templates as one set of generated events shows them."""
        drawn = {}
        for (category, name), true in self.templates.templates.items():
            weight = 1.0 / self.generated[name]
            number = random.poisson(true.nominal / weight)
            if self.spread:  # the sum of n exponential weights, and of their squares
                flat = [random.exponential(weight, size=n) for n in number.ravel()]
                contents = np.array([part.sum() for part in flat]).reshape(number.shape)
                variance = np.array([(part**2).sum() for part in flat]).reshape(number.shape)
            else:
                contents, variance = weight * number, weight**2 * number
            share = contents / np.where(true.nominal > 0, true.nominal, 1.0)
            plus, minus = ({k: side[k] * share for k in side} for side in (true.plus, true.minus))
            drawn[category, name] = Template(contents, variance, plus, minus)
        return replace(self.templates, templates=drawn)


def worlds() -> Iterator[World]:
    """Eight of them, from rich templates to poor ones. All contents are invented."""
    analysis = two_ratios(1.0)
    names = [component.name for component in analysis.components]
    yield World("two ratios, 10 generated for each expected", analysis, dict.fromkeys(names, 10.0))
    yield World("two ratios, 1 for each", analysis, dict.fromkeys(names, 1.0))
    yield World("two ratios, 1 for each, weights spread", analysis, dict.fromkeys(names, 1.0), spread=True)
    yield World("two ratios, background 0.2 for each", analysis, dict.fromkeys(names, 2.0) | {"other": 0.2})
    yield World("two ratios, a tenth of the data, 3 for each", two_ratios(0.1), dict.fromkeys(names, 3.0))
    yield World("peak on a slope, 5 for each", peak(1000, 20), {"signal": 5.0, "rest": 5.0})
    yield World("peak on a slope, 0.5 for each", peak(1000, 20), {"signal": 0.5, "rest": 0.5})
    yield World("peak on a slope, fine bins, 0.5 for each", peak(2000, 80), {"signal": 0.5, "rest": 0.5})


def peak(events: float, bins: int) -> TemplateSet:
    """A Gaussian signal, a fifth of all, on an exponential background."""
    x = (np.arange(bins) + 0.5) / bins
    shapes = {"signal": np.exp(-0.5 * ((x - 0.5) / 0.12) ** 2), "rest": np.exp(-1.5 * x)}
    sizes = {"signal": 0.2 * events, "rest": 0.8 * events}
    axis = Observable("x", "x", "", tuple(np.linspace(0, 1, bins + 1)))
    return TemplateSet(
        (Category("all", "all", (axis,)),),
        (
            Component("signal", "signal", "signal", ("R_D",)),
            Component("rest", "rest", "background", ("yield_rest",)),
        ),
        (ScaleParameter("R_D", "R(D)", "ratio", 0.3), ScaleParameter("yield_rest", "rest", "yield", 1.0)),
        (),
        {("all", name): Template(sizes[name] * s / s.sum(), np.zeros(bins)) for name, s in shapes.items()},
    )


def two_ratios(factor: float) -> TemplateSet:
    """Two categories with both ratios, light yields, a constrained background and two nuisances."""
    bins = 16
    x = (np.arange(bins) + 0.5) / bins
    axis = Observable("x", "x", "", tuple(np.linspace(0, 1, bins + 1)))
    scales = {
        "D_tau": ("R_D", "yield_D_light"),
        "Dst_tau": ("R_Dst", "yield_Dst_light"),
        "D_light": ("yield_D_light",),
        "Dst_light": ("yield_Dst_light",),
        "other": ("yield_other",),
    }
    events = {"D_tau": (150, 10), "Dst_tau": (90, 130), "D_light": (900, 40), "Dst_light": (700, 1100)}
    events["other"] = (250, 150)
    places = {"D_tau": 0.7, "Dst_tau": 0.65, "D_light": 0.15, "Dst_light": 0.25, "other": 0.5}
    widths = {"D_tau": 0.16, "Dst_tau": 0.16, "D_light": 0.1, "Dst_light": 0.12, "other": 0.35}
    templates = {}
    for name in scales:
        for number, category in enumerate(("D0", "Dst")):
            shape = np.exp(-0.5 * ((x - places[name]) / widths[name]) ** 2) + 0.02
            nominal = factor * events[name][number] * shape / shape.sum()
            tilt = {"tag": 0.05 * np.ones(bins), "slope": 0.1 * (x - 0.5)}
            plus = {key: nominal * (1 + t) for key, t in tilt.items()}
            minus = {key: nominal * (1 - t) for key, t in tilt.items()}
            templates[category, name] = Template(nominal, np.zeros(bins), plus, minus)
    ratios = (ScaleParameter("R_D", "R(D)", "ratio", 0.3), ScaleParameter("R_Dst", "R(D*)", "ratio", 0.25))
    yields = [ScaleParameter(f"yield_{n}", n, "yield", 1.0, 0.2 if n == "other" else None) for n in list(scales)[2:]]
    return TemplateSet(
        tuple(Category(name, name, (axis,)) for name in ("D0", "Dst")),
        tuple(Component(name, name, "background", scales[name]) for name in scales),
        (*ratios, *yields),
        tuple(Nuisance(name, name, "shape") for name in ("tag", "slope")),
        templates,
    )


def measure(world: World, toys: int, seed: int = 1) -> dict[str, Summary]:
    """Form of the likelihood -> what the toys say of R_D."""
    random = np.random.default_rng([seed, toys])
    truth = Model(world.templates, template_statistics=False)
    expected, injected = truth.expected_counts(), float(truth.injected[truth.index("R_D")])
    found: dict[str, list[tuple[float, float]]] = {form: [] for form in FORMS}
    sigma = np.sqrt([0.0 if p.constraint is None else p.constraint**2 for p in truth.parameters])
    for _ in range(toys):
        sample = world.sample(random)
        counts = random.poisson(expected).astype(float)
        centres = truth.injected + sigma * random.normal(size=sigma.size)
        for form in FORMS:
            model = model_of(sample, form)
            seen = np.where(model.layout.bin_lane >= 0, counts, 0.0)  # a bin without any template is no bin of the fit
            result = maximise(model, Data(seen, centres, np.ones(model.bins)))
            if result.valid:
                found[form].append((result.value("R_D"), result.error("R_D")))
    out = {}
    for form, pairs in found.items():
        values, errors = np.array(pairs).reshape(-1, 2).T
        out[form] = summarise("R_D", injected, values, errors, toys)
    return out


def model_of(sample: TemplateSet, form: str) -> Model:
    if form == "none":
        return Model(sample, template_statistics=False)
    return Model(sample, likelihood=form)


def rows(toys: int, show: Callable[[str], None] = print) -> None:
    """The table, row by row as it gets ready."""
    show("| model | likelihood | bias / error | pull width | within 1 error (68.3%) | within 2 (95.4%) | failed |")
    show("| --- | --- | --- | --- | --- | --- | --- |")
    for world in worlds():
        for form, s in measure(world, toys).items():
            one, two = s.coverage
            show(
                f"| {world.name} | {form} | {s.bias / s.mean_error:+.2f} ± {s.bias_error / s.mean_error:.2f} "
                f"| {s.pull_width:.2f} ± {s.pull_width_error:.2f} | {one.fraction:.1%} | {two.fraction:.1%} "
                f"| {s.failures} |"
            )


if __name__ == "__main__":
    rows(int(sys.argv[1]) if len(sys.argv) > 1 else 1000)
