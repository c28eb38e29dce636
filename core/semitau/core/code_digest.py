"""Which code and which libraries made a result: what stored results are told apart by."""

from __future__ import annotations

import hashlib
from functools import cache
from importlib.metadata import version
from importlib.util import find_spec
from pathlib import Path

LIBRARIES = ("numpy", "scipy", "numba")
"""Libraries whose version may move a last digit."""


@cache
def versions() -> dict[str, str]:
    """Program -> version, ours first."""
    return {name: version(name) for name in ("semitau", *LIBRARIES)}


@cache
def code_digest(*packages: str) -> str:
    """SHA-256 of the source of these packages, e.g. "core": a developer's change makes what is stored invalid."""
    digest = hashlib.sha256()
    for package in packages:
        spec = find_spec(f"semitau.{package}")
        for root in (spec.submodule_search_locations or ()) if spec is not None else ():
            for source in sorted(Path(root).rglob("*")):
                if source.suffix in (".py", ".toml"):
                    digest.update(f"{package}/{source.relative_to(root)}\n".encode())
                    digest.update(source.read_bytes())
    return digest.hexdigest()
