"""Every toy of a study in a ROOT file, for those who want to look further than the summary."""

from __future__ import annotations

import io
from collections.abc import Mapping
from pathlib import Path

import numpy as np
import uproot
from semitau.core.whole_files import write_whole
from semitau.fit.toys.toys import ToyResults


def write_toys(path: Path, toys: ToyResults, linearity: Mapping[float, ToyResults]) -> None:
    """Write the trees `toys` and `linearity` (one entry a toy) to `path`, whole or not at all.

    Branches: `factor` (of the injected ratios), `toy` (number), `status` (0 for a good fit), `statistic` (goodness of
    fit), and for each ratio NAME, NAME_error and NAME_injected; the error of a failed fit is NaN.

    Raises
    ------
    RunError : it cannot be written.
    """
    memory = _Memory()
    with uproot.recreate(memory, compression=uproot.ZSTD(1)) as file:
        for name, sets in (("toys", {1.0: toys}), ("linearity", linearity)):
            if sets:
                parts = [_columns(factor, results) for factor, results in sets.items()]
                columns = {branch: np.concatenate([part[branch] for part in parts]) for branch in parts[0]}
                file.mktree(name, {branch: column.dtype for branch, column in columns.items()}).extend(columns)
    write_whole(path, memory.getvalue())


class _Memory(io.BytesIO):
    def close(self) -> None:
        """Stays open: the writer closes what it wrote to, and the bytes are wanted after that."""


def _columns(factor: float, toys: ToyResults) -> dict[str, np.ndarray]:
    columns = {
        "factor": np.full(toys.number, factor),
        "toy": np.arange(toys.number, dtype=np.int32),
        "status": toys.statuses.astype(np.int32),
        "statistic": np.asarray(toys.statistics),
    }
    for name in toys.ratios:
        place = toys.names.index(name)
        columns |= {
            name: toys.values[:, place],
            f"{name}_error": toys.errors[:, place],
            f"{name}_injected": np.full(toys.number, toys.injected[place]),
        }
    return columns
