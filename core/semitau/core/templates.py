"""The types that stand between generation and fit: a set of templates with their variations."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass, field
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

Floats = NDArray[np.float64]


@dataclass(frozen=True)
class Observable:
    """A binned quantity: `name` as in the study file, `label` for axes, `unit` ("" if none), increasing `edges`."""

    name: str
    label: str
    unit: str
    edges: tuple[float, ...]


@dataclass(frozen=True)
class Category:
    """A reconstructed final state with its own axes (one to three observables)."""

    name: str
    label: str
    observables: tuple[Observable, ...]

    @property
    def shape(self) -> tuple[int, ...]:
        return tuple(len(observable.edges) - 1 for observable in self.observables)


@dataclass(frozen=True)
class Component:
    """What one template describes.

    role : "signal", "normalisation", "feed-down" or "background".
    scales_with : names of the `ScaleParameter`s whose product (each over its injected value) multiplies the template,
        e.g. ("R_D", "yield_D_light") for B -> D tau nu. Empty: the component is fixed but for its nuisances.
    """

    name: str
    label: str
    role: str
    scales_with: tuple[str, ...]


@dataclass(frozen=True)
class ScaleParameter:
    """A number that scales components.

    kind : "ratio" (value is the ratio itself) or "yield" (value relative to the expectation; injected 1).
    constraint : standard deviation of a Gaussian auxiliary measurement of the value; None if free.
    """

    name: str
    label: str
    kind: str
    injected: float
    constraint: float | None = None


@dataclass(frozen=True)
class Nuisance:
    """A variation as a nuisance parameter with a unit Gaussian constraint; `group` gathers rows of the budget."""

    name: str
    label: str
    group: str


@dataclass(frozen=True)
class Template:
    """Expected events of one component in one category.

    nominal, variance : (bins of the category's axes) float64, events and events squared (finite generated sample).
    plus, minus : nuisance name -> array of the same shape; the same keys in both; absent where it does not act.
    """

    nominal: Floats
    variance: Floats
    plus: Mapping[str, Floats] = field(default_factory=lambda: MappingProxyType({}))
    minus: Mapping[str, Floats] = field(default_factory=lambda: MappingProxyType({}))


@dataclass(frozen=True)
class TemplateSet:
    """Everything a fit needs, as read from or written to a template file.

    templates : (category name, component name) -> Template; a pair that is absent contributes nothing.
    data : category name -> observed counts, if any.
    provenance : plain JSON values: study text, seed, versions, hash of the study file.
    """

    categories: tuple[Category, ...]
    components: tuple[Component, ...]
    parameters: tuple[ScaleParameter, ...]
    nuisances: tuple[Nuisance, ...]
    templates: Mapping[tuple[str, str], Template]
    data: Mapping[str, Floats] = field(default_factory=lambda: MappingProxyType({}))
    provenance: Mapping[str, object] = field(default_factory=lambda: MappingProxyType({}))
