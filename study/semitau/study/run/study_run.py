"""A whole study: study file -> templates -> data -> fit -> budget -> toys -> linearity -> results, pictures, report."""

from __future__ import annotations

import resource
import sys
import time
from collections.abc import Callable, Iterator
from contextlib import contextmanager
from dataclasses import dataclass
from datetime import UTC, datetime
from pathlib import Path
from typing import Literal

from semitau.core.engine import checked_workers
from semitau.core.errors import InputError
from semitau.core.whole_files import write_whole
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.template_content import template_content
from semitau.fit.toys.straightness import linearity
from semitau.fit.toys.toys import run_toys
from semitau.fit.uncertainty.decomposition import budget
from semitau.fit.uncertainty.fit_quality import quality
from semitau.fit.uncertainty.nuisances import held_in_turn, nuisance_shifts
from semitau.gen.study_file.study import StudyConfig

from ..blinding.cover import WITHHELD, Cover, cover, passphrase
from ..inputs.gathering import inputs_part
from ..parts.coefficient_fits import fit_coefficients
from ..parts.fit_parts import budget_parts, category_parts, component_parts, fit_part, nuisance_parts, ratio_parts
from ..parts.projecting import projections
from ..parts.quality_parts import quality_part
from ..parts.reweighting_parts import reweighting_warnings
from ..parts.toy_file import write_toys
from ..parts.toy_parts import linearity_parts, overall_verdict, toys_part
from ..pictures import draw_pictures
from ..report import write_report
from ..results import DataSource, Results, StageTime, StudyIdentity, Timing, read_results
from .fitting import fit_or_fail, refuse_fractions
from .form_factor_warnings import form_factor_warnings
from .opening import open_study
from .study_folder import StudyFolder, claimed_folder, study_key, versions
from .study_model import study_model
from .study_templates import study_templates
from .worth_a_look import worth_a_look

Report = Callable[[str, int, int | None], None]


@dataclass(frozen=True)
class StudyRun:
    """results : everything that was found. folder : where it lies. reused : whether the results were there already."""

    results: Results
    folder: StudyFolder
    reused: bool


class Stopwatch:
    """Wall-clock time of the stages of a run."""

    def __init__(self) -> None:
        self.started = datetime.now(UTC).replace(microsecond=0)
        self._start = time.perf_counter()
        self.stages: list[StageTime] = []

    @contextmanager
    def stage(self, name: str) -> Iterator[None]:
        """Time what happens inside, under this name."""
        start = time.perf_counter()
        yield
        self.stages.append(StageTime(stage=name, seconds=round(time.perf_counter() - start, 3), reused=False))

    def reused(self) -> None:
        """The last stage took what was stored."""
        self.stages[-1] = self.stages[-1].model_copy(update={"reused": True})

    def timing(self, workers: int) -> Timing:
        """Times so far, with the largest memory of the process."""
        # Linux counts in kB, macOS in bytes.
        unit = 1e6 if sys.platform == "darwin" else 1e3
        return Timing(
            started=self.started.isoformat().replace("+00:00", "Z"),
            stages=tuple(self.stages),
            total=round(time.perf_counter() - self._start, 3),
            workers=workers,
            peak_memory=round(resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / unit, 1),
        )


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

    Stored templates and results that were made from the same study, seed, code and files are taken as they are.

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
    results = stored or found_results(study, folder, key, checked_workers(workers), report, again, hiding)
    pictures = draw_pictures(results, folder.pictures, report)
    write_report(results, pictures, folder.report)
    return StudyRun(results, folder, reused=stored is not None)


