"""A whole study: study file -> templates -> data -> fit -> budget -> toys -> further questions -> results -> report."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from pathlib import Path

from semitau.core.engine import checked_workers
from semitau.core.errors import InputError
from semitau.core.whole_files import write_whole
from semitau.gen.study_file.study import StudyConfig

from ..blinding.cover import Cover, cover, passphrase
from ..graph.course import Course
from ..graph.features import FEATURES
from ..graph.materials import Materials
from ..graph.plan import expected_seconds, study_plan
from ..graph.store import Store
from ..parts.toy_file import write_toys
from ..pictures import draw_pictures
from ..report import write_report
from ..result_part import Part
from ..results import Results, read_results
from .opening import open_study
from .stopwatch import Stopwatch
from .study_folder import StudyFolder, claimed_folder, study_key
from .study_results import assembled, fitted_study, study_linearity, study_toys
from .study_templates import study_templates, write_template_file

Report = Callable[[str, int, int | None], None]


@dataclass(frozen=True)
class StudyRun:
    """results : everything that was found. folder : where it lies. reused : whether the results were there already.

    notes : what was wrong with stored parts, which were made again.
    """

    results: Results
    folder: StudyFolder
    reused: bool
    notes: tuple[str, ...] = ()


def run_study(
    path: Path | str,
    *,
    output: Path | None = None,
    seed: int | None = None,
    workers: int | None = None,
    report: Report | None = None,
    again: bool = False,
) -> StudyRun:
    """Run the study in the file `path`; same file and seed, same results, for any number of workers.

    output, seed : instead of those in the file. workers : threads, None for all cores.
    report : called as report(label, done, total). again : make everything anew, whatever is stored.

    What is stored and depends on nothing that has changed is taken as it is (docs/steps.md).

    Raises
    ------
    InputError : the study file, a file that it names or the output folder is not what it should be.
    RunError : the fit failed, or something could not be written. Files that were whole before stay so.
    """
    study = open_study(Path(path), seed)
    folder = claimed_folder(output or Path(study.study.output), study.study.name)
    key = study_key(study)
    hiding = _cover(study)
    stored = None if again else _stored_results(folder.results, key, hiding)
    if stored is not None and _pictures_are_fresh(folder):
        return StudyRun(stored, folder, reused=True)
    write_whole(folder.study_file, study.text)
    store = Store(folder.store, fresh=again)
    materials = Materials(study, store, checked_workers(workers), report)
    with store.in_use():
        course = Course({} if stored is not None else expected_seconds(study_plan(materials)), report)
        results = stored or found_results(materials, folder, key, course, hiding)
        with course.step("pictures") as progress:
            write_report(results, draw_pictures(results, folder.pictures, progress, again), folder.report)
    course.end()
    if stored is None:
        store.prune()
    return StudyRun(results, folder, stored is not None, tuple(store.notes))


def found_results(
    materials: Materials,
    folder: StudyFolder,
    key: str,
    course: Course,
    hiding: Cover | None,
    *,
    unblinded: bool = False,
) -> Results:
    """Everything from templates to results.json.

    hiding : what hides the ratios, None to show them. unblinded : the template file lies in the folder that was hidden.
    """
    watch, study = Stopwatch(lambda: materials.made), materials.study
    with watch.stage("templates"), course.step("templates") as materials.report:
        made = study_templates(materials)
    if not unblinded:
        write_template_file(made.templates, folder.templates, materials.store)
    with watch.stage("fit", kept=False), course.step("fit"):
        fitted = fitted_study(materials, hiding)
    with watch.stage("toys"), course.step("toys") as report:
        toys = study_toys(materials, report)
    lines = None
    if study.toys.linearity is not None:
        with watch.stage("linearity"), course.step("linearity") as report:
            lines = study_linearity(materials, report)
    write_toys(folder.toys, toys, dict(zip(lines.factors, lines.points, strict=True)) if lines is not None else {})
    features: dict[str, Part] = {}
    for feature in FEATURES:
        if feature.wanted(study):
            with watch.stage(feature.name), course.step(feature.name) as report:
                features[feature.name] = feature.made(materials, report)
    timing = watch.timing(materials.workers or 1)
    results = assembled(materials, made, fitted, toys, lines, features, hiding, key, timing)
    write_whole(folder.results, results.text())
    return results


def _cover(study: StudyConfig) -> Cover | None:
    """What hides the ratios of a study; asks for the passphrase if there is anything to hide."""
    if study.blinding is None or study.fit.data.kind == "expected":
        return None
    return cover(study.blinding.kind, study.blinding.width, study.study.name, passphrase())


def _stored_results(path: Path, key: str, hiding: Cover | None) -> Results | None:
    """Results that are whole and were made with this key and hidden by the same passphrase."""
    if not path.exists():
        return None
    try:
        results = read_results(path)
    except InputError:
        return None  # cut short or of another version: they are made again
    same_cover = results.blinding == (None if hiding is None else hiding.part)
    return results if results.study.key == key and same_cover else None


def _pictures_are_fresh(folder: StudyFolder) -> bool:
    """Whether the report, which is written last, is newer than the results."""
    return folder.report.exists() and folder.report.stat().st_mtime_ns >= folder.results.stat().st_mtime_ns
