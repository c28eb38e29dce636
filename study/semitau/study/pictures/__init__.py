"""Pictures of a study, drawn from its results alone."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .gallery import draw_pictures as draw_pictures

__all__ = ["draw_pictures"]


def __getattr__(name: str) -> object:
    if name in __all__:
        return getattr(import_module(".gallery", __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
