"""What a study will make, known before anything is generated: components, bins, variations, and what it will cost."""

from __future__ import annotations

from collections import Counter
from dataclasses import asdict, dataclass

import numpy as np
from semitau.gen.shapes.sampler import samplers
from semitau.gen.study_file.components import Mode, Yield
from semitau.gen.study_file.double_charm import DoubleCharm
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.component_plan import plan_channels
from semitau.gen.templates.variations import check_efficiencies, scenarios

from ..graph.materials import Materials
from ..graph.plan import StepPlan, study_plan
from ..graph.store import Store
from .form_factor_warnings import form_factor_warnings

BYTES_OF_LIBRARIES = 350e6
BYTES_OF_PICTURES = 3e5
BLOCKS_IN_FLIGHT = 40e6


@dataclass(frozen=True)
class ComponentOutline:
    """One component. expected : decays of the study beside a tag, before acceptance, or background events before cuts.

    yield_ : how the fit may move it: "ratio", "free", "fixed" or "± 30 %".
    """

    name: str
    label: str
    role: str
    generated: int
    expected: float
    chains: int
    yield_: str


@dataclass(frozen=True)
class StudyOutline:
    """A whole study; seconds, for what is not there yet, and bytes are rough."""

    name: str
    seed: int
    output: str
    components: tuple[ComponentOutline, ...]
    categories: tuple[tuple[str, str, int], ...]
    bins: int
    variations: dict[str, int]
    scenarios: int
    data: str
    toys: int
    seconds: float
    memory: float
    disk: float
    steps: tuple[StepPlan, ...]
    warnings: tuple[str, ...]

    def document(self) -> dict[str, object]:
        """As plain JSON values."""
        return asdict(self)


def study_outline(study: StudyConfig, workers: int, store: Store | None = None) -> StudyOutline:
    """What the study will make with this many workers. store : of its folder, with what is there already.

    Raises
    ------
    InputError : nothing is expected of a component, or a variation passes its limits.
    """
    check_efficiencies(study)
    samplers(study)  # reads the files of backgrounds, which may be foreign or damaged
    components = component_outlines(study)
    categories = tuple(
        (category.label, " × ".join(f"{name} ({len(edges) - 1})" for name, edges in category.axes.items()), bins)
        for category in study.categories
        for bins in [int(np.prod(category.shape))]
    )
    bins = sum(count for _, _, count in categories)
    extra = len(scenarios(study))
    toys = study.toys.number
    if study.toys.linearity is not None:
        toys += study.toys.linearity.number * len(study.toys.linearity.factors)
    columns = 2 + 2 * len(study.variations)
    sets = 1 + (study.fit.data.kind == "pseudo")
    steps = study_plan(Materials(study, store, workers))
    return StudyOutline(
        name=study.study.name,
        seed=study.study.seed,
        output=study.study.output,
        components=components,
        categories=categories,
        bins=bins,
        variations=dict(Counter(variation.budget_group for variation in study.variations)),
        scenarios=extra,
        data=study.fit.data.file or study.fit.data.kind,
        toys=toys,
        seconds=sum(step.seconds for step in steps),
        steps=steps,
        memory=BYTES_OF_LIBRARIES + workers * BLOCKS_IN_FLIGHT + 16.0 * bins * columns * len(components),
        warnings=form_factor_warnings(study),
        disk=sets * 8.0 * bins * columns * len(components) + 3 * BYTES_OF_PICTURES * len(categories),
    )


def component_outlines(study: StudyConfig) -> tuple[ComponentOutline, ...]:
    """All components in the order of the study file: modes, double charm, backgrounds."""
    return (*_mode_outlines(study), *_background_outlines(study))


def _mode_outlines(study: StudyConfig) -> tuple[ComponentOutline, ...]:
    plans = plan_channels(study)
    generated: tuple[Mode | DoubleCharm, ...] = (*study.modes, *study.double_charms)
    return tuple(
        ComponentOutline(
            name=mode.name,
            label=mode.label or mode.name,
            role=mode.role,
            generated=sum(plan.events for plan in mine),
            expected=sum(plan.expected for plan in mine),
            chains=len(mine),
            yield_="ratio" if isinstance(mode, Mode) and mode.scales_with else _movement(mode.yield_constraint),
        )
        for mode in generated
        for mine in [[plan for plan in plans if plan.mode == mode.name]]
    )


def _background_outlines(study: StudyConfig) -> tuple[ComponentOutline, ...]:
    return tuple(
        ComponentOutline(
            name=background.name,
            label=background.label or background.name,
            role=background.role,
            generated=background.events,
            expected=sum(background.expected.values()),
            chains=0,
            yield_=_movement(background.yield_constraint),
        )
        for background in study.backgrounds
    )


def _movement(constraint: Yield) -> str:
    return constraint.kind if constraint.uncertainty is None else f"± {100 * constraint.uncertainty:.3g} %"
