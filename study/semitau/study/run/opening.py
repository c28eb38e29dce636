"""A study file opened: read, checked, and with another seed if one is given."""

from __future__ import annotations

from pathlib import Path

from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig


def open_study(path: Path, seed: int | None = None) -> StudyConfig:
    """The study in a file, with `seed` instead of its own unless None.

    Raises
    ------
    InputError : every problem of the file, with line, key, value and remedy; then those of the file of [average].
    """
    study = read_study(path)
    if study.average is not None:
        from ..averages.checking import checked_average

        checked_average(study)
    if seed is None:
        return study
    section = study.study.model_copy(update={"seed": seed})
    return study.model_copy(update={"study": section})


def thinned(study: StudyConfig, share: float) -> StudyConfig:
    """The study with this share of its generated events, at least one for each component; expectations stay."""
    if share == 1.0:
        return study

    def fewer(events: int) -> dict[str, int]:
        return {"events": max(1, round(share * events))}

    return study.model_copy(
        update={
            "modes": tuple(mode.model_copy(update=fewer(mode.events)) for mode in study.modes),
            "double_charms": tuple(item.model_copy(update=fewer(item.events)) for item in study.double_charms),
            "backgrounds": tuple(back.model_copy(update=fewer(back.events)) for back in study.backgrounds),
        }
    )
