"""The report: everything that a study found, in one HTML file that needs nothing else."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .page import write_report as write_report

__all__ = ["write_report"]


def __getattr__(name: str) -> object:
    if name in __all__:
        return getattr(import_module(".page", __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
