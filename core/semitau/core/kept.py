"""Where work is kept between runs, finished or not, as plain arrays under a key of everything that it depends on."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any, Protocol

import numpy.typing as npt

Arrays = Mapping[str, npt.NDArray[Any]]


class Kept(Protocol):
    """Where arrays are kept. What comes back may be None at any time: then it is made again."""

    def take(self, kind: str, key: str) -> Arrays | None:
        """The arrays under this key."""

    def keep(self, kind: str, key: str, arrays: Arrays) -> None:
        """Keep the arrays under this key, in the place of what was there. RunError if that is not possible."""

    @property
    def pause(self) -> float:
        """Seconds between two times that incomplete work is kept."""