def found_results(
    study: StudyConfig,
    folder: StudyFolder,
    key: str,
    workers: int,
    report: Report | None,
    again: bool,
    hiding: Cover | None,
    templates: Path | None = None,
) -> Results:
    """Everything from templates to results.json.

    hiding : what hides the ratios, None to show them. templates : where they lie, if not in the folder.
    """
    watch = Stopwatch()
    write_whole(folder.study_file, study.text)
    with watch.stage("templates"):
        made = study_templates(study, templates or folder.templates, workers, report, again)
    if made.reused:
        watch.reused()
    with watch.stage("fit"):
        model = study_model(study, made.templates)
        data, source = fitted_data(study, model)
        fitted, notes = fit_coefficients(model, data) if model.coefficients else (fit_or_fail(model, data), ())
        split = budget(model, fitted)
        in_turn = {name: held_in_turn(model, fitted, name) for name in split}
        shifts = nuisance_shifts(model, data, fitted)
        # From here on nobody sees more than the hidden values.
        shown = fitted if hiding is None else hiding.result(model, fitted)
    with watch.stage("toys"):
        toys = run_toys(model, study.toys.number, study.study.seed, workers, report)
        judged = quality(model, data, fitted, toys) if source.kind != "expected" and toys.valid.any() else None
    lines = None
    if study.toys.linearity is not None and model.following:
        notes = *notes, "Linearity is left out: ratios that follow fitted coefficients have no multiples."
    elif study.toys.linearity is not None:
        plan = study.toys.linearity
        with watch.stage("linearity"):
            progress = None if report is None else _one_bar(report, len(plan.factors))
            lines = linearity(model, plan.factors, plan.number, study.study.seed, workers, progress)
    write_toys(folder.toys, toys, dict(zip(lines.factors, lines.points, strict=True)) if lines is not None else {})
    labels = {parameter.name: parameter.label for parameter in model.parameters}
    ratios = ratio_parts(model, shown, split, hidden=hiding is not None)
    fit, toy_part = fit_part(model, shown, toys), toys_part(toys, labels)
    withheld = None if hiding is None else WITHHELD
    line_parts = linearity_parts(lines, labels) if lines is not None else ()
    results = Results(
        study=StudyIdentity(name=study.study.name, seed=study.study.seed, hash=study.digest, key=key, text=study.text),
        versions=versions(),
        data=source,
        ratios=ratios,
        verdict=overall_verdict(toy_part, line_parts, lines.lines if lines is not None else {}),
        fit=fit,
        budget=budget_parts(split, in_turn),
        nuisances=nuisance_parts(shifts),
        quality=None if judged is None else quality_part(model, judged, withheld),
        blinding=None if hiding is None else hiding.part,
        toys=toy_part,
        linearity=line_parts,
        categories=category_parts(made.templates),
        components=component_parts(made.templates),
        projections=projections(model, shown, data, withheld),
        cut_flow=made.cut_flow,
        reweightings=made.reweightings,
        inputs=inputs_part(study, made.templates),
        warnings=(
            *form_factor_warnings(study),
            *worth_a_look(fit, ratios, source, made.cut_flow, fitted.certificate.protected_bins),
            *reweighting_warnings(made.reweightings),
            *notes,
            *filter(None, [template_content(made.templates).text]),
        ),
        timing=watch.timing(workers),
    )
    write_whole(folder.results, results.text())
    return results


def fitted_data(study: StudyConfig, model: Model) -> tuple[Data, DataSource]:
    """What the study wants fitted, and what that is in words."""
    wanted = study.fit.data
    kind: Literal["expected", "pseudo", "file"] = "expected"
    if wanted.kind == "file" and wanted.file is not None:
        kind, data, description = "file", model.data(study.beside(wanted.file)), f"data of {wanted.file}"
    elif wanted.kind == "import" and study.imports is not None and study.imports.data is not None:
        kind, data, description = "file", model.data(model.templates), f"data of {study.imports.data.file}"
    elif wanted.kind == "pseudo":
        kind, data = "pseudo", model.data(model.templates)
        description = "pseudo-data from events that the templates do not know"
    else:
        data, description = model.expected_data(), "expected events"
    if kind == "file":
        refuse_fractions(model, data, description)
    return data, DataSource(kind=kind, description=description, events=float(data.counts.sum()))


def _one_bar(report: Report, points: int) -> Callable[[str, int, int], None]:
    """One bar for the toys of all points, which report each on its own."""
    seen: dict[str, int] = {}

    def under_one_name(label: str, done: int, total: int) -> None:
        seen[label] = done
        report("linearity", sum(seen.values()), total * points)

    return under_one_name


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
