"""The store of a study: what is dear to make, in files under keys of everything that it depends on.

Files appear whole; they are read with mistrust, for they may be damaged, foreign, or of another version: whatever is
not what it should be is made again. Two programs may use one store at once. What no run needs any more is removed by
the next run that ends well while nobody else uses the store.
"""

from __future__ import annotations

import io
import json
import re
import time
import zipfile
import zlib
from collections.abc import Iterable, Iterator, Mapping
from contextlib import contextmanager, suppress
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
from semitau.core.whole_files import locked, whole_file, write_whole

FORMAT, VERSION = "semitau store", 1
LEAST_PAUSE = 2.0
"""Seconds between two times that incomplete work is kept."""

SHARE_OF_TIME = 0.05
"""Of the time of a run that keeping incomplete work may take."""

_ENTRY = re.compile(r"[a-z-]+-[0-9a-f]{32}\.(npz|json)(\.(\d+\.)?part)?")
_DAMAGE = (OSError, EOFError, KeyError, TypeError, ValueError, zipfile.BadZipFile, zlib.error, NotImplementedError)
Arrays = Mapping[str, npt.NDArray[Any]]


class Store:
    """One store in its folder, which is made by the first file that is kept.

    notes : what was found damaged or of another version, each a sentence; there is nothing to do about it.
    used : names of the files that were taken or kept. made : how many times something was kept.
    fresh : nothing is taken that was not kept through this object.
    """

    def __init__(self, folder: Path, *, fresh: bool = False) -> None:
        self.folder = folder
        self.notes: list[str] = []
        self.used: set[str] = set()
        self.made = 0
        self.pause = LEAST_PAUSE
        self._fresh = fresh
        self._usable = self._check_version()

    def take(self, kind: str, key: str) -> Arrays | None:
        """The arrays kept under this key, None if they are not there or not sound."""
        path = self._path(kind, key, ".npz")
        return self._sound(path, kind, key, _read_arrays)

    def keep(self, kind: str, key: str, arrays: Arrays) -> None:
        """Keep arrays under a key, in the place of what was there. Raises RunError as `whole_file`."""
        start = time.monotonic()
        self._open_for_writing()
        path = self._path(kind, key, ".npz")
        with whole_file(path) as part, zipfile.ZipFile(part, "w", zipfile.ZIP_DEFLATED, compresslevel=1) as file:
            file.writestr("header.json", json.dumps(_header(kind, key)))
            for name, array in arrays.items():
                with file.open(f"{name}.npy", "w", force_zip64=True) as member:
                    np.lib.format.write_array(member, np.ascontiguousarray(array), allow_pickle=False)
        self.used.add(path.name)
        self.made += 1
        self.pause = max(LEAST_PAUSE, (time.monotonic() - start) / SHARE_OF_TIME)

    def take_document(self, kind: str, key: str) -> Any | None:
        """The JSON document kept under this key, None if it is not there or not sound.

        What was needed to make it counts as used, too: it is there for a run after the next change.
        """
        found = self._sound(self._path(kind, key, ".json"), kind, key, _read_document)
        if found is None:
            return None
        self.used.update(found["needed"])
        return found["document"]

    def keep_document(self, kind: str, key: str, document: object, needed: Iterable[str] = ()) -> None:
        """Keep a document of JSON values under a key. Raises RunError as `write_whole`.

        needed : names of the files that it was made from.
        """
        self._open_for_writing()
        path = self._path(kind, key, ".json")
        whole = {"document": document, "needed": sorted(needed)}
        text = json.dumps({**_header(kind, key), "checksum": _checksum(whole), **whole}, indent=0)
        write_whole(path, text + "\n")
        self.used.add(path.name)
        self.made += 1

    def has(self, kind: str, key: str) -> bool:
        """Whether there is a file under this key, sound or not, finished or not."""
        return self._usable and any(self._path(kind, key, end).exists() for end in (".npz", ".json"))

    @contextmanager
    def in_use(self) -> Iterator[None]:
        """Others remove nothing from the store inside."""
        self._open_for_writing()
        with open(self.folder / "lock", "ab") as lock:
            locked(lock, shared=True)
            yield

    def prune(self) -> None:
        """Remove what was neither taken nor kept through this object, unless somebody else uses the store."""
        if not self.folder.is_dir():
            return
        with open(self.folder / "lock", "ab") as lock:
            if not locked(lock):
                return
            for path in self.folder.iterdir():
                if _ENTRY.fullmatch(path.name) and path.name not in self.used:
                    with suppress(OSError):
                        path.unlink()

    def _path(self, kind: str, key: str, end: str) -> Path:
        return self.folder / f"{kind}-{key[:32]}{end}"

    def _sound(self, path: Path, kind: str, key: str, read: Any) -> Any | None:
        if not self._usable or (self._fresh and path.name not in self.used) or not path.exists():
            return None
        try:
            found = read(path, kind, key)
        except _OtherVersion as error:
            self._note(f"{path} was written by another version ({error}): it is made again.")
            return None
        except FileNotFoundError:
            return None  # removed meanwhile by another run
        except _DAMAGE:
            self._note(f"{path} is damaged: it is made again.")
            return None
        self.used.add(path.name)
        return found

    def _note(self, text: str) -> None:
        if text not in self.notes:
            self.notes.append(text)

    def _check_version(self) -> bool:
        """Whether what lies in the folder can be read."""
        marker = self.folder / "store.json"
        if not marker.exists():
            return True
        try:
            header = json.loads(marker.read_text(encoding="utf-8"))
            version = header["version"] if header["format"] == FORMAT else None
        except (*_DAMAGE, UnicodeDecodeError):
            version = None
        if version == VERSION:
            return True
        whose = "something else" if version is None else f"another version ({version}; this one has {VERSION})"
        self.notes.append(f"The store in {self.folder} was written by {whose}: its contents are made again.")
        return False

    def _open_for_writing(self) -> None:
        marker = self.folder / "store.json"
        if not self._usable or not marker.exists():
            write_whole(marker, json.dumps({"format": FORMAT, "version": VERSION}) + "\n")
            if not self._usable:
                self._fresh = self._usable = True


class _OtherVersion(Exception):
    pass


def _header(kind: str, key: str) -> dict[str, Any]:
    return {"format": FORMAT, "version": VERSION, "kind": kind, "key": key}


def _check(header: Mapping[str, Any], kind: str, key: str) -> None:
    if header["format"] != FORMAT or header["kind"] != kind or (header["key"] != key and header["version"] == VERSION):
        raise ValueError("not what its name says")
    if header["version"] != VERSION:
        raise _OtherVersion(f"{header['version']}; this one has {VERSION}")


def _read_arrays(path: Path, kind: str, key: str) -> Arrays:
    with zipfile.ZipFile(path) as file:
        _check(json.loads(file.read("header.json")), kind, key)
        # Reading a member to its end compares its checksum.
        return {
            name.removesuffix(".npy"): np.lib.format.read_array(io.BytesIO(file.read(name)), allow_pickle=False)
            for name in file.namelist()
            if name.endswith(".npy")
        }


def _read_document(path: Path, kind: str, key: str) -> Any:
    whole = json.loads(path.read_text(encoding="utf-8"))
    _check(whole, kind, key)
    found = {"document": whole["document"], "needed": whole["needed"]}
    if whole["checksum"] != _checksum(found):
        raise ValueError("changed since it was written")
    return found


def _checksum(document: object) -> int:
    return zlib.crc32(json.dumps(document, sort_keys=True).encode())
