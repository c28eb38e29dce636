"""Files appear whole or not at all: written beside the target, renamed over it when complete."""

from __future__ import annotations

import errno
import os
from collections.abc import Iterator
from contextlib import contextmanager, suppress
from pathlib import Path

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
        yield part
        # Errors that the system kept back (delayed allocation, network disks) come out here, before the old file goes.
        with open(part, "rb+") as written:
            os.fsync(written.fileno())
        os.replace(part, target)
    except OSError as error:
        culprit = error.filename if error.filename not in (None, os.fspath(part), part) else path
        raise write_failure(error, culprit) from error
    finally:
        with suppress(OSError):
            part.unlink()


def write_whole(path: Path | str, content: str | bytes) -> None:
    """Write text (as UTF-8) or bytes to `path`, whole or not at all. Raises RunError as `whole_file` does."""
    with whole_file(path) as part:
        part.write_bytes(content.encode() if isinstance(content, str) else content)
