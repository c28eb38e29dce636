"""Files appear whole or not at all: every failure leaves what was there before, and says what to do."""

from __future__ import annotations

import errno
import os
import subprocess
import sys
import textwrap
from collections.abc import Iterator
from pathlib import Path

import pytest
from semitau.core.errors import RunError
from semitau.core.whole_files import whole_file, write_whole


def names(folder: Path) -> list[str]:
    return sorted(path.name for path in folder.iterdir())


def test_writes_and_replaces(tmp_path: Path) -> None:
    target = tmp_path / "new" / "folder" / "a.txt"
    write_whole(target, "R(D) ± τ")
    write_whole(target, "second ")
    with whole_file(target) as part:
        assert target.read_text() == "second "
        part.write_bytes(b"third")
        assert target.read_text() == "second "
    assert target.read_bytes() == b"third"
    assert names(target.parent) == ["a.txt"]


@pytest.mark.parametrize("failure", [ValueError, KeyboardInterrupt, SystemExit])
def test_a_failing_body_leaves_the_old_file(tmp_path: Path, failure: type[BaseException]) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")

    def write() -> None:
        with whole_file(target) as part:
            part.write_text("half")
            raise failure

    with pytest.raises(failure):
        write()
    assert target.read_text() == "old"
    assert names(tmp_path) == ["a.txt"]


def test_a_link_is_followed(tmp_path: Path) -> None:
    (tmp_path / "real").mkdir()
    link = tmp_path / "link.txt"
    link.symlink_to(tmp_path / "real" / "a.txt")
    write_whole(link, "content")
    assert link.is_symlink()
    assert (tmp_path / "real" / "a.txt").read_text() == "content"


def test_no_device_or_folder_is_replaced(tmp_path: Path) -> None:
    with pytest.raises(RunError, match=r"a folder stands there\. Choose another name"):
        write_whole(tmp_path, "x")
    with pytest.raises(RunError, match="/dev/null: cannot write: not a regular file"):
        write_whole("/dev/null", "x")
    assert Path("/dev/null").is_char_device()


def test_a_file_where_a_folder_should_be(tmp_path: Path) -> None:
    (tmp_path / "file").write_text("x")
    with pytest.raises(RunError, match=r"cannot write: (not a directory|file exists)"):
        write_whole(tmp_path / "file" / "a.txt", "x")


@pytest.mark.parametrize(
    ("code", "advice"),
    [
        (errno.ENOSPC, r"no space left on device\. Free some space"),
        (errno.EDQUOT, r"quota exceeded\. The disk quota is used up"),
        (errno.EROFS, r"read-only file system\. .*choose another output folder"),
        (errno.EIO, r"input/output error\. What was there before is unchanged"),
    ],
)
def test_every_refusal_has_advice(tmp_path: Path, monkeypatch: pytest.MonkeyPatch, code: int, advice: str) -> None:
    target = tmp_path / "a.txt"
    target.write_text("old")

    def refuse(descriptor: int) -> None:
        raise OSError(code, os.strerror(code))

    monkeypatch.setattr(os, "fsync", refuse)
    with pytest.raises(RunError, match=advice) as caught:
        write_whole(target, "new")
    assert caught.value.status == 1
    assert str(target) in str(caught.value)
    assert target.read_text() == "old"
    assert names(tmp_path) == ["a.txt"]


@pytest.fixture
def ordinary_user() -> Iterator[None]:
    """Permissions do not bind root: act as nobody for the time of the test."""
    if os.geteuid() != 0:
        yield
        return
    os.seteuid(65534)
    try:
        yield
    finally:
        os.seteuid(0)


def test_no_permission(tmp_path: Path, ordinary_user: None) -> None:
    locked = Path("/usr/lib/semitau_test")  # nobody but root may write there
    with pytest.raises(RunError, match=r"permission denied\. Choose a place that you may write to") as caught:
        write_whole(locked / "a.txt", "x")
    assert "semitau_test" in str(caught.value)
    assert not locked.exists()


def test_disk_full(tmp_path: Path) -> None:
    """A real full disk: a small file system in memory, where the test may mount one."""
    disk = tmp_path / "disk"
    disk.mkdir()
    mount = ["mount", "-t", "tmpfs", "-o", "size=64k", "tmpfs", str(disk)]
    if os.geteuid() != 0 or subprocess.run(mount, capture_output=True, check=False).returncode != 0:
        pytest.skip("mounting a file system is not allowed here; test_file_size_limit covers a refused write")
    try:
        target = disk / "a.bin"
        write_whole(target, b"old")
        with pytest.raises(RunError, match=r"a\.bin: cannot write: no space left on device\. Free some space"):
            write_whole(target, bytes(1_000_000))
        assert target.read_bytes() == b"old"
        assert names(disk) == ["a.bin"]
    finally:
        subprocess.run(["umount", str(disk)], check=True)


def test_file_size_limit(tmp_path: Path) -> None:
    """The system refuses in the middle of a write, in a process with a limit on file sizes."""
    code = """
        import resource, sys
        from semitau.core.errors import RunError
        from semitau.core.whole_files import write_whole
        resource.setrlimit(resource.RLIMIT_FSIZE, (1000, resource.RLIM_INFINITY))
        try:
            write_whole(sys.argv[1], bytes(10_000))
        except RunError as error:
            print(error)
    """
    target = tmp_path / "a.bin"
    target.write_bytes(b"old")
    command = [sys.executable, "-c", textwrap.dedent(code), str(target)]
    out = subprocess.run(command, capture_output=True, text=True, check=True).stdout
    assert "a.bin: cannot write: file too large. A file may not grow that large here" in out
    assert target.read_bytes() == b"old"
    assert names(tmp_path) == ["a.bin"]
