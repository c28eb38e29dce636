"""Templates of a study: every component generated, reconstructed, selected and filled with all its variations."""

from __future__ import annotations

import time
from collections.abc import Callable, Iterator, Mapping, Sequence
from dataclasses import dataclass
from functools import partial
from importlib.metadata import version

import numpy as np
import numpy.typing as npt
from semitau.core import engine
from semitau.core.templates import Template, TemplateSet

from .binning import cut_names
from .chunk_tasks import (
    Bench,
    Filled,
    Task,
    background_stream,
    background_tasks,
    channel_columns,
    channel_stream,
    channel_tasks,
    make_bench,
)
from .component_plan import ChannelPlan, plan_channels
from .cut_flow import BEFORE_CATEGORIES, CutFlow, step_names
from .fit_components import components_and_parameters, template_categories, template_nuisances
from .shapes import ShapeSampler
from .study import StudyConfig
from .study_components import Background
from .variations import Side, background_factors, check_efficiencies

Floats = npt.NDArray[np.float64]
Report = Callable[[str, int, int | None], None]
"""Called as report(what, done, total) from the calling thread."""

NEGLIGIBLE = 1e-6
"""A variation that changes no bin of a template by this share is left out of it."""


@dataclass(frozen=True, eq=False)
class Build:
    """Templates, the cut flow behind them, generated events, and timing: seconds of "wall" clock and of "kernels"
    (threads added up)."""

    templates: TemplateSet
    cut_flow: CutFlow
    events: int
    timing: Mapping[str, float]


@dataclass(frozen=True, eq=False)
class Part:
    """One source of a component: a decay chain, or a background in one category.

    weight : expected events that each generated one counts. columns : sides in the histogram after the nominal column.
    factors : sides that are constant weights by category. tasks : makes its chunks.
    """

    component: str
    weight: float
    events: int
    columns: Sequence[Side]
    factors: Mapping[Side, Floats]
    tasks: Callable[[], Iterator[Task]]


def build_templates(study: StudyConfig, workers: int | None = None, report: Report | None = None) -> Build:
    """Templates of all components in all categories, with all variations.

    workers : threads, None for all cores; the result is the same to the last bit for any number.
    report : called with the component at work, done and all generated events.

    Raises
    ------
    InputError : a cut removes everything, a component has no events, a variation passes its limits, a file of a
        background is not what it should be.
    """
    start = time.perf_counter()
    check_efficiencies(study)
    bench = make_bench(study, variations=True)
    parts = [*_channel_parts(study, bench), *_background_parts(study, bench)]
    components, parameters = components_and_parameters(study)
    sums = {component.name: ComponentSums(bench) for component in components}
    total, done, seconds = sum(part.events for part in parts), 0, 0.0
    tasks = (task for part in parts for task in part.tasks())
    results = engine.run(tasks, workers)
    for part in parts:
        whole = PartSums(bench, 1 + len(part.columns))
        while whole.events < part.events:
            filled = next(results)
            whole.add(filled)
            done += filled.events
            seconds += filled.seconds
            if report is not None:
                report(part.component, done, total)
        sums[part.component].add(part, whole)
    flow = _cut_flow(study, sums)
    flow.check()
    templates = TemplateSet(
        categories=template_categories(study),
        components=components,
        parameters=parameters,
        nuisances=template_nuisances(study),
        templates=_templates(study, sums),
        provenance=provenance(study),
    )
    return Build(templates, flow, done, {"wall": time.perf_counter() - start, "kernels": seconds})


def provenance(study: StudyConfig) -> dict[str, object]:
    """Where templates come from, as the template file keeps it."""
    return {
        "study": study.text,
        "study_name": study.study.name,
        "study_sha256": study.digest,
        "seed": study.study.seed,
        "versions": {"semitau": version("semitau"), "numpy": np.__version__},
    }


def _channel_parts(study: StudyConfig, bench: Bench) -> Iterator[Part]:
    for plan in plan_channels(study):
        yield Part(
            component=plan.component,
            weight=plan.weight,
            events=plan.events,
            columns=channel_columns(plan, bench),
            factors=plan.variations.factors,
            tasks=partial(_tasks_of_channel, study, bench, plan),
        )


def _tasks_of_channel(study: StudyConfig, bench: Bench, plan: ChannelPlan) -> Iterator[Task]:
    return channel_tasks(plan, bench, channel_stream(study, "templates", plan), plan.events)


