"""The study: everything that one study file says, checked, as frozen models.

`study_file.read_study` makes it from a file. Names are those of the file; `modes` and `backgrounds` stand for the
tables [[mode]] and [[background]]; `categories` and `variations` are the [[category]] and [[variation]] tables written
out.
"""

from __future__ import annotations

import hashlib
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

from pydantic import Field, PrivateAttr, ValidationInfo, model_validator
from pydantic_core import PydanticCustomError

from ..decays.branching_fractions import BranchingFractions
from ..decays.form_factor_set import FormFactorSet
from ..decays.form_factor_shifts import Coefficient
from .alternatives import Alternative, BiasSection
from .average import AverageStudySection
from .blinding import Blinding
from .categories import CategoryTable, Cuts, StudyCategory, written_out
from .chosen_sets import chosen_set
from .components import Background, Mode
from .conflicts import conflicts
from .design import DesignSection
from .design_conflicts import design_conflicts
from .detector import Detector
from .double_charm import DoubleCharm
from .fit import FitSection, Toys
from .fit_conflicts import fit_conflicts
from .fractions import BranchingFractionTables
from .imports import Imports
from .machine import Experiment, FormFactors, StudySection
from .names import OBSERVABLES
from .prospect_conflicts import prospect_conflicts
from .quadratic_shifts import written_coefficients
from .radiation import RadiationSection
from .reach import ReachSection
from .rules import Table, shown
from .sections import SECTIONS, Conflict, Sections, missing_file
from .sizing import SizingSection
from .sizing_conflicts import sizing_conflicts
from .variations import SingleVariation, Variation
from .wilson import Quadratic, Wilson
from .written_variations import excited_families, single_variations

CONFLICTS = "semitau_conflicts"


