"""Shapes that come from ROOT files: a histogram, or columns of a tree. Files are read with mistrust."""

from __future__ import annotations

from collections.abc import Sequence
from pathlib import Path

import numpy as np
from semitau.core.errors import InputError, Problem
from semitau.core.root_files import open_root, root_histogram, stored

from .quantile_table import Floats

MOST_ENTRIES = 5_000_000


def histogram(path: Path, name: str, limits: tuple[float, float] | None) -> tuple[Floats, Floats]:
    """Edges (k + 1,) and contents (k,) of a one-dimensional histogram, cut to `limits`; bins at the cut in proportion.

    Raises InputError: see core.root_files.root_histogram; more than one axis, a negative bin, nothing within limits.
    """
    read = root_histogram(path, name)
    where = f"{path}: {name}"
    if len(read.edges) != 1:
        raise InputError(Problem("must have one axis", where, got=f"{len(read.edges)} axes", remedy="Project it."))
    edges, contents = read.edges[0], read.contents
    if (contents < 0).any():
        bin_number = int(np.argmax(contents < 0))
        got = f"{contents[bin_number]:g} from {edges[bin_number]:g} to {edges[bin_number + 1]:g}"
        raise InputError(Problem("has a negative bin", where, got, remedy="Merge or clear such bins."))
    if limits is not None:
        low, high = max(limits[0], edges[0]), min(limits[1], edges[-1])
        if low < high:
            total = np.concatenate([[0.0], np.cumsum(contents)])
            inner = edges[(edges > low) & (edges < high)]
            cut = np.concatenate([[low], inner, [high]])
            contents, edges = np.diff(np.interp(cut, edges, total)), cut
        else:
            contents = np.zeros_like(contents)
    if not contents.sum() > 0:
        raise InputError(Problem("is empty within the range", where, remedy="Choose another histogram or range."))
    return edges, contents


def columns(path: Path, tree: str, branches: Sequence[str]) -> list[Floats]:
    """Columns of a TTree or RNTuple as float64, all of one length.

    Raises InputError: see core.root_files.open_root; no tree, no branch, a branch that is not one finite number an
    entry, no entries, more than MOST_ENTRIES.
    """
    with open_root(path) as directory:
        found = stored(directory, tree, str(path))
        where = f"{path}: {tree}"
        count = getattr(found, "num_entries", None)
        if count is None:
            raise InputError(Problem("is no tree", where, got=getattr(found, "classname", type(found).__name__)))
        if count == 0:
            raise InputError(Problem("has no entries", where))
        if count > MOST_ENTRIES:
            remedy = "Thin it: shapes need no more."
            raise InputError(Problem("has too many entries", where, str(count), f"up to {MOST_ENTRIES}", remedy))
        known = list(found.keys())
        missing = [branch for branch in branches if branch not in known]
        if missing:
            allowed = ", ".join(known[:12]) + (", ..." if len(known) > 12 else "")
            raise InputError(*(Problem("has no such branch", where, branch, allowed) for branch in missing))
        return [_column(found[branch], f"{where}: {branch}") for branch in branches]


def _column(branch: object, where: str) -> Floats:
    values = np.asarray(branch.array(library="np"))  # type: ignore[attr-defined]
    if values.ndim != 1 or values.dtype.kind not in "biuf":
        raise InputError(Problem("is not one number an entry", where, remedy="Choose a plain column of numbers."))
    column: Floats = values.astype(np.float64)
    if not np.isfinite(column).all():
        entry = int(np.argmin(np.isfinite(column)))
        raise InputError(Problem("is not finite", where, got=f"{column[entry]} in entry {entry}"))
    return column
