"""Files appear whole or not at all: written beside the target, renamed over it when complete."""

from __future__ import annotations

import errno
import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from itertools import count
from pathlib import Path
from typing import IO

try:
    import fcntl
except ImportError:  # not every system has locks of this kind
    fcntl = None  # type: ignore[assignment]

from .errors import Problem, RunError

_REMEDIES = {
    errno.ENOSPC: "Free some space on that disk, or choose another output folder.",
    errno.EDQUOT: "The disk quota is used up: free some space, or choose another output folder.",
    errno.EACCES: "Choose a place that you may write to, or change its permissions.",
    errno.EPERM: "Choose a place that you may write to, or change its permissions.",
    errno.EROFS: "That file system is read-only: choose another output folder.",
    errno.ENOTDIR: "Part of that path is a file, not a folder: choose another output folder.",
    errno.ENAMETOOLONG: "Choose a shorter name.",
    errno.EMFILE: "Too many files are open: close other programs or raise the limit (ulimit -n).",
    errno.EFBIG: "A file may not grow that large here: raise the limit (ulimit -f) or choose another disk.",
}


def write_failure(error: OSError, path: Path | str) -> RunError:
    """The operating system's refusal to write `path`, as an error with advice."""
    reason = os.strerror(error.errno).lower() if error.errno is not None else str(error)
    return RunError(
        Problem(
            f"cannot write: {reason}",
            where=str(path),
            remedy=_REMEDIES.get(error.errno or 0, "What was there before is unchanged."),
        )
    )


@contextmanager
def whole_file(path: Path | str) -> Iterator[Path]:
    """Give the path NAME.part to write to; on success it replaces `path`, on any failure it is removed.

    Folders above are made if missing. A symbolic link is followed. What stood at `path` stays as it is until the new
    file is complete and on the disk. A program that is killed leaves NAME.part behind, which the next run overwrites.
    Two programs that write the same file at once write to NAME.part and NAME.2.part; the last one stays.

        with whole_file("out/results.json") as part:
            part.write_text(text)

    Raises
    ------
    RunError : the operating system refused (no space, no permission, ...); OSErrors of the body are translated, too.
    """
    target = Path(os.path.realpath(path))
    part = target.with_name(target.name + ".part")
    try:
        if target.exists() and not target.is_file():
            kind = "a folder" if target.is_dir() else "not a regular file"
            raise RunError(
                Problem(f"cannot write: {kind} stands there", where=str(path), remedy="Choose another name.")
            )
        target.parent.mkdir(parents=True, exist_ok=True)
        with _own_part(target) as part:
            yield part
            # Errors that the system kept back (delayed allocation, network disks) come out before the old file goes.
            with open(part, "rb+") as written:
                os.fsync(written.fileno())
            os.replace(part, target)
    except OSError as error:
        culprit = error.filename if error.filename not in (None, os.fspath(part), part) else path
        raise write_failure(error, culprit) from error


@contextmanager
def _own_part(target: Path) -> Iterator[Path]:
    """A part beside `target` that no other program writes to; removed in the end if it is still there.

    A part is locked as long as it is written, so what a killed program left is free. Once a part has been renamed, its
    lock says nothing about a new file of its old name: that is seen from the number of the file.
    """
    for number in count(1):
        part = target.with_name(f"{target.name}.part" if number == 1 else f"{target.name}.{number}.part")
        with open(part, "ab") as held:
            if not (locked(held) and _is(held, part)):
                continue
            try:
                yield part
            finally:
                if _is(held, part):
                    with suppress(OSError):
                        part.unlink()
            return


def locked(file: IO[bytes], *, shared: bool = False) -> bool:
    """Lock an open file until it is closed, unless another program has; says whether that was possible.

    shared : several may hold it. Where there are no locks, nobody is kept out.
    """
    if fcntl is None:
        return True
    try:
        fcntl.flock(file, (fcntl.LOCK_SH if shared else fcntl.LOCK_EX) | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    except OSError:  # e.g. a network disk without locks
        return True
    return True


def _is(file: IO[bytes], path: Path) -> bool:
    """Whether the open file is the one of that name."""
    try:
        return os.path.samestat(os.fstat(file.fileno()), os.stat(path))
    except OSError:
        return False


def write_whole(path: Path | str, content: str | bytes) -> None:
    """Write text (as UTF-8) or bytes to `path`, whole or not at all. Raises RunError as `whole_file` does."""
    with whole_file(path) as part:
        part.write_bytes(content.encode() if isinstance(content, str) else content)
