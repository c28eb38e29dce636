"""What a block held before, and where it starts, must not matter. Nothing is statistical."""

from __future__ import annotations

from typing import Any

import numpy as np
import pytest
from semitau import gen
from semitau.core.streams import stream_key
from semitau.gen.block import D_PX, LANES, ROWS, SCRATCH_0, new_block
from semitau.gen.decays.chains import chains_of
from semitau.gen.truth.any_drawing import draw, table_of

SEED = 20261201


def chain(charm: str, tau_to: str) -> Any:
    return next(chains_of(gen.Decay("B0", charm, "tau"), (tau_to,)))


CHAINS = {
    "leptonic tau": lambda: chain("D*-", "mu"),
    "pion": lambda: chain("D-", "pi"),
    "rho": lambda: chain("D*-", "rho"),
    "a1": lambda: chain("D*-", "a1"),
    "excited charm": lambda: chain("D1(2420)-", "mu"),
    "double charm, D_s to tau": lambda: gen.double_charm_chains(("B0",), ("D*",), ("D_s",), ("tau",))[0],
    "double charm, D and K": lambda: gen.double_charm_chains(("B+",), ("D",), ("D K",), ("e",))[0],
}


@pytest.mark.parametrize("name", CHAINS)
def test_blocks_do_not_matter(name: str) -> None:
    """Truth rows have the same bits in any block; those of particles that a chain does not have are not left over."""
    table, stream = table_of(CHAINS[name]()), stream_key(SEED, "blocks")
    first, second = new_block(), np.full(ROWS * LANES, np.nan)
    draw(first, table, stream, np.uint64(0))
    draw(second, table, stream, np.uint64(100))
    rows = slice(0, SCRATCH_0 // LANES)
    assert np.isfinite(second.reshape(ROWS, LANES)[rows]).all()
    np.testing.assert_array_equal(
        first.reshape(ROWS, LANES)[rows, 100:], second.reshape(ROWS, LANES)[rows, : LANES - 100]
    )
    draw(second, table, stream_key(SEED + 1, "blocks"), np.uint64(0))
    assert not np.any(first[D_PX : D_PX + LANES] == second[D_PX : D_PX + LANES])
