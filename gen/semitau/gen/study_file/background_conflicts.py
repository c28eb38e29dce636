"""Rules between a [[background]] and the categories that it fills."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from pathlib import Path

import numpy as np

from .categories import StudyCategory
from .components import Background
from .laws import Column, Histogram
from .names import CHARM_HADRONS, LEPTONS
from .rules import shown, suggestion
from .sections import Conflict, Place, Sections, missing_file


def background_conflicts(sections: Sections) -> Iterator[Conflict]:
    """Backgrounds fill known categories, draw every axis of them, and correlate what they draw."""
    categories = sections.categories
    for i, background in sections.backgrounds.items():
        place: Place = ("background", i)
        if not any(background.expected.values()):
            yield Conflict(
                (*place, "expected"), "makes a component with no events", remedy="Expect some, or remove it."
            )
        if "category" in sections.whole:
            for name in background.expected:
                if name not in categories:
                    near = suggestion(name, categories)
                    yield Conflict((*place, "expected", name), "is no category", name, ", ".join(categories), near)
            known = [*categories, *CHARM_HADRONS]
            for name in background.shape_in:
                if name not in known:
                    near = suggestion(name, known)
                    yield Conflict((*place, "shape_in", name), "is no category or charm hadron", name, "", near)
        for name, expected in background.expected.items():
            if background.misidentified and expected and name in categories and categories[name].lepton not in LEPTONS:
                what = "holds no lepton that a hadron could be taken for"
                remedy = "Take it out, or give it a background without misidentified."
                yield Conflict((*place, "expected", name), what, name, remedy=remedy)
        yield from _missing_laws(place, background, categories)
        yield from _empty_axes(place, background, categories)
        yield from _correlations(place, background)
        yield from _shared_trees(place, background)
        yield from _files(place, background, sections.folder)


def _missing_laws(place: Place, background: Background, categories: Mapping[str, StudyCategory]) -> Iterator[Conflict]:
    missing: dict[str, list[str]] = {}
    for name, expected in background.expected.items():
        if expected and name in categories:
            laws = background.laws(name, categories[name].charm)
            needed = [*categories[name].axes, *(["p_lepton"] if background.misidentified else [])]
            for observable in needed:
                if observable not in laws:
                    missing.setdefault(observable, []).append(name)
    for observable, names in missing.items():
        reason = "misidentified leptons need it" if observable == "p_lepton" and background.misidentified else "an axis"
        what = f"draws no {observable} ({reason} of {', '.join(names)})".replace("it of", "it in")
        remedy = f'Add {observable} = {{ law = "...", range = [...] }}.'
        yield Conflict((*place, "shape"), what, remedy=remedy)


def _empty_axes(place: Place, background: Background, categories: Mapping[str, StudyCategory]) -> Iterator[Conflict]:
    told = set()
    for name, expected in background.expected.items():
        if not expected or name not in categories:
            continue
        for observable, edges in categories[name].axes.items():
            for key in (*background.overrides(name, categories[name].charm), None):
                shape = background.shape if key is None else background.shape_in[key]
                if observable in shape:
                    law, where = shape[observable], ("shape",) if key is None else ("shape_in", key)
                    outside = law.range and (law.range[1] <= edges[0] or law.range[0] >= edges[-1])
                    if outside and (where, observable) not in told:
                        told.add((where, observable))
                        wanted = f"a range that meets {edges[0]:g} to {edges[-1]:g}"
                        what = f"misses the axis of {name}: a component with no events"
                        yield Conflict((*place, *where, observable, "range"), what, shown(law.range), wanted)
                    break


def _correlations(place: Place, background: Background) -> Iterator[Conflict]:
    drawn = {**background.shape}
    for laws in background.shape_in.values():
        drawn.update(laws)
    sound, pairs = True, set()
    for first, row in background.correlation.items():
        for second in row:
            where: Place = (*place, "correlation", first, second)
            broken = ""
            if first == second:
                broken = "correlates an observable with itself"
            elif frozenset((first, second)) in pairs:
                broken = "gives the pair a second time"
            else:
                for name in (first, second):
                    if name not in background.shape:
                        broken = f"correlates {name}, which is not drawn"
                    elif isinstance(drawn[name], Column) or isinstance(background.shape[name], Column):
                        broken = f"correlates {name}, a column: columns of one tree keep their own correlation"
            pairs.add(frozenset((first, second)))
            if broken:
                sound = False
                yield Conflict(where, broken, remedy="Remove it.")
    if sound and background.correlation:
        lowest = float(np.linalg.eigvalsh(background.correlation_matrix)[0])
        if lowest < 1e-9:
            what, wanted = "is not positive definite", "a smallest eigenvalue above 0"
            remedy = "Make the correlations smaller, or give those of the pairs left out."
            yield Conflict((*place, "correlation"), what, f"smallest eigenvalue {lowest:.3g}", wanted, remedy)


def _shared_trees(place: Place, background: Background) -> Iterator[Conflict]:
    """A smooth column is drawn by itself, so it cannot keep its correlation with others of its tree."""
    for observable, law in background.shape.items():
        if not (isinstance(law, Column) and law.smooth):
            continue
        for name, other in background.shape.items():
            if name != observable and isinstance(other, Column) and (other.file, other.tree) == (law.file, law.tree):
                what = f"would lose its correlation with {name}, which comes from the same tree"
                where = (*place, "shape", observable, "smooth")
                yield Conflict(where, what, remedy="Leave smooth out, or use another tree.")
                break


def _files(place: Place, background: Background, folder: Path | None) -> Iterator[Conflict]:
    if folder is None:
        return
    shapes: list[tuple[Place, Mapping[str, object]]] = [(("shape",), background.shape)]
    shapes += [(("shape_in", key), laws) for key, laws in background.shape_in.items()]
    for where, laws in shapes:
        for observable, law in laws.items():
            if isinstance(law, Histogram | Column):
                yield from missing_file((*place, *where, observable, "file"), law.file, folder)
