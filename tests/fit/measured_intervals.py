"""`python -m tests.fit.measured_intervals`: the coverage table of docs/statistics.md, some minutes on two cores."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from semitau.core.templates import TemplateSet
from semitau.fit import Model, correct_for_templates, interval_coverage, maximise, profile, region_coverage
from semitau.fit.toys.covering import Held, held

from . import problems
from .poor_models import poor

OUTER, NESTED, INNER, TRIALS = 4000, 400, 300, 1000

MODELS: dict[str, tuple[Callable[[], TemplateSet], str]] = {
    "one bin, 4 signal on 5": (lambda: problems.one_bin(4.0, 5.0), "R_D"),
    "three yields in 12 bins, 20 events a bin": (lambda: problems.linear(20.0), "yield_b"),
    "two ratios, 3 nuisances, 21 bins": (problems.small, "R_D"),
    "the same with 4% of the events": (lambda: problems.small(sparse=True), "R_D"),
    "the same with few generated events (weights 0.5 to 2)": (lambda: problems.small(variance=6.0), "R_Dst"),
    "8 categories, 576 bins, 14 nuisances": (lambda: problems.real_size(events=0.5), "R_D"),
}

POOR = {
    "400 bins, templates as large as the data": (0.3, (1e5, 1e5)),
    "the same, R 20% above that of the templates": (0.36, (1e5, 1e5)),
    "the same, R 50% above": (0.45, (1e5, 1e5)),
    "signal template 10 times poorer than the other": (0.3, (3e4, 3e5)),
}


def cell(found: Held) -> str:
    return f"{100 * found.fraction:.1f} ± {50 * (found.high - found.low):.1f}"


def fixed_templates() -> None:
    print("| model | curvature 68.3 | 95.4 | likelihood curve 68.3 | 95.4 | toys 68.3 | 95.4 |")
    print("| --- | --- | --- | --- | --- | --- | --- |")
    for label, (make, name) in MODELS.items():
        model = Model(make())
        small = model.bins < 100
        wide = interval_coverage(model, name, OUTER if small else 1000, 1)
        cells = [*wide.curvature, *wide.profile]
        from_toys = interval_coverage(model, name, NESTED, 2, inner=INNER).toys if small else ()
        print(
            f"| {label} | " + " | ".join([*map(cell, cells), *(map(cell, from_toys) if small else "––")]) + " |",
            flush=True,
        )


def regions() -> None:
    print("| model | 39.3 | 68.3 | 95.4 | 99.7 |")
    print("| --- | --- | --- | --- | --- |")
    for label, (make, _) in MODELS.items():
        model = Model(make())
        names = ("R_D", "R_Dst") if "R_Dst" in model.names else ("yield_a", "yield_b")
        if len(model.names) > 1:
            number = OUTER if model.bins < 100 else 1000
            found = region_coverage(model, names, number, 3)
            print(f"| {label} | " + " | ".join(map(cell, found.values())) + " |", flush=True)


def poor_templates() -> None:
    print(
        "| model | bias | pull width | curvature 68.3 | likelihood curve 68.3 "
        "| corrected: bias | pull width | 68.3 | 95.4 |"
    )
    print("| --- | --- | --- | --- | --- | --- | --- | --- | --- |")
    for label, (ratio, generated) in POOR.items():
        rng = np.random.default_rng(1)
        expected = Model(poor(None)).expected_counts({"R_D": ratio})
        plain, better, inside = [], [], []
        for _ in range(TRIALS):
            model, counts = Model(poor(rng, generated=generated)), rng.poisson(expected).astype(float)
            result = maximise(model, counts)
            corrected = correct_for_templates(model, result)
            plain.append((result.value("R_D") - ratio) / result.error("R_D"))
            better.append((corrected.value("R_D") - ratio) / corrected.error("R_D"))
            curve = profile(model, counts, "R_D", [result.value("R_D")], result=result)
            inside.append(curve.low < ratio < curve.high)
        p, c = np.array(plain), np.array(better)
        shares = [held(0.683, int(np.sum(np.abs(p) < 1)), TRIALS), held(0.683, int(sum(inside)), TRIALS)]
        good = [held(level, int(np.sum(np.abs(c) < width)), TRIALS) for width, level in ((1, 0.683), (2, 0.954))]
        print(
            f"| {label} | {p.mean():+.2f} σ | {p.std():.2f} | {cell(shares[0])} | {cell(shares[1])} "
            f"| {c.mean():+.2f} σ | {c.std():.2f} | {cell(good[0])} | {cell(good[1])} |",
            flush=True,
        )


def other_forms() -> None:
    """Curvature intervals of the other likelihoods, for the first of the data sets of `poor_templates`."""
    print("| model | approximate: bias | pull width | 68.3 | exact: bias | pull width | 68.3 |")
    print("| --- | --- | --- | --- | --- | --- | --- |")
    for label, (ratio, generated) in POOR.items():
        rng = np.random.default_rng(1)
        expected = Model(poor(None)).expected_counts({"R_D": ratio})
        pulls: dict[str, list[float]] = {"approximate": [], "exact": []}
        for _ in range(INNER):
            templates, counts = poor(rng, generated=generated), rng.poisson(expected).astype(float)
            for form, found in pulls.items():
                result = maximise(Model(templates, likelihood=form), counts)
                found.append((result.value("R_D") - ratio) / result.error("R_D"))
        cells = []
        for found in pulls.values():
            inside = held(0.683, int(np.sum(np.abs(found) < 1)), INNER)
            cells.append(f"{np.mean(found):+.2f} σ | {np.std(found):.2f} | {cell(inside)}")
        print(f"| {label} | {' | '.join(cells)} |", flush=True)


if __name__ == "__main__":
    regions()
    print()
    poor_templates()
    print()
    other_forms()
    print()
    fixed_templates()
