"""Declaring a hidden study final, and looking behind the cover: who, when, and of which study.

`final.json` holds every declaration: hashes of the study file, of the contents of the templates and of the data, of the
code and the versions, and the passphrase's fingerprint. A study is unblinded only if nothing of this has changed since
the last declaration. `unblinding.json` holds every unblinding; nothing is ever taken out of either file.
"""

from __future__ import annotations

import hashlib
import json
from collections.abc import Mapping
from datetime import UTC, datetime
from pathlib import Path
from typing import Any

from semitau.core.code_digest import code_digest, versions
from semitau.core.content_digest import content_digest
from semitau.core.engine import checked_workers
from semitau.core.errors import InputError, Problem
from semitau.core.template_file import read_templates
from semitau.core.whole_files import write_whole
from semitau.gen.study_file.study import StudyConfig

from ..graph.course import Course
from ..graph.materials import Materials
from ..graph.plan import expected_seconds, study_plan
from ..graph.store import Store
from ..graph.template_digest import templates_digest
from ..pictures import draw_pictures
from ..report import write_report
from ..results import Results, read_results
from ..run.opening import open_study
from ..run.study_data import fitted_data
from ..run.study_folder import StudyFolder, claimed_folder, study_key
from ..run.study_model import study_model
from ..run.study_run import Report, StudyRun, found_results
from .cover import Cover, cover, passphrase

FINAL, UNBLINDING = "final.json", "unblinding.json"

CHANGES = {
    "study": "the study file has changed",
    "seed": "another seed is asked for",
    "templates": "the templates have changed",
    "data": "the data have changed",
    "code": "the program has changed",
    "versions": "versions of libraries have changed",
    "fingerprint": "the passphrase is another one",
    "results": "results.json has changed",
}


def declare_final(path: Path, by: str, output: Path | None = None, seed: int | None = None) -> dict[str, Any]:
    """Write down that the hidden study in `path` is final as it lies in its folder; give the declaration.

    by : who declares it.

    Raises
    ------
    InputError : nobody is named, the study hides nothing, has not been run, or its folder holds an older run.
    """
    study, folder, hiding, results = _opened(path, by, output, seed)
    key = study_key(study)
    if results.blinding is not None and results.blinding.fingerprint != hiding.part.fingerprint:
        remedy = "Give the passphrase of that run, or run `semitau study` with this one."
        raise InputError(Problem("the run had another passphrase", where=str(folder.path), remedy=remedy))
    if results.study.key != key or results.blinding != hiding.part:
        raise InputError(
            Problem("the folder holds an older run", where=str(folder.path), remedy="Run `semitau study` first.")
        )
    declaration = {"by": by, "when": _now(), "name": study.study.name, **_state(study, folder, hiding)}
    _append(folder.path / FINAL, "declarations", declaration)
    return declaration


def unblind(
    path: Path,
    by: str,
    output: Path | None = None,
    seed: int | None = None,
    workers: int | None = None,
    report: Report | None = None,
) -> tuple[StudyRun, dict[str, Any]]:
    """Show the ratios of a study that was declared final: everything again, not hidden, in the folder `unblinded`.

    The record is written before the results, so that nobody can look without leaving a trace.

    Raises
    ------
    InputError : nobody is named, the study hides nothing or was never declared final, or anything has changed since.
    RunError : something could not be written.
    """
    study, folder, hiding, _ = _opened(path, by, output, seed)
    declared = _entries(folder.path / FINAL, "declarations")
    if not declared:
        raise InputError(
            Problem(
                "the study was never declared final",
                where=str(folder.path),
                remedy="Declare it with `semitau final`; then nothing may change any more.",
            )
        )
    final, now = declared[-1], _state(study, folder, hiding)
    changed = [what for part, what in CHANGES.items() if final.get(part) != now[part]]
    if changed:
        remedy = f"Undo it, or run the study and declare it final again (last: {final['by']}, {final['when']})."
        raise InputError(
            *(Problem(f"{what} since it was declared final", str(folder.path), remedy=remedy) for what in changed)
        )
    materials = Materials(study, Store(folder.store), checked_workers(workers), report)
    if templates_digest(materials.templates) != now["templates"]:
        remedy = "Run the study with --again, and declare it final again."
        raise InputError(
            Problem("the stored templates are not those of the template file", str(folder.store), remedy=remedy)
        )
    record = {"by": by, "when": _now(), "name": study.study.name, "declared": final["when"], **now}
    _append(folder.path / UNBLINDING, "unblindings", record)
    opened = StudyFolder(folder.path / "unblinded")
    write_whole(opened.study_file, study.text)
    course = Course(expected_seconds(study_plan(materials)), report)
    results = found_results(materials, opened, study_key(study), course, None, unblinded=True)
    write_report(results, draw_pictures(results, opened.pictures, report), opened.report)
    return StudyRun(results, opened, reused=False), record


def _opened(
    path: Path, by: str, output: Path | None, seed: int | None
) -> tuple[StudyConfig, StudyFolder, Cover, Results]:
    if not by.strip():
        raise InputError(Problem("nobody is named", where="--by", remedy="Say who answers for it."))
    study = open_study(path, seed)
    if study.blinding is None or study.fit.data.kind == "expected":
        raise InputError(
            Problem("this study hides nothing", where=str(path), remedy="Its results can be read as they are.")
        )
    folder = claimed_folder(output or Path(study.study.output), study.study.name)
    for needed in (folder.results, folder.templates):
        if not needed.exists():
            raise InputError(
                Problem("the study has not been run", where=str(needed), remedy="Run `semitau study` first.")
            )
    hiding = cover(study.blinding.kind, study.blinding.width, study.study.name, passphrase())
    return study, folder, hiding, read_results(folder.results)


def _state(study: StudyConfig, folder: StudyFolder, hiding: Cover) -> dict[str, Any]:
    """Everything that the fitted ratios depend on, as hashes."""
    templates = read_templates(folder.templates)
    data, _ = fitted_data(study, study_model(study, templates))
    return {
        "study": study.digest,
        "seed": study.study.seed,
        "templates": templates_digest(templates),
        "data": content_digest(data.counts),
        "code": code_digest("core", "gen", "fit"),
        "versions": versions(),
        "fingerprint": hiding.fingerprint,
        "results": hashlib.sha256(folder.results.read_bytes()).hexdigest(),
    }


def _now() -> str:
    return datetime.now(UTC).replace(microsecond=0).isoformat().replace("+00:00", "Z")


def _entries(path: Path, name: str) -> list[Mapping[str, Any]]:
    if not path.exists():
        return []
    try:
        return list(json.loads(path.read_text(encoding="utf-8"))[name])
    except (ValueError, KeyError, TypeError):
        raise InputError(
            Problem("this record is damaged", where=str(path), remedy="Restore it: it says what was declared and when.")
        ) from None


def _append(path: Path, name: str, entry: Mapping[str, Any]) -> None:
    document = {"format": f"semitau {path.stem}", "version": 1, name: [*_entries(path, name), entry]}
    write_whole(path, json.dumps(document, indent=1, ensure_ascii=False) + "\n")
