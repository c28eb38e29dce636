"""What the steps of a study work with: templates of any study, and model, data and fit of the one at hand."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from dataclasses import dataclass
from functools import cached_property
from typing import Any

from semitau.core.streams import stream_key
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.result import FitResult
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import Build, build_templates
from semitau.gen.templates.imported import imported_data, poisson_of_imports, with_imports

from ..parts.coefficient_fits import fit_coefficients
from ..results import DataSource
from ..run.fitting import fit_or_fail
from ..run.study_data import fitted_data
from ..run.study_model import study_model
from .store import Store

Report = Callable[[str, int, int | None], None]


@dataclass(eq=False)
class Materials:
    """Made when they are asked for, and once. Components of templates come from the store if they are there.

    study : the study at hand. store : None keeps nothing. workers : threads, None for all cores.
    report : called as report(label, done, total).
    """

    study: StudyConfig
    store: Store | None = None
    workers: int | None = None
    report: Report | None = None

    @property
    def made(self) -> int:
        """How many times something was kept so far: unchanged if all came from the store."""
        return 0 if self.store is None else self.store.made

    def build(self, study: StudyConfig, purpose: str = "templates") -> Build:
        """Templates of any study, without what it imports.

        purpose : another word gives events that are independent of the templates.

        Raises InputError as `build_templates`.
        """
        return build_templates(study, self.workers, self._under("templates"), purpose, self.store)

    def template_set(self, study: StudyConfig, purpose: str = "templates") -> TemplateSet:
        """Templates of any study with what it imports; no data. Raises InputError as `build`, and for the imports."""
        return with_imports(study, self.build(study, purpose).templates)

    @cached_property
    def nominal(self) -> Build:
        """The build of the study itself."""
        return self.build(self.study)

    @cached_property
    def templates(self) -> TemplateSet:
        """Of the study itself, with what it imports, and with its data unless they are expected or in a file."""
        templates = with_imports(self.study, self.nominal.templates)
        if self.study.fit.data.kind == "pseudo":
            return templates.with_data(self._pseudo_data(templates))
        if self.study.fit.data.kind == "import":
            return templates.with_data(imported_data(self.study, templates))
        return templates

    @cached_property
    def model(self) -> Model:
        """What [fit] makes of the templates."""
        return study_model(self.study, self.templates)

    @cached_property
    def data(self) -> tuple[Data, DataSource]:
        """What the study fits, and what that is in words."""
        return fitted_data(self.study, self.model)

    @property
    def fitted(self) -> FitResult:
        """The fit to the study's data: true values, also where the study hides them. RunError if it fails."""
        return self.fit_and_notes[0]

    @cached_property
    def fit_and_notes(self) -> tuple[FitResult, tuple[str, ...]]:
        """The same, with what should be looked at where coefficients are fitted."""
        model, data = self.model, self.data[0]
        return fit_coefficients(model, data) if model.coefficients else (fit_or_fail(model, data), ())

    def _pseudo_data(self, templates: TemplateSet) -> Mapping[str, Any]:
        from semitau.gen.templates.pseudo_data import pseudo_data

        generated = pseudo_data(self.study, self.workers, self._under("pseudo-data"), kept=self.store)
        # Imported components have no events of their own to draw: their counts are about their templates.
        seed = int(stream_key(self.study.study.seed, "pseudo-data of imports"))
        imported = poisson_of_imports(self.study, templates.templates, seed)
        return {name: counts + imported.get(name, 0.0) for name, counts in generated.items()}

    def _under(self, label: str) -> Report | None:
        """The report of a stage that names its parts, under one name."""
        report = self.report
        return None if report is None else lambda _, done, total: report(label, done, total)
