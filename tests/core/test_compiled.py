"""The cache of compiled code: a change anywhere in what a kernel imports makes it stale. Nothing is statistical."""

from __future__ import annotations

import os
import subprocess
import sys
from pathlib import Path

import pytest
from semitau.core import compiled

FILES = {
    "rows.py": "FIRST = {first}\n",
    "lane.py": "from semitau.core.compiled import inlined\n\n\n@inlined\ndef shifted(x):\n    return x + {shift}\n",
    "loop.py": "from semitau.core.compiled import kernel\n\nfrom . import rows as row\nfrom .lane import shifted\n\n\n"
    "@kernel\ndef total(n):\n    sum = row.FIRST\n    for i in range(n):\n        sum += shifted(i)\n    return sum\n",
}
PROGRAM = "from made.loop import total; print(total(3), len(total.stats.cache_hits))"


def write(folder: Path, first: int, shift: int) -> None:
    (folder / "made").mkdir(exist_ok=True)
    (folder / "made" / "__init__.py").write_text("")
    for name, text in FILES.items():
        path = folder / "made" / name
        text = text.format(first=first, shift=shift)
        if not path.exists() or path.read_text() != text:
            path.write_text(text)


def run(folder: Path, program: str = PROGRAM) -> list[int]:
    """Value of the kernel, and how many of its signatures came from the cache, in a fresh interpreter."""
    # the cache lies beside the kernel, where the test can get at it
    environment = {name: value for name, value in os.environ.items() if name != "NUMBA_CACHE_DIR"}
    done = subprocess.run(
        [sys.executable, "-c", program], cwd=folder, env=environment, capture_output=True, text=True, check=True
    )
    return [int(word) for word in done.stdout.split()]


def test_changes_of_imported_files_are_seen(tmp_path: Path) -> None:
    """numba alone would answer 6 each time: the file of the kernel itself never changes."""
    write(tmp_path, first=0, shift=1)
    assert run(tmp_path) == [6, 0]
    assert run(tmp_path) == [6, 1]
    write(tmp_path, first=0, shift=2)
    assert run(tmp_path) == [9, 0]
    write(tmp_path, first=100, shift=2)
    assert run(tmp_path) == [109, 0]
    assert run(tmp_path) == [109, 1]


def test_an_index_that_cannot_be_read_is_made_anew(tmp_path: Path) -> None:
    """As after an upgrade in which the type of an argument moved to another file, or a run that was killed."""
    types = "from typing import NamedTuple\n\n\nclass Table(NamedTuple):\n    x: float\n"
    loop = "from semitau.core.compiled import kernel\n\n\n@kernel\ndef total(table):\n    return int(table.x)\n"
    (tmp_path / "made").mkdir()
    for name, text in {"__init__.py": "", "old.py": types, "loop.py": loop}.items():
        (tmp_path / "made" / name).write_text(text)
    program = (
        "from made.{} import Table; from made.loop import total; print(total(Table(3.0)), len(total.stats.cache_hits))"
    )
    assert run(tmp_path, program.format("old")) == [3, 0]
    (tmp_path / "made" / "old.py").rename(tmp_path / "made" / "new.py")
    assert run(tmp_path, program.format("new")) == [3, 0]
    for index in tmp_path.rglob("*.nbi"):
        index.write_bytes(index.read_bytes()[:40])
    assert run(tmp_path, program.format("new")) == [3, 0]


def test_processes_that_compile_at_once_keep_each_others_entries(tmp_path: Path) -> None:
    """Each takes a second between reading the index and writing it: without a lock both would number their code 1."""
    (tmp_path / "made").mkdir()
    (tmp_path / "made" / "__init__.py").write_text("")
    loop = "from semitau.core.compiled import kernel\n\n\n@kernel\ndef double(x):\n    return x + x\n"
    (tmp_path / "made" / "loop.py").write_text(loop)
    slow = (
        "import time; from made.loop import double; index = double._cache._cache_file; save = index._save_index; "
        "index._save_index = lambda entries: (time.sleep(1), save(entries)); print(int(double({})))"
    )
    environment = {name: value for name, value in os.environ.items() if name != "NUMBA_CACHE_DIR"}
    both = [
        subprocess.Popen([sys.executable, "-c", slow.format(x)], cwd=tmp_path, env=environment, stdout=subprocess.PIPE)
        for x in ("3", "1.5")
    ]
    assert [int(process.communicate()[0]) for process in both] == [6, 3]
    told = "from made.loop import double; print(double(3), int(double(1.5)), sum(double.stats.cache_hits.values()))"
    assert run(tmp_path, told) == [6, 3, 2]


@pytest.mark.parametrize("change", ["rows.py", "lane.py", "loop.py"])
def test_digest_covers_all_that_is_imported(tmp_path: Path, change: str) -> None:
    write(tmp_path, first=0, shift=1)
    loop, other = tmp_path / "made" / "loop.py", tmp_path / "made" / "other.py"
    other.write_text("nothing to do with it\n")
    before = compiled.source_digest(str(loop))
    for cached in (compiled.source_digest, compiled._contents, compiled._imported):
        cached.cache_clear()
    other.write_text("still nothing\n")
    assert compiled.source_digest(str(loop)) == before
    for cached in (compiled.source_digest, compiled._contents, compiled._imported):
        cached.cache_clear()
    path = tmp_path / "made" / change
    path.write_text(path.read_text() + "\n# changed\n")
    assert compiled.source_digest(str(loop)) != before


def test_digest_crosses_packages() -> None:
    """A kernel of the response depends on the random streams in core and on the rows of the block."""
    from semitau.gen.response import measuring

    files = {path.name for path in _closure(Path(measuring.__file__))}
    assert {"measuring.py", "streams.py", "elementary.py", "block.py", "constants.py", "draw_numbers.py"} <= files
    assert "build.py" not in files


def _closure(path: Path) -> set[Path]:
    found, waiting = set(), [path]
    while waiting:
        here = waiting.pop()
        if here not in found:
            found.add(here)
            waiting += compiled._imported(here)
    return found
