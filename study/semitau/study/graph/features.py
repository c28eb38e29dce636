"""What a study may be asked beyond its fit and toys: each is a step of its own, with a table of the study file."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from importlib import import_module
from typing import Any, cast

from pydantic import ValidationError
from semitau.core.code_digest import code_digest, versions
from semitau.core.content_digest import content_digest
from semitau.gen.study_file.study import StudyConfig

from ..result_part import Part
from ..run.study_folder import file_digest, named_files
from .materials import Materials
from .template_digest import templates_digest

Report = Callable[[str, int, int | None], None]


@dataclass(frozen=True)
class Feature:
    """One feature.

    name : field of Results. module, function : what makes its part of results.json, called as
    function(study, materials, workers, report); `ingredients` of that module says what it depends on besides.
    part : class of the part, beside the module. wanted : whether a study asks for it.
    seconds : what it takes, roughly, on two cores.
    """

    name: str
    module: str
    function: str
    part: str
    wanted: Callable[[StudyConfig], bool]
    seconds: float

    def made(self, materials: Materials, report: Report | None) -> Part:
        """The part: from the store if it is there, made and kept otherwise."""
        study, store = materials.study, materials.store
        kind = cast(type[Part], getattr(import_module(f"..{self.module.split('.')[0]}.part", __package__), self.part))
        key = "" if store is None else self.key(materials)
        if store is not None and (document := store.take_document(self.name, key)) is not None:
            try:
                return kind.model_validate(document)
            except ValidationError:
                pass  # a part of another form: it is made again
        before = set() if store is None else set(store.used)
        make = getattr(self._module, self.function)
        workers = 1 if materials.workers is None else materials.workers
        part = cast(Part, make(study, materials, workers, report))
        if store is not None:
            store.keep_document(self.name, key, part.model_dump(mode="json"), store.used - before)
        return part

    def key(self, materials: Materials) -> str:
        """Of everything that the part depends on: templates, model, the whole of what events are made from, code."""
        study = materials.study
        return content_digest(
            self.name,
            code_digest("core", "gen", "fit", "study"),
            versions(),
            templates_digest(materials.templates),
            generation(study),
            study.fit.model_dump(mode="json", exclude={"data"}),
            self._module.ingredients(study),
            sorted((name, file_digest(study.beside(name))) for name in named_files(study.model_dump(mode="json"))),
        )

    @property
    def _module(self) -> Any:
        return import_module(f"..{self.module}", __package__)


def generation(study: StudyConfig) -> object:
    """Everything in a study that events and templates are made from, and a little more; JSON values."""
    document = study.model_dump(mode="json", by_alias=True)
    for table in ("toys", "fit", "blinding", "bias", "alternative", "sizing", "design", "reach", "average"):
        document.pop(table, None)
    document["study"] = study.study.seed
    return document


FEATURES: tuple[Feature, ...] = (
    Feature("bias", "bias.run", "bias_part", "Bias", lambda study: bool(study.alternatives), 60.0),
    Feature("sizing", "sizing.sizing_part", "sizing_part", "Sizing", lambda study: study.sizing is not None, 60.0),
    Feature("design", "design.design_part", "design_part", "Design", lambda study: study.design is not None, 60.0),
    Feature("reach", "reach.run", "reach_part", "Reach", lambda study: study.reach is not None, 5.0),
    Feature("average", "averages.step", "average_part", "AverageResults", lambda study: study.average is not None, 1.0),
)
