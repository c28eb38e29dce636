"""The study: everything that one study file says, checked, as frozen models.

`study_file.read_study` makes it from a file. Names are those of the file; `modes`, `backgrounds` and `variations` stand
for the tables [[mode]], [[background]] and [[variation]]; `categories` are the [[category]] tables written out.
"""

from __future__ import annotations

import hashlib
from collections.abc import Mapping
from pathlib import Path
from typing import Annotated, Any, Literal

from pydantic import BeforeValidator, Field, PrivateAttr, model_validator

from .study_components import Background, Mode
from .study_detector import Detector
from .study_names import CHARM_IDENTIFIER, CHARM_LABEL, LEPTON_LABEL, OBSERVABLES, CharmHadron, LightLepton
from .study_rules import (
    ByObservable,
    Count,
    Fraction,
    Positive,
    PositiveEnergy,
    Seed,
    Table,
    Text,
    Value,
    broken,
    increasing,
    rule,
)
from .study_variations import Variation


class StudySection(Table):
    """[study]: name and seed."""

    name: Text
    seed: Seed = Field(description="every random number of the study follows from it")
    output: Text = Field(description="folder for everything that is made, from where the command runs")


class Experiment(Table):
    """[experiment]: the machine. Beams along z, the first beam towards +z."""

    kind: Literal["lepton-collider"]
    beam_energies: Annotated[
        tuple[PositiveEnergy, PositiveEnergy],
        rule(
            lambda beams: 10.5596 < 2 * (beams[0] * beams[1]) ** 0.5 < 10.62,
            "do not meet at the Υ(4S)",
            "beams with 2 √(E1 E2) from 10.560 to 10.620 GeV, e.g. [8.0, 3.4981]",
        ),
    ] = Field(default=(8.0, 3.4981), description="electron, positron")
    energy_spread: PositiveEnergy = Field(default=0.0027, description="standard deviation of the collision energy")
    b_pairs: Positive = Field(description="number of B B̄ pairs")
    charged_fraction: Fraction = Field(default=0.514, description="share of B⁺B⁻ among the pairs")


class FormFactors(Table):
    """[form_factors]: the parameter set for each charm family."""

    D: Text = "BCL-2021"
    Dst: Text = "CLN-2021"
    Dss: Text = "IW-1998"


class Cut(Table):
    """Limits on an observable; min included, max excluded."""

    min: Value | None = None
    max: Value | None = None

    @model_validator(mode="after")
    def _open(self) -> Cut:
        if self.min is None and self.max is None:
            raise broken("cuts nothing", "min, max or both", got="")
        if self.min is not None and self.max is not None and self.min >= self.max:
            raise broken("removes everything", "min below max", got=f"min = {self.min:g}, max = {self.max:g}")
        return self


Cuts = Annotated[dict[str, Cut], ByObservable]


class Bins(Table):
    """Bins of equal width: { min = 0.2, max = 2.5, bins = 23 }."""

    min: Value
    max: Value
    bins: Annotated[Count, Field(le=10_000)]

    @model_validator(mode="after")
    def _ordered(self) -> Bins:
        if self.min >= self.max:
            raise broken("must increase", "min below max", got=f"min = {self.min:g}, max = {self.max:g}")
        return self


class Axis(Table):
    """Edges of an observable's bins. In the file: a list of edges, or { min, max, bins }."""

    edges: tuple[Value, ...]

    @model_validator(mode="before")
    @classmethod
    def _from_list(cls, given: Any) -> Any:
        if isinstance(given, Axis):
            return given
        if isinstance(given, list | tuple):
            return {"edges": given}
        if isinstance(given, dict) and "edges" not in given:
            bins = Bins.model_validate(given)
            step = (bins.max - bins.min) / bins.bins
            return {"edges": [bins.min + i * step for i in range(bins.bins)] + [bins.max]}
        raise broken("is no axis", "a list of edges, or { min = ..., max = ..., bins = ... }")

    @model_validator(mode="after")
    def _increase(self) -> Axis:
        if len(self.edges) < 2:
            raise broken("needs at least two edges", got=str(list(self.edges)))
        if not increasing(self.edges):
            raise broken("edges must increase", "each edge larger than the one before", got=str(list(self.edges)))
        return self


