"""The output folder of a study: where its files lie, whose it is, and what in it is still valid."""

from __future__ import annotations

import hashlib
import tomllib
from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import TYPE_CHECKING

from semitau.core.code_digest import code_digest, versions
from semitau.core.content_digest import content_digest
from semitau.core.errors import InputError, Problem

if TYPE_CHECKING:
    from semitau.gen.study_file.study import StudyConfig


@dataclass(frozen=True)
class StudyFolder:
    """Places of everything that a study makes."""

    path: Path

    @property
    def study_file(self) -> Path:
        """Copy of the study file: says whose folder this is."""
        return self.path / "study.toml"

    @property
    def templates(self) -> Path:
        return self.path / "templates.root"

    @property
    def store(self) -> Path:
        """What is dear to make, see `graph.store`."""
        return self.path / "store"

    @property
    def results(self) -> Path:
        return self.path / "results.json"

    @property
    def toys(self) -> Path:
        return self.path / "toys.root"

    @property
    def pictures(self) -> Path:
        return self.path / "pictures"

    @property
    def report(self) -> Path:
        return self.path / "report.html"


def claimed_folder(path: Path, name: str) -> StudyFolder:
    """The folder for the study called `name`, if it may be used: new, empty, or this study's already.

    A changed study of the same name keeps its folder; what no longer fits is made again.

    Raises
    ------
    InputError : a file stands there, or the folder holds another study or other things.
    """
    folder = StudyFolder(path)
    remedy = "Choose another folder with --output or [study] output, or move that one away."
    if not path.exists():
        return folder
    if not path.is_dir():
        raise InputError(Problem("the output folder is a file", where=str(path), remedy=remedy))
    entries = [entry.name for entry in path.iterdir() if not entry.name.startswith(".")]
    if not entries:
        return folder
    if not folder.study_file.exists():
        raise InputError(
            Problem(
                "the output folder holds files that are not of a study",
                where=str(path),
                got=", ".join(sorted(entries)[:3]),
                remedy=remedy,
            )
        )
    owner = _name_in(folder.study_file)
    if owner != name:
        raise InputError(
            Problem(
                "the output folder belongs to another study",
                where=str(path),
                got=repr(owner),
                wanted=repr(name),
                remedy=remedy,
            )
        )
    return folder


def own_folder(study: StudyConfig) -> StudyFolder | None:
    """The folder that [study] output names, if it is there and is this study's."""
    folder = StudyFolder(Path(study.study.output))
    if not folder.study_file.is_file() or _name_in(folder.study_file) != study.study.name:
        return None
    return folder


def _name_in(study_file: Path) -> str:
    try:
        return str(tomllib.loads(study_file.read_text(encoding="utf-8"))["study"]["name"])
    except (tomllib.TOMLDecodeError, UnicodeDecodeError, KeyError, TypeError):
        return "(not readable)"


def study_key(study: StudyConfig) -> str:
    """SHA-256 of all that results depend on: study text, seed, versions, code, files that it names.

    Raises InputError if the file of [average] is not sound any more.
    """
    from ..averages.checking import planned_by_others

    files = {file: file_digest(study.beside(file)) for file in named_files(study.model_dump(mode="json"))}
    code = code_digest("core", "gen", "fit", "study")
    return content_digest(study.digest, study.study.seed, versions(), code, files, planned_by_others(study))


def named_files(document: object) -> Iterator[str]:
    """Every file that a study names, wherever it stands in it: values of keys `file`."""
    if isinstance(document, Mapping):
        for key, value in document.items():
            if key == "file" and isinstance(value, str):
                yield value
            else:
                yield from named_files(value)
    elif isinstance(document, list | tuple):
        for item in document:
            yield from named_files(item)


def file_digest(path: Path) -> str:
    """SHA-256 of a file, "" if it cannot be read."""
    try:
        with open(path, "rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError:
        return ""  # what needs the file will say that it is not there
