"""Template sets as ROOT files, version 1 of the format: see docs/template_file.md.

The file is a contract between any simulation and any fit, so the reader trusts nothing that it finds.
"""

from __future__ import annotations

import io
from collections.abc import Iterator, Mapping
from pathlib import Path
from typing import Any

import boost_histogram as bh
import numpy as np
import uproot

from .errors import InputError, Problem
from .root_files import RootHistogram, histogram_of, open_root
from .template_meta import Description, describe, understand
from .templates import ONE, Category, Floats, Template, TemplateSet
from .whole_files import write_whole

Histogram = bh.Histogram[Any]
SIDES = ("plus", "minus")
QUADRATIC, MOMENTS = "quadratic", "moments"
SHOWN_PROBLEMS = 20
"""A wrong edge is wrong in every histogram: after so many problems the rest is only counted."""


def write_templates(templates: TemplateSet, path: Path | str) -> None:
    """Write a template set to a ROOT file, whole or not at all.

    Histograms are TH1D, TH2D or TH3D: the nominal ones with squared weights, all with empty flow bins.

    Raises
    ------
    InputError : the provenance holds other than plain JSON values.
    RunError : the file cannot be written.
    """
    meta = describe(templates)
    memory = _Memory()  # many small writes: a file would be slower, and whole_files would see fewer of the failures
    # The moments that ROOT keeps beside the bins may overflow where the bins do not; nobody reads them.
    with np.errstate(over="ignore", invalid="ignore"), uproot.recreate(memory, compression=uproot.ZSTD(1)) as directory:
        directory["meta"] = meta
        for category in templates.categories:
            weighted, plain = _empty(category, bh.storage.Weight()), _empty(category, bh.storage.Double())
            histograms: dict[str, Histogram] = {}
            for component in templates.components:
                template = templates.templates.get((category.name, component.name))
                if template is not None:
                    histograms |= {
                        f"{category.name}/{component.name}/{name}": histogram
                        for name, histogram in _histograms(template, weighted, plain)
                    }
            if category.name in templates.data:
                histograms[f"{category.name}/data"] = _filled(plain, templates.data[category.name])
            directory.update(histograms)
    write_whole(path, memory.getvalue())


class _Memory(io.BytesIO):
    def close(self) -> None:
        """Stays open: the writer closes what it wrote to, and the bytes are wanted after that."""


def _empty(category: Category, storage: Any) -> Histogram:
    axes = []
    for observable in category.observables:
        axis = bh.axis.Variable(observable.edges)
        axis.label = f"{observable.label} [{observable.unit}]" if observable.unit else observable.label
        axes.append(axis)
    return bh.Histogram(*axes, storage=storage)


def _histograms(template: Template, weighted: Histogram, plain: Histogram) -> Iterator[tuple[str, Histogram]]:
    nominal = weighted.copy()
    nominal.view()[...] = np.stack([template.nominal, template.variance], axis=-1)
    yield "nominal", nominal
    for side in SIDES:
        for name, contents in getattr(template, side).items():
            yield f"{side}/{name}", _filled(plain, contents)
    for (first, second), contents in template.quadratic.items():
        yield f"{QUADRATIC}/{first}/{second}", _filled(plain, contents)
    if template.moments is not None:
        size = len(template.moments)
        axes = [bh.axis.Regular(size, 0.0, size), bh.axis.Regular(size, 0.0, size)]
        yield f"{QUADRATIC}/{MOMENTS}", _filled(bh.Histogram(*axes, storage=bh.storage.Double()), template.moments)


def _filled(empty: Histogram, contents: Floats) -> Histogram:
    histogram = empty.copy()
    histogram.view()[...] = contents
    return histogram


def read_templates(path: Path | str) -> TemplateSet:
    """Read a template file and check all that it says.

    Contents of flow bins are left out: they lie outside the axes.

    Raises
    ------
    InputError : no such file, not a ROOT file, truncated; no description or one of another major version; a histogram
        that the description does not name, of other edges, without squared weights, not finite, with a negative
        variance or with only one side of a variation; data that `read_data` refuses.
    """
    with open_root(path) as directory:
        description = _description(directory, str(path))
        read = _Reader(str(path), description.categories)
        templates, data = read.everything(directory, description)
    problems = read.problems
    if not problems:
        try:
            return TemplateSet(
                description.categories,
                description.components,
                description.parameters,
                description.nuisances,
                templates,
                data,
                description.provenance,
                description.coefficients,
            )
        except InputError as error:
            problems = [problem.inside(str(path)) for problem in error.problems]
    raise InputError(*_first(problems))


