"""One name for drawing the decays of a chain, whatever its kind: the type of the table decides when it is compiled."""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

import numpy as np
import numpy.typing as npt
from numba.extending import overload

from ..decays.double_charm import AnyChain, DoubleCharmChain
from .channel_table import ChannelTable, channel_table
from .double_charm_drawing import draw_double_charm
from .double_charm_table import DoubleCharmTable, double_charm_table
from .drawing import draw_decays

Floats = npt.NDArray[np.float64]
AnyTable = ChannelTable | DoubleCharmTable


def table_of(chain: AnyChain) -> AnyTable:
    """What `draw` needs of a decay chain."""
    return double_charm_table(chain) if isinstance(chain, DoubleCharmChain) else channel_table(chain)


def draw(x: Floats, table: AnyTable, stream: np.uint64, first_event: np.uint64) -> None:
    """Fill the truth rows of a block with 256 decays, see `drawing.draw_decays`. For compiled code and for Python."""
    kernel = draw_double_charm if isinstance(table, DoubleCharmTable) else draw_decays
    kernel(x, table, stream, first_event)


@overload(draw)
def _compiled(x: Any, table: Any, stream: Any, first_event: Any) -> Callable[..., None]:
    kernel = draw_double_charm if table.instance_class is DoubleCharmTable else draw_decays

    def fill(x: Any, table: Any, stream: Any, first_event: Any) -> None:
        kernel(x, table, stream, first_event)

    return fill
