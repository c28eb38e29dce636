"""Samples: what one number of events in the study file generates, and the study with other numbers."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass

import numpy as np
from semitau.core.templates import TemplateSet
from semitau.gen.study_file.components import Background, Mode
from semitau.gen.study_file.double_charm import DoubleCharm
from semitau.gen.study_file.parameter_names import component_name
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import Build


@dataclass(frozen=True)
class Sample:
    """name, label : of the sample. components : of the templates that are made of it.

    table : of the study file that it stands in, "" if there is none.
    """

    name: str
    label: str
    components: tuple[str, ...]
    table: str = ""


def samples_of_study(study: StudyConfig) -> tuple[Sample, ...]:
    """All [[mode]], [[double_charm]] and [[background]] tables; imported components have no events of ours."""
    return tuple(
        Sample(item.name, item.label or item.name, _components(study, item), _table(item)) for item in study.components
    )


def _components(study: StudyConfig, item: Mode | DoubleCharm | Background) -> tuple[str, ...]:
    if isinstance(item, Mode):
        return tuple(dict.fromkeys(component_name(study, item, parent) for parent in item.parents))
    return (item.name,)


def _table(item: Mode | DoubleCharm | Background) -> str:
    if isinstance(item, Mode):
        return "mode"
    return "double_charm" if isinstance(item, DoubleCharm) else "background"


def samples_of_templates(templates: TemplateSet) -> tuple[Sample, ...]:
    """Every component by itself: of templates from anybody it is not known what was generated together."""
    return tuple(Sample(c.name, c.label, (c.name,)) for c in templates.components)


def members(samples: tuple[Sample, ...]) -> dict[str, tuple[str, ...]]:
    """Sample -> its components."""
    return {sample.name: sample.components for sample in samples}


def with_events(study: StudyConfig, events: Mapping[str, int]) -> StudyConfig:
    """The study with these numbers of events; tables that are not named keep theirs."""
    return study.model_copy(
        update={
            tables: tuple(
                item.model_copy(update={"events": events[item.name]}) if item.name in events else item
                for item in getattr(study, tables)
            )
            for tables in ("modes", "double_charms", "backgrounds")
        }
    )


def generated(samples: tuple[Sample, ...], build: Build) -> dict[str, int]:
    """Sample -> events that were generated: chains with a small share get more than the file says."""
    return {sample.name: sum(build.costs[name].events for name in sample.components) for sample in samples}


def seconds_per_event(samples: tuple[Sample, ...], build: Build) -> dict[str, float]:
    """Sample -> processor time of one event, s."""
    return {
        sample.name: sum(build.costs[name].seconds for name in sample.components)
        / max(1, sum(build.costs[name].events for name in sample.components))
        for sample in samples
    }


def effective_events(sample: Sample, templates: TemplateSet) -> float:
    """Squared sum of the contents over the sum of their variances, over all categories and components."""
    own = [t for (_, name), t in templates.templates.items() if name in sample.components]
    total = float(sum(np.sum(t.nominal) for t in own))
    spread = float(sum(np.sum(t.variance) for t in own))
    return total**2 / spread if spread > 0.0 else 0.0
