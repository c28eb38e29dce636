"""The store that a command works with."""

from __future__ import annotations

from collections.abc import Iterator
from contextlib import contextmanager
from pathlib import Path
from tempfile import TemporaryDirectory

from semitau.gen.study_file.study import StudyConfig

from ..run.study_folder import own_folder
from .store import Store


@contextmanager
def open_store(study: StudyConfig) -> Iterator[Store]:
    """The store of the study's folder if the study has been run or built there; else one that is gone afterwards."""
    folder = own_folder(study)
    if folder is not None:
        store = Store(folder.store)
        with store.in_use():
            yield store
        return
    with TemporaryDirectory(prefix="semitau-") as name:
        yield Store(Path(name))
