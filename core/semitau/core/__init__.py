"""What generation and fit share: errors, templates and their file, the task engine, files that appear whole."""

from importlib import import_module
from typing import Any

_HOME = {
    "Category": "templates",
    "Component": "templates",
    "InputError": "errors",
    "Nuisance": "templates",
    "Observable": "templates",
    "Problem": "errors",
    "RootHistogram": "root_files",
    "RunError": "errors",
    "ScaleParameter": "templates",
    "SemitauError": "errors",
    "Template": "templates",
    "TemplateSet": "templates",
    "open_root": "root_files",
    "read_data": "template_file",
    "read_templates": "template_file",
    "root_histogram": "root_files",
    "run": "engine",
    "whole_file": "whole_files",
    "write_templates": "template_file",
    "write_whole": "whole_files",
}

__all__ = sorted(_HOME)


def __getattr__(name: str) -> Any:
    """Names are imported when asked for, so that a light one (the errors) does not bring numpy with it."""
    if name not in _HOME:
        raise AttributeError(f"module {__name__!r} has no attribute {name!r}")
    return getattr(import_module(f".{_HOME[name]}", __name__), name)


def __dir__() -> list[str]:
    return __all__
