"""Event files: true decays and reconstructed candidates of a study as trees of a ROOT file."""

from __future__ import annotations

import json
from collections.abc import Iterator, Sequence
from contextlib import closing
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np
import numpy.typing as npt
import uproot
from semitau.core import engine
from semitau.core.engine import Job
from semitau.core.errors import InputError, Problem
from semitau.core.streams import stream_key
from semitau.core.whole_files import whole_file

from ..response.recording import CANDIDATE_ROWS, TRUTH_ROWS, EventRecorder, event_recorder
from ..shapes.sampler import DrawnLaws, ShapeSampler
from ..study_file.categories import StudyCategory
from ..study_file.names import CHARM_HADRONS, OBSERVABLES, SEEN_LEPTONS
from ..study_file.study import StudyConfig
from .binning import CODES, ROW_OF, category_code
from .chunk_tasks import chunks, make_bench
from .component_parts import Report
from .component_plan import ChannelPlan, plan_channels
from .provenance import provenance

Columns = dict[str, npt.NDArray[Any]]
Record = dict[str, Columns]
"""Tree -> column -> values."""

FORMATS = ("ttree", "rntuple")
COMPRESSIONS = {"zstd": uproot.ZSTD(1), "lz4": uproot.LZ4(1)}
NO_CHANNEL = -1

_ORIGIN = {"component": np.int16, "channel": np.int16, "event": np.int64, "weight": np.float64}
TREES: dict[str, dict[str, Any]] = {
    "truth": {**_ORIGIN, **dict.fromkeys(TRUTH_ROWS, np.float32)},
    "candidates": {
        **_ORIGIN,
        "category": np.int8,
        "selected": np.int8,
        "soft_found": np.int8,
        "tag_wrong": np.int8,
        **dict.fromkeys(ROW_OF, np.float32),
    },
}
"""Tree -> column -> type."""


def generate(
    study: StudyConfig,
    path: Path | str,
    format: str = "ttree",
    workers: int | None = None,
    report: Report | None = None,
    *,
    compression: str = "zstd",
) -> dict[str, int]:
    """Write the events that the study's templates are made from; returns the entries of each tree.

    format : "ttree" or "rntuple". compression : "zstd" or "lz4". Events are written chunk by chunk, in the same order
    for any number of workers, and memory does not grow with their number.

    Tree "truth" has every generated decay, "candidates" what the detector makes of it, with backgrounds by shape added;
    `component`, `channel` and `event` tell which belong together. `weight` is the expected number of events that an
    entry stands for. The text "meta" explains the columns.

    Raises
    ------
    InputError : unknown format or compression; the study cannot be built. RunError : the file cannot be written.
    """
    for what, given, allowed in (("format", format, FORMATS), ("compression", compression, tuple(COMPRESSIONS))):
        if given not in allowed:
            raise InputError(
                Problem(f"no such {what} of event files", what, got=repr(given), wanted=", ".join(allowed))
            )
    names = [item.name for item in study.components]
    plans = plan_channels(study)
    total = sum(plan.events for plan in plans) + sum(sum(b.events_in.values()) for b in study.backgrounds)
    entries = dict.fromkeys(TREES, 0)
    done = 0
    with (
        whole_file(path) as part,
        uproot.recreate(part, compression=COMPRESSIONS[compression]) as file,
        closing(engine.run(_tasks(study, plans, names), workers)) as results,  # type: ignore[type-var]
    ):
        file["meta"] = json.dumps(_description(study, names, [plan.channel.name for plan in plans]), ensure_ascii=False)
        make = file.mktree if format == "ttree" else file.mkrntuple
        trees = {name: make(name, columns) for name, columns in TREES.items()}
        for label, record in results:
            for name, columns in record.items():
                n = len(columns["event"])
                if n:
                    trees[name].extend(columns)
                entries[name] += n
            done += len(record.get("truth", record["candidates"])["event"])
            if report is not None:
                report(label, done, total)
    return entries


@dataclass(frozen=True, eq=False)
class _Origin:
    """Where the events of a chunk come from, and what each weighs."""

    label: str
    component: int
    channel: int
    weight: float

    def columns(self, numbers: npt.NDArray[np.int64]) -> Columns:
        """The columns of `_ORIGIN` for events of these numbers."""
        values = (self.component, self.channel, numbers, self.weight)
        return {
            name: np.full(len(numbers), value, dtype=kind)
            for (name, kind), value in zip(_ORIGIN.items(), values, strict=True)
        }


