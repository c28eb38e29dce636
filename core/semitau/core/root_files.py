"""ROOT files of other programs, read with mistrust: whatever is wrong with one is an InputError that names it."""

from __future__ import annotations

import os
from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass
from difflib import get_close_matches
from pathlib import Path
from typing import Any

import numpy as np
import uproot

from .errors import InputError, Problem, SemitauError
from .templates import Floats

_HISTOGRAMS = ("TH1", "TH2", "TH3")


@dataclass(frozen=True, eq=False)
class RootHistogram:
    """A plain histogram of one to three axes, without its flow bins.

    contents, variances : (bins of each axis) float64. Variances are the squared weights, or the contents where the
        file holds none (`weighted` is then False).
    edges : for each axis its edges, finite and increasing.
    outside : sum of the contents of all underflow and overflow bins.
    all_contents, all_variances : the same with a flow bin at both ends of each axis. entries : how often it was filled.
    """

    contents: Floats
    variances: Floats
    edges: tuple[Floats, ...]
    weighted: bool
    outside: float
    all_contents: Floats
    all_variances: Floats
    entries: float


@contextmanager
def open_root(path: Path | str) -> Iterator[Any]:
    """Open a ROOT file for reading, give its top directory (of uproot), close it.

    Raises
    ------
    InputError : no such file, not readable, not a ROOT file, truncated or damaged; whatever the body meets while it
        reads the file, too.
    """
    where = str(path)
    if not isinstance(path, str | os.PathLike):
        raise InputError(Problem("not a path", where="path", got=type(path).__name__, wanted="a string or a Path"))
    try:
        with open(path, "rb") as file:
            if file.read(4) != b"root":
                raise InputError(
                    Problem("not a ROOT file", where, remedy="Give a file that ROOT, uproot or semitau wrote.")
                )
        # A dict keeps a colon in the path from being taken for an object's name; the handler keeps to local files.
        with uproot.open({where: None}, handler=uproot.source.file.MemmapSource, object_cache=500) as directory:
            if directory.file.fEND > Path(path).stat().st_size:
                raise InputError(Problem("the ROOT file is truncated", where, remedy="Copy or make it again."))
            yield directory
    except SemitauError:
        raise
    except OSError as error:
        if error.errno is None:
            raise _damaged(where, error) from error
        raise InputError(Problem(f"cannot be read: {(error.strerror or '').lower()}", where)) from error
    except Exception as error:  # a damaged file can trip the decoder anywhere, with any exception
        raise _damaged(where, error) from error


def _damaged(where: str, error: Exception) -> InputError:
    first = (str(error).strip().splitlines() or [""])[0][:120]
    return InputError(
        Problem(
            "the ROOT file is truncated, damaged, or of a kind that cannot be read",
            where,
            remedy=f"Copy or make it again. The decoder says: {type(error).__name__}: {first}".rstrip(" :,"),
        )
    )


def root_histogram(path: Path | str, name: str) -> RootHistogram:
    """Read one TH1, TH2 or TH3 of any number type (also what ROOT itself wrote) from a ROOT file.

    path : the file; name : the histogram's path in it, e.g. "sidebands/continuum_mm2".

    Raises
    ------
    InputError : see `open_root`; no such object (suggests a near name), not a plain histogram, no axis limits, or
        contents that are not finite.
    """
    with open_root(path) as directory:
        return histogram_of(stored(directory, name, str(path)), f"{path}: {name}")


def stored(directory: Any, name: str, where: str) -> Any:
    """The object `name` of an open directory, or an InputError that suggests a near name."""
    if name in directory:
        return directory[name]
    names = directory.keys(recursive=True, cycle=False)
    near = get_close_matches(name, names, n=1)
    holds = ", ".join(names[:8]) + (", ..." if len(names) > 8 else "")
    remedy = f"Did you mean {near[0]!r}?" if near else f"The file holds: {holds or 'nothing'}."
    raise InputError(Problem("no such object in the file", where, got=repr(name), remedy=remedy))


def histogram_of(stored_object: Any, where: str) -> RootHistogram:
    """The plain form of an uproot histogram; `where` goes into messages. Raises InputError as `root_histogram`."""
    kind = getattr(stored_object, "classname", type(stored_object).__name__)
    if kind[:3] not in _HISTOGRAMS or len(kind) != 4:
        wanted = "TH1, TH2 or TH3 (C, S, I, F or D)"
        raise InputError(Problem("not a plain histogram", where, got=kind, wanted=wanted))
    edges = tuple(np.asarray(axis.edges(flow=False), dtype=np.float64) for axis in stored_object.axes)
    if not all(_increasing(axis) for axis in edges):
        remedy = "Give its axes limits; a histogram still in its filling buffer has none."
        raise InputError(
            Problem("axis limits do not increase", where, got=str([e.tolist()[:3] for e in edges]), remedy=remedy)
        )
    all_bins = np.asarray(stored_object.values(flow=True), dtype=np.float64)
    inside = (slice(1, -1),) * all_bins.ndim
    contents = np.ascontiguousarray(all_bins[inside])
    # Not the object's own variances: those hide negative and NaN squared weights behind zeros.
    squares = np.asarray(stored_object.member("fSumw2"), dtype=np.float64)
    weighted = len(squares) > 0
    if len(squares) not in (0, all_bins.size):
        raise InputError(
            Problem("squared weights and bins differ in number", where, str(len(squares)), str(all_bins.size))
        )
    # ROOT runs through the first axis fastest.
    all_squares = squares.reshape(all_bins.shape[::-1]).T if weighted else np.abs(all_bins)
    variances = np.ascontiguousarray(all_squares[inside])
    for what, values in (("contents", contents), ("squared weights", variances)):
        if not np.isfinite(values).all():
            place = np.argwhere(~np.isfinite(values))[0].tolist()
            raise InputError(Problem(f"{what} not finite", f"{where} bin {place}", got=f"{values[tuple(place)]}"))
    entries = float(stored_object.member("fEntries"))
    return RootHistogram(
        contents,
        variances,
        edges,
        weighted,
        _outside(all_bins, inside),
        all_bins,
        np.ascontiguousarray(all_squares),
        entries,
    )


def _outside(all_bins: Floats, inside: Sequence[slice]) -> float:
    flow = all_bins.copy()
    flow[tuple(inside)] = 0.0
    return float(flow.sum())


def _increasing(edges: Floats) -> bool:
    return len(edges) >= 2 and bool(np.isfinite(edges).all()) and bool((np.diff(edges) > 0).all())