class CategoryTable(Table):
    """[[category]]: reconstructed final states that share their axes; one category for each hadron and lepton.

    Categories are named by hadron and lepton: D0_e, D0_mu, Dp_e, Dp_mu, Dst0_e, Dst0_mu, Dstp_e, Dstp_mu.
    """

    charm: Annotated[tuple[CharmHadron, ...], Field(min_length=1)] = Field(description="reconstructed charm hadrons")
    leptons: Annotated[tuple[LightLepton, ...], Field(min_length=1)] = Field(default=("e", "mu"))
    observables: Annotated[dict[str, Axis], Field(min_length=1, max_length=3), ByObservable] = Field(
        description="one to three axes, in order"
    )
    selection: Cuts = Field(default={}, description="cuts that replace those of [selection] on the same observable")


class StudyCategory(Table):
    """One reconstructed final state. `axes`: observable -> increasing edges; `cuts`: all that apply to it."""

    name: str
    label: str
    charm: CharmHadron
    lepton: LightLepton
    axes: dict[str, tuple[float, ...]]
    cuts: dict[str, Cut]

    @property
    def shape(self) -> tuple[int, ...]:
        """Bins along each axis."""
        return tuple(len(edges) - 1 for edges in self.axes.values())


class DataFile(Table):
    """{ file = "data.root" }: histograms <category>/data, with the axes of the study."""

    file: Text


class FitSection(Table):
    """[fit]."""

    ratios: Literal["isospin", "separate"] = Field(
        default="isospin", description='"separate": R_D and R_Dst for B⁺ and B⁰ on their own'
    )
    template_statistics: Annotated[bool, Field(strict=True)] = Field(
        default=True, description="finite template statistics in the likelihood"
    )
    data: Literal["expected", "pseudo"] | DataFile = Field(
        default="expected", description='"pseudo" (independent events), or { file = "data.root" }'
    )
    injected: dict[Literal["R_D", "R_Dst"], Positive] = Field(
        default={}, description="ratios that templates are made with; those of the form factors if left out"
    )


class Linearity(Table):
    """Toys at several injected ratios."""

    factors: Annotated[tuple[Positive, ...], Field(min_length=2)] = Field(
        default=(0.8, 1.0, 1.2, 1.4), description="of all injected ratios at once"
    )
    number: Count = Field(default=500, description="toys at each")


class Toys(Table):
    """[toys]."""

    number: Count = 2000
    linearity: Annotated[Linearity | None, BeforeValidator(lambda given: None if given is False else given)] = Field(
        default=Linearity(), description="false switches it off"
    )


class StudyConfig(Table):
    """A whole study. `text`, `path` and `digest` tell the file it came from."""

    study: StudySection
    experiment: Experiment
    form_factors: FormFactors = FormFactors()
    modes: tuple[Mode, ...] = Field(alias="mode", min_length=1)
    backgrounds: tuple[Background, ...] = Field(default=(), alias="background")
    detector: Detector = Detector()
    selection: Cuts = Field(default={}, description="cuts by observable; delta_m acts on D* categories only")
    category_tables: tuple[CategoryTable, ...] = Field(alias="category", min_length=1)
    variations: tuple[Variation, ...] = Field(default=(), alias="variation")
    fit: FitSection = FitSection()
    toys: Toys = Toys()

    _text: str = PrivateAttr(default="")
    _path: Path = PrivateAttr(default=Path("study.toml"))

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

    def beside(self, file: str) -> Path:
        """Path of a file that the study names: from the study file's folder unless absolute."""
        return self._path.parent / Path(file).expanduser()

    @property
    def categories(self) -> tuple[StudyCategory, ...]:
        """All categories, in the file's order."""
        return tuple(
            StudyCategory(
                name=f"{CHARM_IDENTIFIER[charm]}_{lepton}",
                label=f"{CHARM_LABEL[charm]} {LEPTON_LABEL[lepton]}",
                charm=charm,
                lepton=lepton,
                axes={name: axis.edges for name, axis in table.observables.items()},
                cuts=self._cuts(table, charm),
            )
            for table in self.category_tables
            for charm in table.charm
            for lepton in table.leptons
        )

    def _cuts(self, table: CategoryTable, charm: str) -> dict[str, Cut]:
        cuts = {name: cut for name, cut in self.selection.items() if name != "delta_m" or "*" in charm}
        return cuts | table.selection

    def category(self, name: str) -> StudyCategory:
        """The category of that name; KeyError if there is none."""
        return {category.name: category for category in self.categories}[name]

    def component(self, name: str) -> Mode | Background:
        """The component of that name; KeyError if there is none."""
        components: dict[str, Mode | Background] = {mode.name: mode for mode in self.modes}
        return (components | {background.name: background for background in self.backgrounds})[name]

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