def read_data(path: Path | str, templates: TemplateSet, *, whole_counts: bool = True) -> Mapping[str, Floats]:
    """Read observed counts: the histograms `<category>/data` of any ROOT file, one for each category.

    whole_counts : refuse contents that are no whole numbers (False for an expected set).
    Returns category name -> (bins of the category's axes) float64.

    Raises
    ------
    InputError : see `open_root`; a category without data, other edges than the templates', contents that are negative,
        not finite or no whole numbers, or data outside the axes (in the flow bins).
    """
    with open_root(path) as directory:
        read = _Reader(str(path), templates.categories)
        names = directory.keys(recursive=True, cycle=False, filter_classname="TH*")
        data: dict[str, Floats] = {}
        for category in templates.categories:
            name = f"{category.name}/data"
            if name in names:
                read.counts(directory, category, data, whole_counts)
            else:
                holds = ", ".join(names[:5]) + (", ..." if len(names) > 5 else "")
                read.wrong("no data for this category", name, remedy=f"The file holds: {holds or 'no histogram'}.")
    if read.problems:
        raise InputError(*_first(read.problems))
    return data


def _description(directory: Any, where: str) -> Description:
    text = directory.get("meta")
    if not isinstance(text, str):
        what = "not a template file: it holds no 'meta'" if text is None else "'meta' is not a string"
        raise InputError(Problem(what, where, remedy="Make one with 'semitau build', or see docs/template_file.md."))
    return understand(str(text), f"{where}: meta")


def _first(problems: list[Problem]) -> list[Problem]:
    more = len(problems) - SHOWN_PROBLEMS
    return problems if more <= 0 else [*problems[:SHOWN_PROBLEMS], Problem(f"and {more} more problems of this file")]


