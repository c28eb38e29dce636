"""A study file opened: read, checked, and with another seed if one is given."""

from __future__ import annotations

from pathlib import Path

from semitau.gen.study import StudyConfig
from semitau.gen.study_file import read_study


def open_study(path: Path, seed: int | None = None) -> StudyConfig:
    """The study in a file, with `seed` instead of its own unless None.

    Raises
    ------
    InputError : every problem of the file, with line, key, value and remedy.
    """
    study = read_study(path)
    if seed is None:
        return study
    section = study.study.model_copy(update={"seed": seed})
    return study.model_copy(update={"study": section})
