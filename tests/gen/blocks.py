"""Blocks of events on their way through the response, for tests: numpy views of single rows."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np
from semitau.core.streams import event_key, stream_key
from semitau.gen import block as row
from semitau.gen.block import LANES, new_block
from semitau.gen.decays.chains import Channel, channels
from semitau.gen.response.compaction import move
from semitau.gen.response.finding import find, list_found
from semitau.gen.response.measuring import measure
from semitau.gen.response.setup import kernel_chain
from semitau.gen.templates.chunk_tasks import Bench
from semitau.gen.templates.component_plan import ChannelPlan
from semitau.gen.templates.variations import ChannelVariations
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.drawing import draw_decays

NO_VARIATIONS = ChannelVariations({}, {}, {})


def keys(seed: int, block: int, word: str = "response") -> np.ndarray:
    """Event keys of one block of a stream."""
    stream = stream_key(seed, word)
    return np.array([event_key(stream, np.uint64(block * LANES + i)) for i in range(LANES)], dtype=np.uint64)


def values(x: np.ndarray, *first: int) -> np.ndarray:
    """Rows of a block: (256,) for one, (rows, 256) for several."""
    found = np.array([x[place : place + LANES] for place in first])
    return found[0] if len(first) == 1 else found


def four(x: np.ndarray, first: int) -> np.ndarray:
    """(4, 256): px, py, pz, E from four rows in a row."""
    return values(x, *(first + k * LANES for k in range(4)))


def put(x: np.ndarray, first: int, rows: Sequence[np.ndarray] | np.ndarray) -> None:
    """Fill rows from `first` on."""
    for k, content in enumerate(rows):
        x[first + k * LANES : first + (k + 1) * LANES] = content


def at_rest() -> np.ndarray:
    """A block whose B is at rest in the centre-of-mass frame."""
    x = new_block()
    x[row.BOOST_GAMMA : row.BOOST_GAMMA + LANES] = 1.0
    return x


def isotropic(generator: np.random.Generator, momentum: float | np.ndarray, mass: float) -> np.ndarray:
    """(4, 256) isotropic px, py, pz, E."""
    c, phi = generator.uniform(-1.0, 1.0, LANES), generator.uniform(0.0, 2.0 * np.pi, LANES)
    s = np.sqrt(1.0 - c * c)
    p = momentum * np.array([s * np.cos(phi), s * np.sin(phi), c])
    return np.concatenate([p, [np.sqrt((p**2).sum(axis=0) + mass**2)]])


def channel(parent: str, charm: str, lepton: str, **kinds: str | None) -> Channel:
    """The one decay chain with these properties, e.g. ground="D0", soft="neutral_pion", bachelor="neutral"."""
    taus = (str(kinds["tau_to"]),) if kinds.get("tau_to") else ("e", "mu")
    chains = channels([parent], [charm], [lepton], tau_to=taus)
    found = [c for c in chains if all(getattr(c, k) == v for k, v in kinds.items())]
    if len(found) != 1:
        raise ValueError(f"{len(found)} chains fit: {[c.name for c in found]}")
    return found[0]


def plan(chain: Channel, events: int = 1, expected: float = 1.0) -> ChannelPlan:
    """A plan with no variations."""
    return ChannelPlan("test", "test", chain, expected, events, NO_VARIATIONS)


def measured(chosen: ChannelPlan, bench: Bench, stream: np.uint64, first: int) -> tuple[np.ndarray, np.ndarray, int]:
    """256 decays of a channel up to `measure`: truth block, block of the found ones, and how many these are."""
    x, y = new_block(), new_block()
    numbers = np.arange(first, first + LANES, dtype=np.uint64)
    chunk_keys = np.array([event_key(stream, number) for number in numbers], dtype=np.uint64)
    chain = kernel_chain(chosen.channel)
    draw_decays(x, channel_table(chosen.channel), stream, np.uint64(first))
    find(x, chunk_keys, chain, bench.detector, bench.quantiles)
    lanes, y_keys, y_numbers = (np.zeros(LANES, dtype=np.uint64) for _ in range(3))
    n = list_found(x, LANES, np.zeros(3, dtype=np.int64), lanes)
    move(x, chunk_keys, numbers, lanes, 0, n, y, y_keys, y_numbers, 0)
    measure(y, y_keys, chain, bench.detector)
    return x, y, n
