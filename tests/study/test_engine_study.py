"""What commands send to workers elsewhere: small tasks without secrets, whose results are those of threads bit for bit.

Everything is drawn from the fixed seeds of the study, and compared with itself: nothing here is statistical.
"""

from __future__ import annotations

import json
import pickle
import signal
from collections.abc import Callable, Iterator
from pathlib import Path
from typing import Any, TypeVar

import numpy as np
import pytest
import uproot
from semitau.core.cluster import Cluster
from semitau.core.engine import Job, elsewhere
from semitau.core.template_file import read_templates
from semitau.core.templates import TemplateSet
from semitau.fit.toys import ratio_toys, toys
from semitau.gen.templates import chunk
from semitau.study.command_line import main

from ..core.local_cluster import local_cluster

WriteStudy = Callable[..., Path]
Capture = pytest.CaptureFixture[str]
T = TypeVar("T")
SECRET = "open sesame, 4711"


class Courier:
    """Workers that are here, yet get nothing but bytes. sent : the common part and the own part of every job."""

    def __init__(self) -> None:
        self.sent: list[tuple[bytes, bytes]] = []

    def results(self, tasks: Iterator[Callable[[], T]]) -> Iterator[T]:
        last, packed = None, b""
        for task in tasks:
            assert isinstance(task, Job), "a task that carries all of its tables each time"
            assert "<" not in task.function.__qualname__, "a function that no other process can find by its name"
            if not packed or task.common is not last:
                last, packed = task.common, pickle.dumps(task.common, protocol=pickle.HIGHEST_PROTOCOL)
            own = pickle.dumps((task.function, task.own))
            self.sent.append((packed, own))
            function, arguments = pickle.loads(own)
            yield pickle.loads(pickle.dumps(function(pickle.loads(packed), *arguments)))


def same_templates(one: TemplateSet, other: TemplateSet) -> None:
    assert one.templates.keys() == other.templates.keys()
    for name, template in one.templates.items():
        again = other.templates[name]
        assert template.nominal.tobytes() == again.nominal.tobytes()
        assert template.variance.tobytes() == again.variance.tobytes()
        for sides, others in ((template.plus, again.plus), (template.minus, again.minus)):
            assert {k: v.tobytes() for k, v in sides.items()} == {k: v.tobytes() for k, v in others.items()}
    assert {k: v.tobytes() for k, v in one.data.items()} == {k: v.tobytes() for k, v in other.data.items()}


def compiled_kinds() -> int:
    """How many kinds of arguments the large kernels have been compiled for."""
    kernels = (chunk.fill_chunk, toys._fit_toys, ratio_toys._fit_both)
    return sum(len(kernel.signatures) for kernel in kernels)


def test_events_templates_and_toys(mini: WriteStudy, monkeypatch: pytest.MonkeyPatch, capsys: Capture) -> None:
    """All that is sent, for every command that runs tasks; nothing is compiled once more for what has travelled."""
    monkeypatch.setenv("SEMITAU_PASSPHRASE", SECRET)
    path = mini({"[fit]\n": "[blinding]\nwidth = 2.0\n\n[fit]\n"})
    commands: dict[str, list[str]] = {
        "build": ["build", str(path), "--again", "--output"],
        "toys": ["toys", "here.root", "--number", "70", "--json", "--output"],
        "interval": ["interval", "here.root", "--toys", "20", "--precision", "0.5", "--json"],
        "generate": ["generate", str(path), "--output"],
    }
    said: dict[str, dict[str, Any]] = {"here": {}, "there": {}}
    courier, kinds = Courier(), 0
    for where in ("here", "there"):
        for name, command in commands.items():
            target = {"build": f"{where}.root", "toys": f"{where}_toys.root", "generate": f"{where}_events.root"}
            arguments = [*command, *([target[name]] if name in target else []), "--quiet", "--workers", "1"]
            if where == "there":
                before = len(courier.sent)
                with elsewhere(courier):
                    assert main(arguments) == 0
                assert len(courier.sent) > before, f"{name} runs no tasks"
            else:
                assert main(arguments) == 0
            out = capsys.readouterr().out
            said[where][name] = json.loads(out) if "--json" in arguments else out
        kinds = compiled_kinds() if where == "here" else kinds
    assert compiled_kinds() == kinds
    same_templates(read_templates("here.root"), read_templates("there.root"))
    assert said["here"]["toys"] == said["there"]["toys"]
    assert said["here"]["interval"] == said["there"]["interval"]
    with uproot.open("here_events.root") as here, uproot.open("there_events.root") as there:
        for tree in ("truth", "candidates"):
            one, other = here[tree].arrays(library="np"), there[tree].arrays(library="np")
            for column in one:
                np.testing.assert_array_equal(one[column], other[column])
    assert max(len(own) for _, own in courier.sent) < 1000
    assert max(len(common) for common, _ in courier.sent) < 10e6
    assert not any(SECRET.encode() in part for parts in courier.sent for part in parts)


def test_a_study_on_a_cluster(
    mini: WriteStudy, tmp_path: Path, monkeypatch: pytest.MonkeyPatch, capsys: Capture
) -> None:
    """Two worker processes, one of which is killed in the middle of the templates."""
    pytest.importorskip("distributed")
    path = mini()
    assert main(["build", str(path), "--again", "--output", "here.root", "--workers", "1", "--quiet"]) == 0
    assert main(["toys", "here.root", "--number", "70", "--json", "--quiet"]) == 0
    here = capsys.readouterr().out
    (tmp_path / "cluster").mkdir()
    with local_cluster(tmp_path / "cluster", 2) as cluster:
        seen = 0
        wait = Cluster._result

        def killing(self: Cluster, future: Any) -> Any:
            nonlocal seen
            seen += 1
            if seen == 4:
                cluster.workers[0].send_signal(signal.SIGKILL)
            return wait(self, future)

        monkeypatch.setattr(Cluster, "_result", killing)
        engine = ["--engine", str(cluster.file), "--quiet"]
        assert main(["build", str(path), "--again", "--output", "there.root", *engine]) == 0
        assert cluster.workers[0].wait() == -signal.SIGKILL
        assert main(["toys", "there.root", "--number", "70", "--json", *engine]) == 0
        there = capsys.readouterr().out
        cluster.workers[1].kill()
        monkeypatch.setattr("semitau.core.cluster.WORKER_SECONDS", 1.0)
        assert main(["build", str(path), "--again", "--output", "never.root", *engine]) == 1
        assert "has no worker" in capsys.readouterr().err
    assert not Path("never.root").exists()
    assert here == there
    same_templates(read_templates("here.root"), read_templates("there.root"))


def test_bad_engines(mini: WriteStudy, capsys: Capture) -> None:
    assert main(["check", str(mini()), "--engine", "nowhere.json"]) == 2
    assert "--engine: there is no such file (got 'nowhere.json', allowed tcp://HOST:PORT" in capsys.readouterr().err
