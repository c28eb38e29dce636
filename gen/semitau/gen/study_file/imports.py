"""[import]: templates and data from other simulations."""

from __future__ import annotations

from typing import Annotated, Any, Literal

from pydantic import Field, model_validator

from .components import Yield
from .rules import Distinct, Flag, Identifier, ObservableKey, Positive, Table, Text, broken

Flow = Literal["refuse", "drop", "merge"]


class Source(Table):
    """Where contents come from: a histogram, or the columns of a tree, for each category.

    `{category}` in a name stands for the category. Bins of a histogram are merged to those of the category, so each
    edge of the category must be an edge of the histogram. A tree is filled into the category's bins.
    """

    file: Text = Field(description="ROOT file, beside the study file unless absolute")
    histogram: Text | None = Field(default=None, description='path in the file, e.g. "{category}/mm2_el"')
    tree: Text | None = Field(default=None, description='tree in the file, e.g. "candidates_{category}"')
    columns: dict[ObservableKey, Text] = Field(
        default={}, description="of the tree, by observable; the observable's name if left out"
    )
    flow: Flow = Field(
        default="refuse",
        description="what lies outside the axes: an error if there is any, left out, or added to the outer bins",
    )

    @model_validator(mode="after")
    def _one(self) -> Source:
        if (self.histogram is None) == (self.tree is None):
            raise broken("has no source", "one of histogram and tree", got="")
        if self.columns and self.tree is None:
            raise broken("names columns without a tree", got="columns")
        return self


class ImportedSides(Table):
    """A variation of an imported component: templates one standard deviation up and down."""

    name: Identifier = Field(description="of the nuisance parameter; may be one that the study has already")
    label: Text | None = Field(default=None, description="in pictures and tables; the name if left out")
    group: Text = Field(default="imported", description="row of the budget, for a new nuisance")
    plus: Text = Field(description="histogram, or column of weights of the tree, with {category} if wanted")
    minus: Text | None = Field(default=None, description="the same for the other side")
    mirror: Flag = Field(default=False, description="take minus as the mirror image of plus: 2 nominal - plus")

    @model_validator(mode="after")
    def _both(self) -> ImportedSides:
        if (self.minus is None) != self.mirror:
            remedy = "Give minus, or say mirror = true if there is one side only."
            raise broken("has the wrong number of sides", "minus or mirror = true", remedy, got="")
        return self


class ImportedComponent(Source):
    """A component whose templates come from a file."""

    component: Identifier = Field(description="name of its templates")
    label: Text | None = Field(default=None, description="in pictures and tables; the component's name if left out")
    role: Literal["signal", "normalisation", "feed-down", "background"] = Field(default="background")
    categories: Annotated[tuple[Text, ...], Field(min_length=1), Distinct] | None = Field(
        default=None, description="that it contributes to; all if left out"
    )
    scale: Positive = Field(
        default=1.0, description="of the contents: luminosity of the data over that of the simulation"
    )
    weight: Text | None = Field(default=None, description="column of weights of the tree; 1 if left out")
    yield_constraint: Yield = Field(
        default=Yield(kind="free"), alias="yield", description="how far the fit may move it"
    )
    scales_with: Annotated[tuple[Text, ...], Distinct] = Field(
        default=(), description="parameters of the study that scale it, too, such as R_D and yield_D_light"
    )
    negative: Literal["refuse", "clear"] = Field(
        default="refuse", description="bins with negative contents: an error, or set to zero with their variance kept"
    )
    variations: tuple[ImportedSides, ...] = Field(default=(), description="its nuisances")

    @property
    def name(self) -> str:
        """The component."""
        return self.component

    @model_validator(mode="after")
    def _weights(self) -> ImportedComponent:
        if self.weight is not None and self.tree is None:
            raise broken("names weights without a tree", got="weight")
        return self


class ImportedData(Source):
    """Observed counts from a file: whole numbers, without weights. Fitted if `[fit] data = "import"`."""


class Imports(Table):
    """Templates and data from other simulations, mixed freely with those of the study."""

    components: tuple[ImportedComponent, ...] = Field(default=(), alias="component", description="[[import.component]]")
    data: ImportedData | None = Field(default=None, description="[import.data]")

    def problems(self, own: set[str], categories: set[str]) -> list[tuple[tuple[Any, ...], str, str, str]]:
        """(place, what, got, wanted) of names that do not fit the rest of the study. own : components of the study."""
        found: list[tuple[tuple[Any, ...], str, str, str]] = []
        seen = set(own)
        sources: dict[tuple[str, str, str | None, str], str] = {}
        for i, item in enumerate(self.components):
            place = ("import", "component", i)
            if item.name in seen:
                found.append(((*place, "component"), "names a component that there is already", item.name, ""))
            if item.name in ("data", "meta"):
                found.append(
                    ((*place, "component"), "is a name that template files keep for themselves", item.name, "")
                )
            seen.add(item.name)
            for category in item.categories or ():
                if category not in categories:
                    wanted = ", ".join(sorted(categories))
                    found.append(((*place, "categories"), "names no category", category, wanted))
            for category in item.categories or sorted(categories):
                name = (item.histogram or item.tree or "").replace("{category}", category)
                source = (item.file, name, item.weight, category)
                if source in sources:
                    what = f"is counted twice: {sources[source]} takes it for the same category"
                    found.append(((*place, "file"), what, f"{item.file}: {name}", ""))
                sources.setdefault(source, item.name)
            names = [sides.name for sides in item.variations]
            for name in {name for name in names if names.count(name) > 1}:
                found.append(((*place, "variations"), "names a variation twice", name, ""))
        return found
