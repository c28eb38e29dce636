"""Toys kept between runs: the first ones of a set, however many were wanted at the time."""

from __future__ import annotations

import time
from collections.abc import Iterator

import numpy as np
from numpy.typing import NDArray
from semitau.core.code_digest import code_digest, versions
from semitau.core.content_digest import content_digest
from semitau.core.kept import Arrays, Kept
from semitau.core.templates import Floats

KIND = "toys"
Batch = tuple[Floats, Floats, NDArray[np.int64], Floats, NDArray[np.int64]]
"""Values and errors (toys, parameters), statuses, statistics, steps (toys,)."""

_NAMES = ("values", "errors", "statuses", "statistics", "steps")


def toys_key(common: object) -> str:
    """Key of the toys that are drawn and fitted with `common`: everything that they depend on but their number."""
    return content_digest(code_digest("core", "fit"), versions(), common)


def kept_batch(kept: Kept, key: str, parameters: int) -> Batch | None:
    """The toys under a key, None if there are none or they are not what they should be."""
    arrays = kept.take(KIND, key)
    if arrays is None:
        return None
    try:
        values, errors, statuses, statistics, steps = (arrays[name] for name in _NAMES)
    except KeyError:
        return None
    n = statuses.size
    sound = all(table.shape == (n, parameters) and table.dtype == np.float64 for table in (values, errors))
    sound &= all(column.shape == (n,) and column.dtype == np.int64 for column in (statuses, steps))
    sound &= statistics.shape == (n,) and statistics.dtype == np.float64
    return (values, errors, statuses, statistics, steps) if sound and n else None


def keeping(batches: Iterator[Batch], kept: Kept, key: str, first: list[Batch]) -> Iterator[Batch]:
    """The same batches, kept now and then and in the end, also when the work is interrupted. first : what was there."""
    found, last, unkept = list(first), time.monotonic(), False
    try:
        for batch in batches:
            found.append(batch)
            unkept = True
            if time.monotonic() - last > kept.pause:
                found = [joined(found)]
                kept.keep(KIND, key, _arrays(found[0]))
                last, unkept = time.monotonic(), False
            yield batch
    finally:
        if unkept:
            kept.keep(KIND, key, _arrays(joined(found)))


def joined(batches: list[Batch], n: int | None = None) -> Batch:
    """All batches as one, or the first n toys of them."""
    values, errors, statuses, statistics, steps = (np.concatenate(part)[:n] for part in zip(*batches, strict=True))
    return values, errors, statuses, statistics, steps


def _arrays(batch: Batch) -> Arrays:
    return dict(zip(_NAMES, batch, strict=True))