class _Reader:
    """Reads histograms one by one and gathers what is wrong with them."""

    def __init__(self, path: str, categories: tuple[Category, ...]) -> None:
        self.path = path
        self.categories = {category.name: category for category in categories}
        self.problems: list[Problem] = []

    def wrong(self, what: str, where: str, got: str = "", wanted: str = "", remedy: str = "") -> None:
        self.problems.append(Problem(what, f"{self.path}: {where}", got, wanted, remedy))

    def everything(
        self, directory: Any, description: Description
    ) -> tuple[dict[tuple[str, str], Template], dict[str, Floats]]:
        """All templates and data of an open file."""
        components = {component.name for component in description.components}
        nuisances = {nuisance.name for nuisance in description.nuisances}
        pieces = (ONE, *(coefficient.name for coefficient in description.coefficients))
        found: dict[tuple[str, str], dict[str, str]] = {}
        data: dict[str, Floats] = {}
        for name, kind in directory.iterclassnames(recursive=True, cycle=False):
            match name.split("/"):
                case _ if name == "meta" or kind.startswith("TDirectory"):
                    pass
                case [category, *_] if category not in self.categories:
                    self.wrong("unknown category", name, repr(category), ", ".join(self.categories))
                case [category, "data"]:
                    self.counts(directory, self.categories[category], data, whole_counts=False)
                case [_, component, *_] if component not in components:
                    self.wrong("unknown component", name, repr(component), ", ".join(sorted(components)))
                case [category, component, "nominal"]:
                    found.setdefault((category, component), {})["nominal"] = name
                case [category, component, "plus" | "minus" as side, nuisance] if nuisance in nuisances:
                    found.setdefault((category, component), {})[f"{side}/{nuisance}"] = name
                case [_, _, "plus" | "minus", nuisance]:
                    self.wrong("unknown nuisance", name, repr(nuisance), ", ".join(sorted(nuisances)) or "none")
                case [category, component, "quadratic", a, b] if a in pieces and b in pieces:
                    found.setdefault((category, component), {})[f"{QUADRATIC}/{a}/{b}"] = name
                case [_, _, "quadratic", a, b]:
                    unknown = a if a not in pieces else b
                    self.wrong("unknown coefficient", name, repr(unknown), ", ".join(pieces))
                case [category, component, "quadratic", "moments"]:
                    found.setdefault((category, component), {})[f"{QUADRATIC}/{MOMENTS}"] = name
                case _:
                    allowed = "nominal, plus/<nuisance>, minus/<nuisance>, quadratic/<a>/<b>, quadratic/moments, data"
                    self.wrong("unknown object", name, kind, allowed)
        templates = {key: self.template(directory, key, names) for key, names in found.items()}
        return {key: template for key, template in templates.items() if template is not None}, data

    def template(self, directory: Any, key: tuple[str, str], names: dict[str, str]) -> Template | None:
        category, where = self.categories[key[0]], "/".join(key)
        if "nominal" not in names:
            self.wrong("variations without a nominal histogram", where, remedy=f"Add {where}/nominal.")
            return None
        matrix = names.pop(f"{QUADRATIC}/{MOMENTS}", None)
        moments = None if matrix is None else self.matrix(directory, matrix)
        if matrix is not None and moments is None:
            return None
        read = {part: self.histogram(directory, name, category) for part, name in names.items()}
        nominal = read["nominal"]
        if nominal is not None and not nominal.weighted:
            self.wrong("no squared weights", f"{where}/nominal", remedy="Call Sumw2() before filling it.")
        if nominal is None or None in read.values():
            return None
        sides = {
            side: {
                part.removeprefix(f"{side}/"): histogram.contents
                for part, histogram in read.items()
                if histogram is not None and part.startswith(f"{side}/")
            }
            for side in SIDES
        }
        try:
            pieces = {
                (part.split("/")[1], part.split("/")[2]): histogram.contents
                for part, histogram in read.items()
                if histogram is not None and part.startswith(f"{QUADRATIC}/")
            }
            return Template(nominal.contents, nominal.variances, sides["plus"], sides["minus"], pieces, moments)
        except InputError as error:
            self.problems += [problem.inside(f"{self.path}: {where}") for problem in error.problems]
            return None

    def matrix(self, directory: Any, name: str) -> Floats | None:
        """A histogram of two axes as a matrix; its edges mean nothing."""
        try:
            histogram = histogram_of(directory[name], f"{self.path}: {name}")
        except InputError as error:
            self.problems += error.problems
            return None
        if len(histogram.edges) != 2:
            self.wrong("wrong number of axes", name, str(len(histogram.edges)), "2")
            return None
        return histogram.contents

    def counts(self, directory: Any, category: Category, data: dict[str, Floats], whole_counts: bool) -> None:
        name = f"{category.name}/data"
        histogram = self.histogram(directory, name, category)
        if histogram is None:
            return
        counts = histogram.contents
        data[category.name] = counts
        if histogram.outside != 0:
            self.wrong(
                "data outside the axes",
                name,
                got=f"{histogram.outside:g} events in underflow and overflow bins",
                wanted="0",
                remedy="Cut on the range of the axes first, or widen the edges of the study.",
            )
        not_whole = (counts != np.floor(counts)) & whole_counts
        for what, bad in (("negative count", counts < 0), ("not a whole number of events", not_whole)):
            if bad.any():
                place = np.argwhere(bad)[0].tolist()
                more = f" and {bad.sum() - 1} more" if bad.sum() > 1 else ""
                self.wrong(what, f"{name} bin {place}{more}", got=f"{counts[tuple(place)]:g}")

    def histogram(self, directory: Any, name: str, category: Category) -> RootHistogram | None:
        try:
            histogram = histogram_of(directory[name], f"{self.path}: {name}")
        except InputError as error:
            self.problems += error.problems
            return None
        if len(histogram.edges) != len(category.observables):
            self.wrong("wrong number of axes", name, str(len(histogram.edges)), str(len(category.observables)))
            return None
        for observable, edges in zip(category.observables, histogram.edges, strict=True):
            wanted = np.asarray(observable.edges)
            # Equal bins are stored by their ends, so that other programs' inner edges may differ in the last digits.
            if len(edges) != len(wanted) or not np.allclose(edges, wanted, rtol=0, atol=1e-9 * np.diff(wanted).min()):
                self.wrong(
                    f"edges of {observable.name} differ from the description",
                    name,
                    got=_short(edges),
                    wanted=_short(wanted),
                    remedy="Fill it with the edges of the study.",
                )
                return None
        return histogram


def _short(edges: Floats) -> str:
    shown = [f"{edge:.12g}" for edge in edges]
    return "[" + ", ".join(shown if len(shown) <= 8 else [*shown[:4], "...", *shown[-2:]]) + "]"
