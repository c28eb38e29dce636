"""What users see: the command line, whole studies, their results, pictures and report."""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from .report import write_report as write_report
    from .results import Results as Results
    from .results import read_results as read_results
    from .run.study_run import run_study as run_study

__all__ = ["Results", "read_results", "run_study", "write_report"]

_HOMES = {
    "Results": ".results",
    "read_results": ".results",
    "run_study": ".run.study_run",
    "write_report": ".report",
}


def __getattr__(name: str) -> object:
    if name in _HOMES:
        return getattr(import_module(_HOMES[name], __name__), name)
    raise AttributeError(f"module {__name__!r} has no attribute {name!r}")


def __dir__() -> list[str]:
    return sorted(__all__)