class StudyConfig(Table):
    """A whole study. `text`, `path` and `digest` tell the file it came from."""

    study: StudySection
    experiment: Experiment
    form_factors: FormFactors = FormFactors()
    branching_fractions: BranchingFractionTables = BranchingFractionTables()
    wilson: Wilson = Wilson()
    radiation: RadiationSection = RadiationSection()
    quadratic: Quadratic | None = Field(default=None, description="templates as functions of coefficients")
    modes: tuple[Mode, ...] = Field(alias="mode", min_length=1)
    double_charms: tuple[DoubleCharm, ...] = Field(default=(), alias="double_charm")
    backgrounds: tuple[Background, ...] = Field(default=(), alias="background")
    detector: Detector = Detector()
    selection: Cuts = Field(default={}, description="cuts by observable; delta_m acts on D* categories only")
    category_tables: tuple[CategoryTable, ...] = Field(alias="category", min_length=1)
    variation_tables: tuple[Variation, ...] = Field(default=(), alias="variation")
    fit: FitSection = FitSection()
    toys: Toys = Toys()
    imports: Imports | None = Field(default=None, alias="import", description="from other simulations")
    sizing: SizingSection | None = Field(default=None, description="no part of the study without it")
    alternatives: tuple[Alternative, ...] = Field(default=(), alias="alternative")
    bias: BiasSection = BiasSection()
    design: DesignSection | None = Field(default=None, description="no part of the study without it")
    reach: ReachSection | None = Field(default=None, description="no part of the study without it")
    average: AverageStudySection | None = Field(default=None, description="no part of the study without it")
    blinding: Blinding | None = Field(default=None, description="hides the ratios; nothing is hidden without it")

    _text: str = PrivateAttr(default="")
    _path: Path = PrivateAttr(default=Path("study.toml"))

    @model_validator(mode="after")
    def _agree(self, info: ValidationInfo) -> StudyConfig:
        folder = (info.context or {}).get("folder")
        sections = self.sections(folder=folder)
        found = [*conflicts(sections), *self._import_conflicts(folder), *self._design_conflicts()]
        if not any(conflict.place[0] in ("form_factors", "mode", "variation") for conflict in found):
            found += fit_conflicts(self, sections)  # whose names follow from these
            found += sizing_conflicts(self)
            found += prospect_conflicts(self, folder)
        if found:
            text = "; ".join(conflict.what for conflict in found)
            raise PydanticCustomError(CONFLICTS, "{text}", {"text": text, "conflicts": found})
        return self

    def _import_conflicts(self, folder: Path | None) -> Iterator[Conflict]:
        if self.fit.data.kind == "import" and (self.imports is None or self.imports.data is None):
            yield Conflict(("fit", "data"), "needs [import.data]", shown("import"), remedy="Say where the data are.")
        if self.imports is None:
            return
        own = {item.name for item in self.components}
        for place, what, got, wanted in self.imports.problems(own, {category.name for category in self.categories}):
            yield Conflict(place, what, shown(got), wanted, remedy="" if wanted else "Rename or leave out one of them.")
        if folder is not None:
            for i, item in enumerate(self.imports.components):
                yield from missing_file(("import", "component", i, "file"), item.file, folder)
            if self.imports.data is not None:
                yield from missing_file(("import", "data", "file"), self.imports.data.file, folder)

    def _design_conflicts(self) -> Iterator[Conflict]:
        return iter(()) if self.design is None else design_conflicts(self, self.design)

    def sections(self, folder: Path | None = None) -> Sections:
        """The study as study_conflicts looks at it."""
        return Sections(
            modes=dict(enumerate(self.modes)),
            double_charms=dict(enumerate(self.double_charms)),
            backgrounds=dict(enumerate(self.backgrounds)),
            category_tables=dict(enumerate(self.category_tables)),
            variations=dict(enumerate(self.variation_tables)),
            selection=self.selection,
            detector=self.detector,
            form_factors=self.form_factors,
            wilson=self.wilson,
            quadratic=self.quadratic,
            fit=self.fit,
            experiment=self.experiment,
            fractions=self.branching_fractions,
            whole=frozenset(SECTIONS),
            components=frozenset(item.name for item in self.components),
            folder=folder,
        )

    @property
    def text(self) -> str:
        """The study file as it was read; "" if the study was made otherwise."""
        return self._text

    @property
    def path(self) -> Path:
        """The study file."""
        return self._path

    @property
    def digest(self) -> str:
        """SHA-256 of `text`, hexadecimal."""
        return hashlib.sha256(self._text.encode()).hexdigest()

    def read_from(self, path: Path, text: str) -> StudyConfig:
        """The same study with the file it came from."""
        study = self.model_copy()
        study._path, study._text = path, text
        return study

    def beside(self, file: str) -> Path:
        """Path of a file that the study names: from the study file's folder unless absolute."""
        return self._path.parent / Path(file)

    def form_factor_set(self, transition: str) -> FormFactorSet:
        """The set chosen for "D", "Dst" or "Dss". InputError if its file is not sound (any more)."""
        return chosen_set(getattr(self.form_factors, transition), transition, self._path.parent)

    @property
    def fractions(self) -> BranchingFractions:
        """Branching fractions that decay chains are made with."""
        return self.branching_fractions.fractions

    @property
    def excited_families(self) -> tuple[str, ...]:
        """D** and continua of all modes."""
        return excited_families(charm for mode in self.modes for charm in mode.charm)

    @property
    def variations(self) -> tuple[SingleVariation, ...]:
        """All variations, one for each nuisance parameter, in the file's order."""
        return tuple(single_variations(self.variation_tables, self.form_factor_set, self.excited_families))

    @property
    def coefficients(self) -> tuple[Coefficient, ...]:
        """What templates are functions of, written out."""
        return written_coefficients(self.quadratic, self.form_factors, self.form_factor_set)

    @property
    def categories(self) -> tuple[StudyCategory, ...]:
        """All categories, in the file's order."""
        return written_out(self.category_tables, self.selection)

    def category(self, name: str) -> StudyCategory:
        """The category of that name; KeyError if there is none."""
        return {category.name: category for category in self.categories}[name]

    def component(self, name: str) -> Mode | DoubleCharm | Background:
        """The component of that name; KeyError if there is none."""
        return {component.name: component for component in self.components}[name]

    @property
    def components(self) -> tuple[Mode | DoubleCharm | Background, ...]:
        """All components: modes, double charm, backgrounds, each in the file's order."""
        return (*self.modes, *self.double_charms, *self.backgrounds)

    def followed_by(self, mode: Mode) -> Mode | None:
        """The mode whose yield scales `mode`: what it `follows`, or the light mode of the same charm for a ratio."""
        if mode.follows:
            return next((other for other in self.modes if other.name == mode.follows), None)
        if mode.scales_with is None:
            return None
        light = [m for m in self.modes if set(m.charm) == set(mode.charm) and "tau" not in m.leptons]
        return light[0] if len(light) == 1 else None

    @property
    def observables(self) -> tuple[str, ...]:
        """All observables on any axis, in the order of `study_names.OBSERVABLES`."""
        used = {name for category in self.categories for name in category.axes}
        return tuple(name for name in OBSERVABLES if name in used)


def json_schema() -> Mapping[str, Any]:
    """JSON schema of study files, for editors."""
    return StudyConfig.model_json_schema(by_alias=True)
