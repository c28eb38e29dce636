"""The form-factor sets that a study chooses: shipped ones by name, its own from files."""

from __future__ import annotations

from functools import lru_cache
from pathlib import Path

from semitau.core.errors import InputError, Problem

from ..decays.form_factor_parameters import TRANSITIONS
from ..decays.form_factor_set import FormFactorSet, form_factor_sets, form_factors, read_form_factors
from .machine import FormFactorSource


def chosen_set(source: FormFactorSource, transition: str, folder: Path) -> FormFactorSet:
    """The set for "D", "Dst" or "Dss". folder : of the study file.

    Raises InputError with all that is wrong with it; see `read_form_factors`.
    """
    if source.file is None:
        found = form_factors(str(source.name))
        _ = found[transition]
        return found
    path = folder / source.file
    try:
        stamp = (path.stat().st_mtime_ns, path.stat().st_size)
    except (OSError, ValueError):
        stamp = (0, 0)
    return _from_file(path, source.parametrisation, transition, stamp)


def sound_set(source: FormFactorSource, transition: str, folder: Path | None) -> FormFactorSet | None:
    """The same, None if something is wrong with it, or if it is a file and there is no folder to look in."""
    if source.file is not None and folder is None:
        return None
    try:
        return chosen_set(source, transition, folder or Path())
    except InputError:
        return None


@lru_cache(maxsize=32)
def _from_file(path: Path, parametrisation: str | None, transition: str, stamp: tuple[int, int]) -> FormFactorSet:
    """stamp : makes a changed file another one."""
    found = read_form_factors(path, parametrisation, transition)
    if transition not in found.transitions:
        got = ", ".join(TRANSITIONS[name] for name in found.transitions)
        remedy = f"Add a table [{transition}], or choose another file."
        raise InputError(Problem(f"does not describe {TRANSITIONS[transition]}", str(path), got=got, remedy=remedy))
    return found


def sets_describing(transition: str) -> list[str]:
    """Names of the shipped sets that do."""
    return [name for name in form_factor_sets() if transition in form_factors(name).transitions]
