"""The [[variation]] tables: named changes of the templates that become nuisance parameters of the fit.

Each has a plus and a minus side at one standard deviation. `relative` is a relative change: 0.05 means ±5%.
"""

from __future__ import annotations

from typing import Annotated, ClassVar, Literal

from pydantic import Field, model_validator

from ..decays.branching_fractions import TABLES
from .double_charm import Beside, Source
from .names import CharmFamily, LightLepton, SoftKind
from .rules import Count, Identifier, Positive, Table, Text, broken, suggestion

FormFactorGroup = Literal["D", "Dst", "Dss"]
_Relative = Annotated[Positive, Field(lt=1)]


class _Named(Table):
    """What every variation has."""

    default_group: ClassVar[str]

    name: Identifier = Field(description="name of the nuisance parameter")
    label: Text | None = Field(default=None, description="in pictures and tables; the name if left out")
    group: Text | None = Field(default=None, description="row of the budget; by kind if left out")

    @property
    def budget_group(self) -> str:
        """Row of the uncertainty budget."""
        return self.group or self.default_group


class FormFactor(_Named):
    """One parameter of a form-factor set, others kept."""

    default_group: ClassVar[str] = "form factors"

    kind: Literal["form_factor"]
    set: FormFactorGroup = Field(description="which entry of [form_factors]")
    parameter: Text = Field(description="as the set names it, e.g. R0(1)")
    shift: Positive | None = Field(
        default=None, description="in the parameter's unit; the set's uncertainty if left out"
    )


class FormFactorDirection(_Named):
    """One direction of a set's covariance, one standard deviation along it; 1 is the largest."""

    default_group: ClassVar[str] = "form factors"

    kind: Literal["form_factor_direction"]
    set: FormFactorGroup = Field(description="which entry of [form_factors]")
    direction: Count = Field(description="counted from 1, largest first")
    order: Literal["variance", "effect"] = Field(default="variance", description="as in form_factor_directions")


class FormFactorDirections(_Named):
    """The directions of a set's covariance that matter: nuisances NAME_1, NAME_2 ..., independent and largest first.

    They act on e, μ, τ and on B⁺, B⁰ together; on D and D* together if the set gives them the same parameters.
    """

    default_group: ClassVar[str] = "form factors"

    kind: Literal["form_factor_directions"]
    set: FormFactorGroup = Field(description="which entry of [form_factors]")
    order: Literal["variance", "effect"] = Field(
        default="effect",
        description="effect: independent in what they do to the q² spectra of μ and τ; variance: eigenvectors of the "
        "correlation matrix",
    )
    keep: Annotated[Positive, Field(le=1)] = Field(default=0.99, description="share of the effect or variance to keep")
    at_most: Count | None = Field(default=None, description="keep no more directions than this")


class ComponentFraction(_Named):
    """The share of one charm hadron within components that mix several; the total of each component stays."""

    default_group: ClassVar[str] = "D** composition"

    kind: Literal["fraction"]
    charm: CharmFamily = Field(description="whose share changes")
    components: tuple[Identifier, ...] | None = Field(
        default=None, description="modes it acts on; all with this and other charm if left out"
    )
    relative: _Relative = Field(description="one standard deviation")


class BranchingFractionChange(_Named):
    """One branching fraction, as [branching_fractions] names it: `particle = "tau"`, `decay = "mu"`.

    The other decays take up the difference if those of the particle sum to one. Yields follow, where the fit has no
    parameter that takes them up.
    """

    default_group: ClassVar[str] = "branching fractions"

    kind: Literal["branching_fraction"]
    particle: Text = Field(description="what decays")
    decay: Text = Field(description="final state")
    relative: _Relative | None = Field(
        default=None, description="one standard deviation; the error in [branching_fractions] or the tables if left out"
    )

    @model_validator(mode="after")
    def _known(self) -> BranchingFractionChange:
        if self.particle not in TABLES:
            near = suggestion(self.particle, TABLES)
            raise broken("names no particle of [branching_fractions]", ", ".join(TABLES), near, got=self.particle)
        if self.decay not in TABLES[self.particle]:
            words = tuple(TABLES[self.particle])
            near = suggestion(self.decay, words)
            raise broken(f"names no decay of {self.particle}", ", ".join(words), near, got=self.decay)
        return self


