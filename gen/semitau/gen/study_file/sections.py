"""A study taken apart into tables that are sound by themselves, for the checks between tables."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import NamedTuple

from .categories import CategoryTable, Cut, StudyCategory, written_out
from .components import Background, Mode
from .detector import Detector
from .double_charm import DoubleCharm
from .fit import FitSection
from .fractions import BranchingFractionTables
from .machine import Experiment, FormFactors
from .rules import shown
from .variations import Variation
from .wilson import Quadratic, Wilson

Place = tuple[str | int, ...]
COMPONENTS = ("mode", "double_charm", "background")
SECTIONS = (*COMPONENTS, "category", "variation")


class Conflict(NamedTuple):
    """A broken rule and its place; the rest as in core.errors.Problem."""

    place: Place
    what: str
    got: str = ""
    wanted: str = ""
    remedy: str = ""


@dataclass(frozen=True)
class Sections:
    """Tables that are sound by themselves, by their index in the file; None stands for a table that is not.

    whole : names of sections without a broken table: "mode", "background", "category", ...
    components : component names of all modes and backgrounds, sound or not.
    folder : where files named in the study are looked for; None if they are not.
    """

    modes: Mapping[int, Mode]
    double_charms: Mapping[int, DoubleCharm]
    backgrounds: Mapping[int, Background]
    category_tables: Mapping[int, CategoryTable]
    variations: Mapping[int, Variation]
    selection: Mapping[str, Cut] | None
    detector: Detector | None
    form_factors: FormFactors | None
    fit: FitSection | None
    whole: frozenset[str]
    components: frozenset[str]
    folder: Path | None = None
    wilson: Wilson | None = None
    quadratic: Quadratic | None = None
    experiment: Experiment | None = None
    fractions: BranchingFractionTables | None = None

    @property
    def categories(self) -> dict[str, StudyCategory]:
        """Categories of the sound tables, by name."""
        tables = self.category_tables.values()
        return {category.name: category for category in written_out(tables, self.selection or {})}


def missing_file(place: Place, file: str, folder: Path) -> Iterator[Conflict]:
    """A conflict if there is no file of this name, seen from `folder`."""
    try:
        found, is_folder = (folder / file).is_file(), (folder / file).is_dir()
    except (OSError, ValueError):  # a name that no file can have
        found, is_folder = False, False
    if is_folder:
        yield Conflict(place, "is a folder", shown(file), remedy="Name the file in it.")
    elif not found:
        remedy = "Relative names are looked for beside the study file."
        yield Conflict(place, "there is no such file", shown(file), remedy=remedy)
