"""Study files: read, checked whole, every problem told at once with file, line, key, value and remedy."""

from __future__ import annotations

import tomllib
from pathlib import Path

from pydantic import ValidationError
from semitau.core.errors import InputError, Problem

from .study import StudyConfig


def read_study(path: Path | str) -> StudyConfig:
    """The study in a TOML file.

    Raises InputError with all problems found.
    """
    path = Path(path)
    try:
        text = path.read_text(encoding="utf-8")
    except OSError as error:
        raise InputError(Problem("cannot be read", str(path), got=error.strerror or "")) from None
    try:
        study = StudyConfig.model_validate(tomllib.loads(text))
    except (tomllib.TOMLDecodeError, ValidationError) as error:
        raise InputError(Problem(str(error), str(path))) from None
    study._text, study._path = text, path
    return study