class DoubleCharmShare(_Named):
    """The share of one part of the [[double_charm]] components: a class of B decays, or a source of leptons.

    The total of each component stays.
    """

    default_group: ClassVar[str] = "double charm"

    kind: Literal["double_charm_share"]
    beside: Beside | None = Field(default=None, description="class of B decays, as in [[double_charm]]")
    source: Source | None = Field(
        default=None, description="D_s → τν or μν, or the hadron beside lepton and neutrino; instead of beside"
    )
    relative: _Relative | None = Field(
        default=None, description="one standard deviation; that of the branching fractions if left out"
    )

    @model_validator(mode="after")
    def _one_part(self) -> DoubleCharmShare:
        if (self.beside is None) == (self.source is None):
            raise broken("does not say what varies", "beside or source, one of them", got="")
        return self


class ProductionRatio(_Named):
    """Ratio of B⁺ to B⁰ production at the collider; the number of pairs stays."""

    default_group: ClassVar[str] = "B production"

    kind: Literal["production_ratio"]
    relative: _Relative = Field(description="one standard deviation")


class SoftPionEfficiency(_Named):
    """Efficiency of the soft pion or photon of a D*."""

    default_group: ClassVar[str] = "detector"

    kind: Literal["soft_pion_efficiency"]
    particle: SoftKind = Field(description="charged or neutral pion, or photon")
    relative: _Relative = Field(description="one standard deviation")


class LeptonIdentificationEfficiency(_Named):
    """Identification efficiency of true leptons."""

    default_group: ClassVar[str] = "detector"

    kind: Literal["lepton_identification"]
    lepton: LightLepton = Field(description="true lepton")
    relative: _Relative = Field(description="one standard deviation")


class Misidentification(_Named):
    """Rate at which hadrons pass for a lepton: on backgrounds with misidentified = true and pions of a τ."""

    default_group: ClassVar[str] = "detector"

    kind: Literal["misidentification"]
    lepton: LightLepton = Field(description="what the hadron is taken for")
    relative: _Relative = Field(description="one standard deviation")


class TagResolution(_Named):
    """Width of the tag momentum, right and wrong tags alike."""

    default_group: ClassVar[str] = "detector"

    kind: Literal["tag_resolution"]
    relative: _Relative = Field(description="one standard deviation")


class MomentumScale(_Named):
    """Scale of all charged-track momenta."""

    default_group: ClassVar[str] = "detector"

    kind: Literal["momentum_scale"]
    relative: Annotated[Positive, Field(lt=0.1)] = Field(description="one standard deviation")


class ResidualEnergyScale(_Named):
    """Scale of the residual energy of decays: noise, what a wrong tag leaves, photons, lost neutral particles alike."""

    default_group: ClassVar[str] = "detector"

    kind: Literal["residual_energy"]
    relative: _Relative = Field(description="one standard deviation")


SingleVariation = (
    FormFactor
    | FormFactorDirection
    | ComponentFraction
    | BranchingFractionChange
    | DoubleCharmShare
    | ProductionRatio
    | SoftPionEfficiency
    | LeptonIdentificationEfficiency
    | Misidentification
    | TagResolution
    | MomentumScale
    | ResidualEnergyScale
)
"""One nuisance parameter each."""

Variation = Annotated[
    FormFactor
    | FormFactorDirection
    | FormFactorDirections
    | ComponentFraction
    | BranchingFractionChange
    | DoubleCharmShare
    | ProductionRatio
    | SoftPionEfficiency
    | LeptonIdentificationEfficiency
    | Misidentification
    | TagResolution
    | MomentumScale
    | ResidualEnergyScale,
    Field(discriminator="kind"),
]
