"""Sums of a component kept between runs: as plain arrays under a key, also while they are incomplete.

The key of a component is a digest of everything that its histograms are computed from: random streams, decay chains
with their form factors and couplings, laws of backgrounds, detector, cuts, axes, numbers of events, code and libraries.
What only multiplies or combines histograms afterwards (expected numbers, constant factors, labels) is not part of it.
"""

from __future__ import annotations

from collections.abc import Sequence
from typing import Any

import numpy as np
import numpy.typing as npt
from semitau.core.code_digest import code_digest, versions
from semitau.core.content_digest import content_digest
from semitau.core.kept import Arrays

from .chunk_tasks import CHUNK_EVENTS, Bench, ChannelInputs
from .component_parts import Part, PartSums

KIND = "component"


def component_key(parts: Sequence[Part], bench: Bench) -> str:
    """Key of a component that is made of these parts."""
    inputs = [(part.events, _shared(part, bench), part.inputs) for part in parts]
    return content_digest(code_digest("core", "gen"), versions(), inputs)


def _shared(part: Part, bench: Bench) -> str:
    return bench.digest if isinstance(part.inputs, ChannelInputs) else bench.selection_digest


def packed(sums: Sequence[PartSums]) -> Arrays:
    """Parts of a component, finished or not, the first ones."""
    whole = [part.sums for part in sums]
    return {
        "events": np.array([part.events for part in sums], dtype=np.int64),
        "seconds": np.array([part.seconds for part in sums]),
        "chunks": np.array([len(part.paces) for part in sums], dtype=np.int64),
        "paces": _flat([np.array(part.paces) for part in sums], np.float64),
        "counts": _flat([array for part in whole for array in (part.found, part.flow)], np.int64),
        "contents": _flat(
            [array for part in whole for array in (part.histogram, part.spread, part.pieces, part.moments)], np.float64
        ),
    }


def unpacked(arrays: Arrays, parts: Sequence[Part], bench: Bench) -> list[PartSums] | None:
    """What `packed` was given; None if the arrays are not the sums of the first of these parts."""
    try:
        events, chunks = arrays["events"].tolist(), arrays["chunks"].tolist()
        found = [PartSums(bench, part) for part in parts[: len(events)]]
        if not 0 < len(events) <= len(parts) or not all(map(_is_possible, events, parts)):
            return None
        if any(n < part.events for n, part in zip(events[:-1], parts, strict=False)):
            return None
        paces = np.split(arrays["paces"], np.cumsum(chunks)[:-1])
        for sums, n, seconds, pace in zip(found, events, arrays["seconds"].tolist(), paces, strict=True):
            sums.events, sums.seconds, sums.paces = n, seconds, pace.tolist()
        whole = [part.sums for part in found]
        _fill([array for part in whole for array in (part.found, part.flow)], arrays["counts"])
        _fill(
            [array for part in whole for array in (part.histogram, part.spread, part.pieces, part.moments)],
            arrays["contents"],
        )
    except (KeyError, ValueError, TypeError):
        return None
    return found


def _is_possible(events: int, part: Part) -> bool:
    """Whole chunks, or all of them."""
    return events == part.events or (0 < events < part.events and events % CHUNK_EVENTS == 0)


def _flat(arrays: Sequence[npt.NDArray[Any]], kind: npt.DTypeLike) -> npt.NDArray[Any]:
    return np.concatenate([np.zeros(0, kind), *(array.ravel() for array in arrays)])


def _fill(targets: Sequence[npt.NDArray[Any]], flat: npt.NDArray[Any]) -> None:
    """Raises ValueError if the lengths differ."""
    sizes = np.cumsum([target.size for target in targets])
    if flat.ndim != 1 or flat.size != sizes[-1] or flat.dtype != targets[0].dtype:
        raise ValueError("not these sums")
    for target, piece in zip(targets, np.split(flat, sizes[:-1]), strict=True):
        target[...] = piece.reshape(target.shape)
