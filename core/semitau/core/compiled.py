"""Decorators for compiled code, with a cache on disk that knows what the code depends on.

numba keeps compiled functions beside their source, and takes them again while that one file is unchanged. Our
kernels have helpers, row numbers and constants of other files compiled in, so a change there would leave stale code in
use. Here the stamp of a cached function is a digest of its own file and of all files of this program that it imports,
directly or not.
"""

from __future__ import annotations

import hashlib
import re
from collections.abc import Callable
from contextlib import ExitStack, suppress
from functools import cache
from pathlib import Path
from typing import Any

from numba import njit

# Lines such as "from .block import ...", "from .. import block as row", "from semitau.core.streams import ...".
_IMPORT = re.compile(r"^from (\.+[\w.]*|semitau[\w.]*) import (.*)$", re.MULTILINE)


def kernel(function: Callable[..., Any]) -> Any:
    """Compile a function that Python calls, or that loops over lanes or events. It lets go of the interpreter lock.

    Division by zero gives inf or nan as in numpy, without a branch; floating-point arithmetic is not reordered.
    """
    return _stamped(njit(cache=True, nogil=True, error_model="numpy")(function), function)


def inlined(function: Callable[..., Any]) -> Any:
    """Compile a helper for one lane into each loop that calls it, so that the loop can still become SIMD code."""
    return _stamped(njit(cache=True, forceinline=True, error_model="numpy")(function), function)


def _stamped(dispatcher: Any, function: Callable[..., Any]) -> Any:
    index = getattr(getattr(dispatcher, "_cache", None), "_cache_file", None)
    if index is not None and hasattr(index, "_source_stamp"):
        index._source_stamp = (index._source_stamp, source_digest(function.__code__.co_filename))
        index._load_index = _or_empty(index._load_index)
        index.load, index.save = _one_at_a_time(index, index.load), _one_at_a_time(index, index.save)
    return dispatcher


def _or_empty(load: Callable[[], dict[Any, Any]]) -> Callable[[], dict[Any, Any]]:
    """An index that cannot be read counts as empty: one of an older version may name argument types that have moved
    since, one of a killed process may have been cut off."""

    def loaded() -> dict[Any, Any]:
        try:
            return load()
        except Exception:
            return {}

    return loaded


def _one_at_a_time(index: Any, step: Callable[..., Any]) -> Callable[..., Any]:
    """Processes share the folder. Two that add an entry at the same moment would give the same number to both, and one
    would find the other's code under its own arguments. Where a system or disk knows no locks, it is left to luck."""

    def alone(*arguments: Any) -> Any:
        with ExitStack() as held:
            with suppress(ImportError, OSError):
                from fcntl import LOCK_EX, flock

                lock = held.enter_context(open(Path(index._cache_path) / "one_at_a_time.lock", "ab"))
                flock(lock, LOCK_EX)
            return step(*arguments)

    return alone


@cache
def source_digest(file: str) -> str:
    """Digest of a source file and of all files of this program that it imports."""
    seen: set[Path] = set()
    waiting = [Path(file)]
    while waiting:
        path = waiting.pop()
        if path not in seen:
            seen.add(path)
            waiting += _imported(path)
    text = hashlib.blake2b(digest_size=16)
    for path in sorted(seen):
        text.update(path.name.encode() + b"\0" + _contents(path).encode() + b"\0")
    return text.hexdigest()


@cache
def _contents(path: Path) -> str:
    try:
        return path.read_text(encoding="utf-8")
    except OSError:  # a frozen program has no sources, and they do not change
        return ""


@cache
def _imported(path: Path) -> tuple[Path, ...]:
    """Files of this program that a file imports."""
    found = []
    for source, names in _IMPORT.findall(_contents(path)):
        module = source.lstrip(".")
        if source.startswith("."):
            home = path.parents[len(source) - len(module) - 1]
        else:
            package, _, module = module.removeprefix("semitau").lstrip(".").partition(".")
            home = _package(package)
        place = home.joinpath(*module.split(".")) if module else home
        # what is imported is a module itself, or names that may be modules of the package
        candidates = [place.with_suffix(".py"), *(place / f"{name}.py" for name in re.findall(r"\w+", names))]
        found += [candidate for candidate in candidates if candidate.is_file()]
    return tuple(found)


@cache
def _package(name: str) -> Path:
    import semitau

    return next((place for root in semitau.__path__ if (place := Path(root) / name).is_dir()), Path(name))
