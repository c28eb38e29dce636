"""[selection] and [[category]]: cuts, axes, and the reconstructed final states that the templates are binned in."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from typing import Annotated, Any, ClassVar

from pydantic import Field, model_validator

from .names import CHARM_IDENTIFIER, CHARM_LABEL, LEPTON_LABEL, CharmHadron, SeenLepton
from .rules import ByObservable, Count, Distinct, ObservableKey, ShortTable, Table, Value, broken, increasing

MOST_BINS = 10_000


class Cut(Table):
    """A cut: limits on an observable. [selection] is a table of cuts by observable; delta_m cuts D* categories only."""

    min: Value | None = Field(default=None, description="lowest value that is kept")
    max: Value | None = Field(default=None, description="values from here on are dropped")

    @property
    def text(self) -> str:
        """ "min = 0.3, max = 2" """
        limits = (("min", self.min), ("max", self.max))
        return ", ".join(f"{name} = {value:g}" for name, value in limits if value is not None)

    @model_validator(mode="after")
    def _open(self) -> Cut:
        if self.min is None and self.max is None:
            raise broken("cuts nothing", "min, max or both", got="")
        if self.min is not None and self.max is not None and self.min >= self.max:
            raise broken("removes everything", "min below max", got=self.text)
        return self


Cuts = Annotated[dict[ObservableKey, Cut], ByObservable]


class Axis(ShortTable):
    """Bins of an observable. In the file: a list of edges, or { min = 0.2, max = 2.5, bins = 23 } of equal width."""

    short_schema: ClassVar[dict[str, Any]] = {"type": "array", "items": {"type": "number"}, "minItems": 2}

    given: tuple[Value, ...] | None = Field(
        default=None, alias="edges", min_length=2, max_length=MOST_BINS + 1, description="increasing"
    )
    min: Value | None = Field(default=None, description="first edge")
    max: Value | None = Field(default=None, description="last edge")
    bins: Annotated[Count, Field(le=MOST_BINS)] | None = Field(default=None, description="number of bins")

    @model_validator(mode="before")
    @classmethod
    def _from_list(cls, given: Any) -> Any:
        if isinstance(given, Axis | dict):
            return given
        if isinstance(given, list | tuple):
            return {"edges": given}
        raise broken("is no axis", "a list of edges, or { min = ..., max = ..., bins = ... }")

    @model_validator(mode="after")
    def _increase(self) -> Axis:
        absent = [value is None for value in (self.min, self.max, self.bins)]
        if any(absent) if self.given is None else not all(absent):
            raise broken("is no axis", "a list of edges, or { min = ..., max = ..., bins = ... }")
        if not increasing(self.edges):
            raise broken("edges must increase", "each edge larger than the one before")
        return self

    @property
    def edges(self) -> tuple[float, ...]:
        """Increasing edges, in the observable's unit."""
        if self.given is not None:
            return self.given
        low, high, bins = self.min or 0.0, self.max or 0.0, self.bins or 1  # none of them is None: see _increase
        return (*(low + i * (high - low) / bins for i in range(bins)), high)


class CategoryTable(Table):
    """[[category]]: reconstructed final states that share their axes; one category for each hadron and lepton.

    Categories are named by hadron and lepton: D0_e, D0_mu, Dp_e, Dp_mu, Dst0_e, Dst0_mu, Dstp_e, Dstp_mu. A category
    with a charged pion or three in place of the lepton (D0_pi, D0_3pi ...) is for hadronic decays of the tau, which
    modes must allow with `tau_to`; el and p_lepton are then energy and momentum of the pion, or of all three together.
    """

    charm: Annotated[tuple[CharmHadron, ...], Field(min_length=1), Distinct] = Field(
        description="reconstructed charm hadrons"
    )
    leptons: Annotated[tuple[SeenLepton, ...], Field(min_length=1), Distinct] = Field(
        default=("e", "mu"), description="reconstructed leptons; pi or 3pi: pions that a tau left"
    )
    observables: Annotated[dict[ObservableKey, Axis], Field(min_length=1, max_length=3), ByObservable] = Field(
        description="one to three axes, in order"
    )
    selection: Cuts = Field(default={}, description="cuts that replace those of [selection] on the same observable")


class StudyCategory(Table):
    """One reconstructed final state. `axes`: observable -> increasing edges; `cuts`: all that apply to it."""

    name: str
    label: str
    charm: CharmHadron
    lepton: SeenLepton
    axes: dict[str, tuple[float, ...]]
    cuts: dict[str, Cut]

    @property
    def shape(self) -> tuple[int, ...]:
        """Bins along each axis."""
        return tuple(len(edges) - 1 for edges in self.axes.values())


def written_out(tables: Iterable[CategoryTable], selection: Mapping[str, Cut]) -> tuple[StudyCategory, ...]:
    """One category for each hadron and lepton of each table, in order, with the cuts that apply to it.

    Cuts of a table go before those of `selection` on the same observable; delta_m needs a D*.
    """
    return tuple(
        StudyCategory(
            name=f"{CHARM_IDENTIFIER[charm]}_{lepton}",
            label=f"{CHARM_LABEL[charm]} {LEPTON_LABEL[lepton]}",
            charm=charm,
            lepton=lepton,
            axes={name: axis.edges for name, axis in table.observables.items()},
            cuts={n: cut for n, cut in selection.items() if n != "delta_m" or "*" in charm} | table.selection,
        )
        for table in tables
        for charm in table.charm
        for lepton in table.leptons
    )
