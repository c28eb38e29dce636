"""The store: what comes back is what was kept, or nothing; whatever is wrong with a file, it is told and made again."""

from __future__ import annotations

import json
import os
import subprocess
import sys
import textwrap
import zipfile
from pathlib import Path

import numpy as np
import pytest
from semitau.study.graph.store import Store

KEY = "0123456789abcdef" * 4
ARRAYS = {"counts": np.arange(6).reshape(2, 3), "contents": np.array([0.1, -0.0, np.inf]), "empty": np.zeros(0)}
DOCUMENT = {"values": [0.1, 1e-300, None, True], "name": "τ", "nested": [{"b": 1, "a": 2}]}


def kept(folder: Path) -> Store:
    store = Store(folder)
    store.keep("component", KEY, ARRAYS)
    store.keep_document("feature", KEY, DOCUMENT)
    return store


def test_what_is_kept_comes_back_to_the_last_bit(tmp_path: Path) -> None:
    kept(tmp_path)
    store = Store(tmp_path)
    arrays = store.take("component", KEY)
    assert arrays is not None
    assert list(arrays) == list(ARRAYS)
    for name, array in ARRAYS.items():
        assert arrays[name].dtype == array.dtype
        assert arrays[name].shape == array.shape
        assert arrays[name].tobytes() == array.tobytes()
    assert store.take_document("feature", KEY) == DOCUMENT
    assert store.take("component", KEY[::-1]) is None
    assert store.take("feature", KEY) is None
    assert not store.notes


def test_a_new_store_makes_no_folder_before_it_keeps(tmp_path: Path) -> None:
    store = Store(tmp_path / "store")
    assert store.take("component", KEY) is None
    store.prune()
    assert not (tmp_path / "store").exists()


