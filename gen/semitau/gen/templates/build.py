"""Templates of a study: every component generated, reconstructed, selected and filled with all its variations."""

from __future__ import annotations

import time
from collections.abc import Mapping, Sequence
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np
import numpy.typing as npt
from semitau.core.kept import Kept
from semitau.core.quadratic import Reweighting, pairs_of
from semitau.core.templates import Pair, Template, TemplateSet

from ..decays.form_factor_shifts import name_of
from ..study_file.study import StudyConfig
from .binning import cut_names
from .chunk_tasks import make_bench
from .component_parts import Report, component_parts
from .component_sums import ComponentSums
from .cut_flow import CutFlow, step_names
from .fit_components import components_and_parameters, template_categories, template_coefficients, template_nuisances
from .kept_sums import component_key
from .part_runs import by_component, events_kept, run_parts
from .provenance import provenance
from .variations import check_efficiencies

Floats = npt.NDArray[np.float64]
NEGLIGIBLE = 1e-6
"""A variation that changes no bin of a template by this share is left out of it."""


@dataclass(frozen=True)
class Cost:
    """Generated events of a component, and the time of its threads in seconds.

    The time is that of the middle chunk of each of its chains, so that a chunk that had to wait for the compiler does
    not count, unless the chain has no other.
    """

    events: int
    seconds: float


@dataclass(frozen=True, eq=False)
class Build:
    """Templates, the cut flow behind them, generated events, and timing: seconds of "wall" clock and of "kernels"
    (threads added up); effective events of every variation made by weights; component -> what it cost."""

    templates: TemplateSet
    cut_flow: CutFlow
    events: int
    timing: Mapping[str, float]
    reweightings: tuple[Reweighting, ...] = ()
    costs: Mapping[str, Cost] = field(default_factory=lambda: MappingProxyType({}))


def build_templates(
    study: StudyConfig,
    workers: int | None = None,
    report: Report | None = None,
    purpose: str = "templates",
    kept: Kept | None = None,
) -> Build:
    """Templates of all components in all categories, with all variations.

    workers : threads, None for all cores; the result is the same to the last bit for any number.
    report : called with the component at work, done and all generated events.
    purpose : names the random streams: another word gives events that are independent of the templates.
    kept : components that are there are not made again, and what is made is put there; same bits.

    Raises
    ------
    InputError : a cut removes everything, a component has no events, a variation passes its limits, a file of a
        background is not what it should be.
    """
    start = time.perf_counter()
    check_efficiencies(study)
    bench = make_bench(study, variations=True)
    components, parameters = components_and_parameters(study)
    sums = {component.name: ComponentSums(bench) for component in components}
    costs = {component.name: Cost(0, 0.0) for component in components}
    events, seconds = 0, 0.0
    for part, whole in run_parts(component_parts(study, bench, purpose), bench, workers, report, kept):
        sums[part.component].add(part, whole)
        events += whole.events
        seconds += whole.seconds
        before = costs[part.component]
        costs[part.component] = Cost(before.events + whole.events, before.seconds + whole.steady_seconds)
    flow = _cut_flow(study, sums)
    flow.check()
    templates = TemplateSet(
        categories=template_categories(study),
        components=components,
        parameters=parameters,
        nuisances=template_nuisances(study),
        templates=_templates(study, sums),
        provenance=provenance(study),
        coefficients=template_coefficients(study),
    )
    reweightings = tuple(found for name, part in sums.items() for found in part.reweightings(name))
    timing = {"wall": time.perf_counter() - start, "kernels": seconds}
    return Build(templates, flow, events, timing, reweightings, MappingProxyType(costs))


def component_keys(study: StudyConfig, purpose: str = "templates") -> dict[str, str]:
    """Component -> key under which `build_templates` keeps its sums; see `kept_sums`."""
    bench = make_bench(study, variations=True)
    parts = component_parts(study, bench, purpose)
    return {name: component_key(of_one, bench) for name, of_one in by_component(parts).items()}


def template_events_kept(
    study: StudyConfig, kept: Kept | None, purpose: str = "templates"
) -> dict[str, tuple[int, int]]:
    """Component -> events that `build_templates` would find kept, and all of its events."""
    bench = make_bench(study, variations=True)
    return events_kept(component_parts(study, bench, purpose), bench, kept)


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
    pairs = pairs_of([name_of(one) for one in study.coefficients]) if study.coefficients else ()
    for place, category in enumerate(study.categories):
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
                    *_quadratic(component, pairs, here, place, category.shape),
                )
    return templates


def _quadratic(
    component: ComponentSums, pairs: Sequence[Pair], here: slice, place: int, shape: tuple[int, ...]
) -> tuple[dict[Pair, Floats], Floats | None]:
    """Quadratic pieces and moments of a component in one category; none where it does not follow coefficients."""
    if not (pairs and component.follows and component.nominal[here].any()):
        return {}, None
    pieces = component.pieces[here].T.reshape(-1, *shape)
    return {pair: piece for pair, piece in zip(pairs, pieces, strict=True) if piece.any()}, component.moments[place]


def _differs(contents: Floats, nominal: Floats) -> bool:
    return bool(np.any(np.abs(contents - nominal) > NEGLIGIBLE * np.abs(nominal)))
