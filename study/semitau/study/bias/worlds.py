"""A study and its alternatives, each as what data are made with and as what they are fitted with."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, replace
from functools import cached_property

import numpy as np
from semitau.core.errors import InputError
from semitau.core.templates import Floats, TemplateSet
from semitau.fit.fitting.component_expectations import component_expectations
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.fitting.result import FitResult
from semitau.fit.toys.toys import Expectation
from semitau.fit.uncertainty.decomposition import Budget, budget
from semitau.gen.study_file.alternative_studies import alternative_studies
from semitau.gen.study_file.alternatives import NOMINAL
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import Build
from semitau.gen.templates.imported import with_imports

from ..graph.materials import Materials
from ..run.opening import thinned
from ..run.study_model import study_model

Report = Callable[[str, int, int | None], None]

PARTS = 100
"""Steps of progress that each build is cut into."""


@dataclass(frozen=True, eq=False)
class World:
    """One study: `nominal` or an alternative.

    noise : (replicas, components, bins) what the finite numbers of generated events do to the expected events of each
        component, drawn independently in each replica; mean 0 over the replicas. Worlds share their random numbers, so
        that what the same events do is the same in both.
    covered_by : names of groups and parameters that are meant to cover it; empty for the whole systematic error.
    """

    name: str
    study: StudyConfig
    model: Model
    noise: Floats
    covered_by: tuple[str, ...]

    @cached_property
    def expectation(self) -> Expectation:
        """What data made with this study look like."""
        return Expectation.of(self.model)

    @cached_property
    def budgets(self) -> Mapping[str, Budget]:
        """The error that its fit assigns, by ratio, from its own expected set; empty if that fit fails."""
        own = maximise(self.model, self.model.expected_data())
        return budget(self.model, own) if own.valid else {}

    @cached_property
    def contents(self) -> Floats:
        """(components, bins) expected events as the templates were made."""
        return self._by_component(self.model.injected)

    def fitted_noise(self, result: FitResult) -> Floats:
        """(replicas, bins) what the finite events do to the expectation of a fit with this study."""
        fitted = self._by_component(result.values)
        growth = np.divide(fitted, self.contents, out=np.ones_like(fitted), where=self.contents != 0.0)
        noise: Floats = np.einsum("rcb,cb->rb", self.noise, growth)
        return noise

    def _by_component(self, values: Floats) -> Floats:
        found = component_expectations(
            self.model.templates,
            dict(zip(self.model.names, values.tolist(), strict=True)),
            self.model.coefficients,
        )
        return _stacked(self.model.templates, found)


def worlds(study: StudyConfig, materials: Materials, report: Report | None) -> list[World]:
    """The study itself, then its alternatives in the file's order.

    Raises InputError for an alternative that cannot be built; its problems say which.
    """
    studies = {NOMINAL: study, **alternative_studies(study)}
    replicas = study.bias.replicas
    progress = _Progress(report, len(studies) * (1 + replicas))
    return [
        _world(name, one, study, materials, progress, next((a for a in study.alternatives if a.name == name), None))
        for name, one in studies.items()
    ]


def _world(
    name: str, one: StudyConfig, study: StudyConfig, materials: Materials, progress: _Progress, alternative: object
) -> World:
    settings = study.bias
    try:
        build = progress.build(materials, one, "templates")
        model = study_model(one, with_imports(one, build.templates))
        few = _plain(thinned(one, settings.replica_events / settings.replicas))
        replicas = [progress.build(materials, few, f"bias replica {r}") for r in range(settings.replicas)]
    except InputError as error:
        if name == NOMINAL:
            raise
        raise InputError(*(problem.inside(f"alternative[{name}]") for problem in error.problems)) from None
    chosen = getattr(alternative, "covered_by", None) or ()
    return World(name, one, model, _noise(model.templates, build, replicas), tuple(_parameters(chosen, one)))


def _plain(study: StudyConfig) -> StudyConfig:
    """Without variations and pieces: replicas tell the fluctuations of the nominal contents alone."""
    fit = study.fit.model_copy(update={"apart": (), "mirrored": {}, "coefficients": ()})
    return study.model_copy(update={"variation_tables": (), "quadratic": None, "fit": fit})


def _noise(templates: TemplateSet, whole: Build, replicas: list[Build]) -> Floats:
    """Scaled from the events of a replica to those of the templates, component by component."""
    contents = np.array(
        [_stacked(templates, {at: t.nominal for at, t in replica.templates.templates.items()}) for replica in replicas]
    )
    contents -= contents.mean(axis=0)
    for number, component in enumerate(templates.components):
        if component.name in whole.costs:  # what is imported has no replicas
            share = replicas[0].costs[component.name].events / whole.costs[component.name].events
            contents[:, number] *= np.sqrt(share)
    return contents


def _stacked(templates: TemplateSet, found: Mapping[tuple[str, str], Floats]) -> Floats:
    """(components, bins), zero where a component has no template."""
    return np.array(
        [
            np.concatenate(
                [
                    found.get((category.name, component.name), np.zeros(category.shape)).ravel()
                    for category in templates.categories
                ]
            )
            for component in templates.components
        ]
    )


def _parameters(chosen: tuple[str, ...], study: StudyConfig) -> Iterator[str]:
    """Names as the fit has them: a variation whose shape and rate are apart is two parameters."""
    for name in chosen:
        yield from (f"{name}_shape", f"{name}_rate") if name in study.fit.apart else (name,)


@dataclass(eq=False)
class _Progress:
    """Builds one after the other, under one label."""

    report: Report | None
    builds: int
    done: int = 0

    def build(self, materials: Materials, study: StudyConfig, purpose: str) -> Build:
        """As `materials.build`."""
        made = replace(materials, report=self._inner()).build(study, purpose)
        self.done += 1
        if self.report is not None:
            self.report("alternatives", PARTS * self.done, PARTS * self.builds)
        return made

    def _inner(self) -> Report | None:
        report, before = self.report, self.done
        if report is None:
            return None

        def inner(_: str, done: int, total: int | None) -> None:
            part = PARTS * done // total if total else 0
            report("alternatives", PARTS * before + part, PARTS * self.builds)

        return inner