@pytest.mark.parametrize("end", [".npz", ".json"])
@pytest.mark.parametrize("damage", ["empty", "half", "garbage", "last byte", "one bit"])
def test_a_damaged_file_is_told_and_made_again(end: str, damage: str, tmp_path: Path) -> None:
    kept(tmp_path)
    (path,) = tmp_path.glob(f"*-{KEY[:32]}{end}")
    whole = path.read_bytes()
    middle = whole.index(b"0.1") if end == ".json" else whole.index(b"counts.npy") + 60
    path.write_bytes(
        {
            "empty": b"",
            "half": whole[: len(whole) // 2],
            "garbage": b"\x93garbage" * 20,
            "last byte": whole[:-2],
            "one bit": whole[:middle] + bytes([whole[middle] ^ 1]) + whole[middle + 1 :],
        }[damage]
    )
    store = Store(tmp_path)
    assert (store.take("component", KEY) if end == ".npz" else store.take_document("feature", KEY)) is None
    assert store.notes == [f"{path} is damaged: it is made again."]
    kept(tmp_path)
    assert Store(tmp_path).take_document("feature", KEY) == DOCUMENT


def test_a_file_under_a_wrong_name_is_not_taken(tmp_path: Path) -> None:
    """Keys that share their first half, or a file that was moved by hand."""
    kept(tmp_path)
    store = Store(tmp_path)
    assert store.take("component", KEY[:32] + "f" * 32) is None
    assert "damaged" in store.notes[0]


def test_a_store_of_another_version(tmp_path: Path) -> None:
    kept(tmp_path)
    (tmp_path / "store.json").write_text('{"format": "semitau store", "version": 2}')
    store = Store(tmp_path)
    assert store.take("component", KEY) is None
    assert not store.has("component", KEY)
    text = f"The store in {tmp_path} was written by another version (2; this one has 1): its contents are made again."
    assert store.notes == [text]
    store.keep("component", KEY, ARRAYS)
    assert store.take("component", KEY) is not None
    assert store.take_document("feature", KEY) is None  # what the other version left
    store.prune()
    assert sorted(path.suffix for path in tmp_path.iterdir()) == ["", ".json", ".npz"]
    assert not Store(tmp_path).notes


@pytest.mark.parametrize("text", ["", "[]", "{", '{"format": "other", "version": 1}', "\xff"])
def test_a_marker_that_is_no_marker(text: str, tmp_path: Path) -> None:
    kept(tmp_path)
    (tmp_path / "store.json").write_bytes(text.encode("latin-1"))
    store = Store(tmp_path)
    assert store.take("component", KEY) is None
    assert "was written by something else" in store.notes[0]


def test_a_file_of_another_version(tmp_path: Path) -> None:
    kept(tmp_path)
    (path,) = tmp_path.glob("component-*.npz")
    with zipfile.ZipFile(path, "w") as file:
        file.writestr(
            "header.json", json.dumps({"format": "semitau store", "version": 7, "kind": "component", "key": ""})
        )
    store = Store(tmp_path)
    assert store.take("component", KEY) is None
    assert store.notes == [f"{path} was written by another version (7; this one has 1): it is made again."]


def test_pruning_leaves_what_was_used_and_what_is_not_ours(tmp_path: Path) -> None:
    kept(tmp_path)
    (tmp_path / f"toys-{KEY[:32]}.npz.2.part").write_bytes(b"left by a killed run")
    (tmp_path / "notes.txt").write_text("somebody's")
    store = Store(tmp_path)
    assert store.take("component", KEY) is not None
    store.prune()
    left = {path.name for path in tmp_path.iterdir()}
    assert left == {"store.json", "lock", "notes.txt", f"component-{KEY[:32]}.npz"}


def test_pruning_waits_for_others(tmp_path: Path) -> None:
    kept(tmp_path)
    with Store(tmp_path).in_use():
        Store(tmp_path).prune()
        assert Store(tmp_path).take("component", KEY) is not None
    Store(tmp_path).prune()
    assert Store(tmp_path).take("component", KEY) is None


def test_a_fresh_store_takes_only_what_it_kept(tmp_path: Path) -> None:
    kept(tmp_path)
    store = Store(tmp_path, fresh=True)
    assert store.take("component", KEY) is None
    store.keep("component", KEY, ARRAYS)
    assert store.take("component", KEY) is not None


def test_two_programs_write_one_file_at_once(tmp_path: Path) -> None:
    """Several processes write and read one entry all the time: nobody ever sees half of one, nobody fails."""
    code = """
        import sys
        import numpy as np
        from pathlib import Path
        from semitau.study.graph.store import Store
        store = Store(Path(sys.argv[1]))
        for turn in range(60):
            store.keep("component", sys.argv[2], {"x": np.full(5000, int(sys.argv[3]))})
            found = store.take("component", sys.argv[2])
            assert found is not None and len(set(found["x"].tolist())) == 1
        assert not store.notes, store.notes
    """
    command = [sys.executable, "-c", textwrap.dedent(code), str(tmp_path), KEY]
    running = [subprocess.Popen([*command, str(number)], stderr=subprocess.PIPE, text=True) for number in range(3)]
    for process in running:
        _, errors = process.communicate()
        assert process.returncode == 0, errors
    assert not list(tmp_path.glob("*.part"))


def test_keeping_takes_a_small_share_of_the_time(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    ticks = iter((0.0, 1.0))
    monkeypatch.setattr("time.monotonic", lambda: next(ticks))
    store = Store(tmp_path)
    store.keep("component", KEY, ARRAYS)
    assert store.pause == pytest.approx(20.0)  # after a second of writing


def test_a_store_that_cannot_be_written(tmp_path: Path) -> None:
    (tmp_path / "store").write_text("a file")
    from semitau.core.errors import RunError

    with pytest.raises(RunError, match=r"(?i)cannot write"):
        Store(tmp_path / "store").keep("component", KEY, ARRAYS)
    assert os.listdir(tmp_path) == ["store"]