def _background_parts(study: StudyConfig, bench: Bench) -> Iterator[Part]:
    for background in study.backgrounds:
        sampler = ShapeSampler(background, study)
        for category, share in background.events_in.items():
            events = max(share, 1)
            yield Part(
                component=background.name,
                weight=background.expected[category] / events,
                events=events,
                columns=(),
                factors=background_factors(study, background.misidentified),
                tasks=partial(_tasks_of_background, study, bench, background, sampler, category, events),
            )


def _tasks_of_background(
    study: StudyConfig, bench: Bench, background: Background, sampler: ShapeSampler, category: str, events: int
) -> Iterator[Task]:
    stream = background_stream(study, "templates", background, category)
    return background_tasks(sampler, background, bench, category, stream, events)


class PartSums:
    """Chunks of one part added up, in their order."""

    def __init__(self, bench: Bench, columns: int) -> None:
        self.events = 0
        self.found = np.zeros(len(BEFORE_CATEGORIES) - 1, dtype=np.int64)
        self.flow = np.zeros(bench.shape, dtype=np.int64)
        self.histogram = np.zeros((bench.bins, columns))

    def add(self, filled: Filled) -> None:
        self.events += filled.events
        self.found += filled.found
        self.flow += filled.flow
        self.histogram += filled.histogram


class ComponentSums:
    """Weighted sums of the parts of one component, over all bins of all categories."""

    def __init__(self, bench: Bench) -> None:
        self.bench = bench
        steps = len(BEFORE_CATEGORIES) + bench.shape[0]
        self.nominal = np.zeros(bench.bins)
        self.variance = np.zeros(bench.bins)
        self.sides: dict[Side, Floats] = {}
        self.expected = np.zeros(steps)
        self.generated = np.zeros(steps, dtype=np.int64)
        self.by_category = np.zeros((steps, bench.shape[1]))
        sizes = [int(np.prod(category.shape)) for category in bench.categories]
        self._category_of_bin = np.repeat(np.arange(len(sizes)), sizes)

    def add(self, part: Part, whole: PartSums) -> None:
        nominal = part.weight * whole.histogram[:, 0]
        columns = {side: part.weight * whole.histogram[:, 1 + k] for k, side in enumerate(part.columns)}
        columns |= {side: nominal * factors[self._category_of_bin] for side, factors in part.factors.items()}
        # A side that did not act so far has the nominal contents, and one that does not act here goes on with them.
        for side in columns:
            self.sides.setdefault(side, self.nominal.copy())
        for side, contents in self.sides.items():
            contents += columns.get(side, nominal)
        self.nominal += nominal
        self.variance += part.weight**2 * whole.histogram[:, 0]
        generated = np.concatenate([[whole.events], whole.found, whole.flow.sum(axis=1)])
        self.generated += generated
        self.expected += part.weight * generated
        self.by_category[len(BEFORE_CATEGORIES) :] += part.weight * whole.flow


def _cut_flow(study: StudyConfig, sums: Mapping[str, ComponentSums]) -> CutFlow:
    return CutFlow(
        steps=step_names(cut_names(study.categories)),
        components=tuple(sums),
        categories=tuple(category.name for category in study.categories),
        events=np.stack([part.expected for part in sums.values()], axis=-1),
        generated=np.stack([part.generated for part in sums.values()], axis=-1),
        by_category=np.stack([part.by_category for part in sums.values()], axis=-1),
    )


def _templates(study: StudyConfig, sums: Mapping[str, ComponentSums]) -> dict[tuple[str, str], Template]:
    templates = {}
    first = 0
    for category in study.categories:
        size = int(np.prod(category.shape))
        here = slice(first, first + size)
        first += size
        for name, component in sums.items():
            nominal = component.nominal[here]
            sides = {side: contents[here] for side, contents in component.sides.items()}
            acting = {variation for (variation, _), contents in sides.items() if _differs(contents, nominal)}
            if nominal.any() or acting:
                templates[category.name, name] = Template(
                    nominal.reshape(category.shape),
                    component.variance[here].reshape(category.shape),
                    {v: sides[v, 1].reshape(category.shape) for v, sign in sides if sign == 1 and v in acting},
                    {v: sides[v, -1].reshape(category.shape) for v, sign in sides if sign == -1 and v in acting},
                )
    return templates


def _differs(contents: Floats, nominal: Floats) -> bool:
    return bool(np.any(np.abs(contents - nominal) > NEGLIGIBLE * np.abs(nominal)))