@dataclass(frozen=True, eq=False)
class _Decays:
    """Runs of decays of one channel."""

    origin: _Origin
    record: EventRecorder

    def run(self, first: int, n: int) -> tuple[str, Record]:
        events = self.record(first, n)
        numbers = np.arange(first, first + n)
        truth = dict(zip(TRUTH_ROWS, events.truth, strict=True))
        candidates = dict(zip(CANDIDATE_ROWS, events.candidates, strict=True)) | {"selected": events.selected}
        return self.origin.label, {
            "truth": self.origin.columns(numbers) | _typed("truth", truth),
            "candidates": self.origin.columns(events.number) | _typed("candidates", candidates),
        }


@dataclass(frozen=True, eq=False)
class _Drawn:
    """Runs of background events of one category."""

    origin: _Origin
    laws: DrawnLaws
    stream: np.uint64
    category: StudyCategory

    def run(self, first: int, n: int) -> tuple[str, Record]:
        drawn = self.laws.draw(self.stream, first, n)
        columns = {name: drawn.get(name, np.full(n, np.nan)) for name in ROW_OF}
        whole = {
            "category": np.full(n, category_code(self.category.charm, self.category.lepton)),
            "selected": _selected(self.category, drawn),
            "soft_found": np.zeros(n),
            "tag_wrong": np.zeros(n),
        }
        origin = self.origin.columns(np.arange(first, first + n))
        return self.origin.label, {"candidates": origin | _typed("candidates", columns | whole)}


def _typed(tree: str, columns: Columns) -> Columns:
    return {name: columns[name].astype(kind) for name, kind in TREES[tree].items() if name not in _ORIGIN}


def _tasks(study: StudyConfig, plans: Sequence[ChannelPlan], names: list[str]) -> Iterator[Job[tuple[str, Record]]]:
    bench = make_bench(study, variations=False)
    seed = study.study.seed
    for number, plan in enumerate(plans):
        record = event_recorder(plan, bench, stream_key(seed, "templates", plan.mode, plan.channel.name))
        origin = _Origin(plan.mode, names.index(plan.mode), number, plan.expected / plan.events)
        decays = _Decays(origin, record)
        yield from (Job(_Decays.run, decays, chunk) for chunk in chunks(plan.events))
    for background in study.backgrounds:
        sampler = ShapeSampler(background, study)
        for category in bench.categories:
            if category.name not in sampler.categories:
                continue
            events = max(background.events_in[category.name], 1)
            stream = stream_key(seed, "templates", background.name, category.name)
            weight = background.expected[category.name] / events
            origin = _Origin(background.name, names.index(background.name), NO_CHANNEL, weight)
            drawn = _Drawn(origin, sampler.laws(category.name), stream, category)
            yield from (Job(_Drawn.run, drawn, chunk) for chunk in chunks(events))


def _selected(category: StudyCategory, drawn: dict[str, npt.NDArray[np.float64]]) -> npt.NDArray[np.bool_]:
    """Which background events are in a template: cuts on what is drawn, and all axes."""
    cuts = ((name, cut.min, cut.max) for name, cut in category.cuts.items() if name in drawn)
    limits = [(n, -np.inf if low is None else low, np.inf if high is None else high) for n, low, high in cuts]
    limits += [(name, edges[0], edges[-1]) for name, edges in category.axes.items()]
    inside = np.ones(len(next(iter(drawn.values()))), dtype=np.bool_)
    for name, low, high in limits:
        inside &= (drawn[name] >= (-np.inf if low is None else low)) & (
            drawn[name] < (np.inf if high is None else high)
        )
    return inside


def _description(study: StudyConfig, names: list[str], channels: list[str]) -> dict[str, object]:
    """What "meta" says."""
    codes = {category_code(charm, lepton): f"{charm} {lepton}" for charm in CHARM_HADRONS for lepton in SEEN_LEPTONS}
    return {
        "what": "invented detector, generated events: no measurement",
        "units": "GeV, GeV²; momenta of truth in the rest frame of the B, of candidates in the laboratory",
        "components": names,
        "channels": channels,
        "categories": [codes[code] for code in range(CODES)],
        "observables": {name: [known.label, known.unit] for name, known in OBSERVABLES.items()},
        "columns": {
            "component, channel": "numbers in these lists; channel -1 for backgrounds by shape",
            "event": "number within its channel: the same decay has the same number in both trees",
            "weight": "expected events of the study that an entry stands for",
            "selected": "1 if the candidate is in a template",
            "delta_m": "0 without a D*",
            "absent particles": "zero momentum in truth; observables that a background does not draw are NaN",
        },
        **provenance(study),
    }
