"""`python -m benchmarks`: every figure in one run, a few minutes."""

from __future__ import annotations

import argparse
import json
from collections.abc import Callable, Iterator, Sequence
from functools import partial
from pathlib import Path

from semitau.core.engine import available_cores
from semitau.core.whole_files import write_whole
from semitau.gen.study_file.reader import read_study
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates

from .decays import chains_of, decay_figures, quadratic_figure, scaling_figure, shape_figure
from .design import design_figures
from .figures import Figure, table
from .files import file_figures
from .fits import fit_figures, toy_figures
from .machine import machine, share_of_a_core
from .programs import help_figure, memory_figures
from .random_numbers import counted
from .small_components import small_component_figures
from .timing import interleaved

STUDY = Path(__file__).parents[1] / "configs" / "marlow_small.toml"
Section = tuple[str, Callable[[], list[Figure]]]


def sections(path: Path, study: StudyConfig, quick: bool) -> Iterator[Section]:
    """Titles and what measures them, in the order of printing."""
    repetitions, fits = (3, 3) if quick else (7, 7)
    chains = chains_of(study, 500_000 if quick else 10_000_000)
    templates = build_templates(study).templates
    two = available_cores() > 1
    yield (
        "Decays",
        lambda: [
            *decay_figures(chains, counted(str(path)), repetitions),
            quadratic_figure(chains, repetitions),
            shape_figure(chains, repetitions),
        ],
    )
    yield "Small components", lambda: small_component_figures(repetitions)
    if two:
        yield "Two workers", lambda: [scaling_figure(chains, repetitions), build_figure(study, repetitions)]
    yield "Fits", lambda: fit_figures(templates, fits)
    if two:
        yield "Toys", lambda: toy_figures(templates, 200 if quick else 2000, repetitions)
    yield "Design", lambda: design_figures(100 if quick else 1000, repetitions)
    yield "Template files", lambda: file_figures(templates, repetitions)
    yield "Start", lambda: [help_figure()]
    if not quick:
        yield "Memory", lambda: memory_figures(path)


def build_figure(study: StudyConfig, repetitions: int) -> Figure:
    """The whole build of the study, tables and backgrounds included."""
    timings = interleaved({str(n): partial(build_templates, study, n) for n in (1, 2)}, repetitions)
    note = f"{timings['1'].wall:.2f} s and {timings['2'].wall:.2f} s"
    return Figure("whole build: two workers over one", timings["1"].wall / timings["2"].wall, "times", note=note)


def main(arguments: Sequence[str] | None = None) -> None:
    parser = argparse.ArgumentParser(prog="python -m benchmarks", description=__doc__)
    parser.add_argument("--study", type=Path, default=STUDY, help="study file to take decays and templates from")
    parser.add_argument("--quick", action="store_true", help="few events and repetitions: to see that it runs")
    parser.add_argument("--json", type=Path, metavar="FILE", help="write the figures there, too")
    options = parser.parse_args(arguments)
    found = machine() | {"share of a core": f"{share_of_a_core():.2f}"}
    print("\n".join(f"{name:>16}: {value}" for name, value in found.items()), end="\n\n", flush=True)
    results: dict[str, list[Figure]] = {}
    for title, measure in sections(options.study, read_study(options.study), options.quick):
        results[title] = measure()
        print(table(title, results[title]), flush=True)
    if float(found["share of a core"]) < 0.9:
        print("Other programs were running: what is measured by the clock (workers, toys, files, start) looks worse.")
    missed = [figure.what.strip() for figures in results.values() for figure in figures if figure.reached is False]
    print(f"Missed: {'; '.join(missed)}" if missed else "Every aim is reached.")
    if options.json:
        content = {title: [figure.as_data() for figure in figures] for title, figures in results.items()}
        write_whole(options.json, json.dumps({"machine": found, "figures": content}, indent=2) + "\n")


if __name__ == "__main__":
    main()
