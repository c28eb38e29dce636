"""How many events: what finite templates cost each ratio, what each sample needs, and the best use of the time."""

from __future__ import annotations

from semitau.core.true_minus import formatted

from ...numbers import GAP, counted, digits_for
from ...results import Results
from ...sizing.part import SizingCost, SizingToyRatio, SizingToys
from ..table import NOTHING, Cell, Column, ReportTable, chance, count, measured, number, share, table, words

ALL = "all samples"


def ratio_table(results: Results) -> ReportTable | None:
    """Expected error of each ratio: exact templates, as it is, with the needed events."""
    columns = [
        Column("Ratio", text=True),
        Column("injected"),
        Column("error, exact templates"),
        Column("error now"),
        Column("of it from templates", names=("of it from templates", "error of that")),
        Column("error with the needed events"),
    ]
    rows = []
    for part in results.sizing.ratios if results.sizing is not None else ():
        places = digits_for(part.now) + 2
        rows.append(
            [
                words(part.label),
                number(part.injected, digits_for(part.now) + 1),
                number(part.exact, places),
                number(part.now, places),
                _uncertain(part.templates, part.templates_error, places),
                number(part.with_needed, places),
            ]
        )
    return table("sizing", "Expected error and finite templates", columns, rows)


def sample_table(results: Results) -> ReportTable | None:
    """What each sample has and needs."""
    sizing = results.sizing
    if sizing is None:
        return None
    labels = {part.ratio: part.label for part in sizing.ratios}
    columns = [
        Column("Sample", text=True, names=("sample", "label")),
        Column("generated"),
        Column("effective"),
        Column("may cost"),
        *(Column(f"costs {label}") for label in labels.values()),
        Column("needed / generated", names=("needed over generated", "its error")),
        Column("needed"),
        Column("because of", text=True, names=("decisive ratio", "because of")),
    ]
    costs = {(part.sample, part.ratio): part.cost for part in sizing.costs}
    rows = [
        [
            words(part.label, part.sample, part.label),
            count(part.generated),
            count(part.effective),
            share(part.share),
            *(share(costs.get((part.sample, ratio)), 2) for ratio in labels),
            _uncertain(part.needed, part.needed_error, min(digits_for(part.needed_error or 0.1 * part.needed), 3)),
            count(part.needed_events),
            words(f"{labels.get(part.decisive, part.decisive)}: {part.because}", part.decisive, part.because),
        ]
        for part in sizing.samples
    ]
    return table("sizing_samples", "Events that each sample needs", columns, rows)


def cost_table(results: Results) -> ReportTable | None:
    """Each sample and ratio with all that is known: to be downloaded."""
    names = [name.replace("_", " ") for name in SizingCost.model_fields]
    costs = results.sizing.costs if results.sizing is not None else ()
    rows = [[words("", value) for value in part.model_dump().values()] for part in costs]
    return table("sizing_costs", "What each sample does to each ratio", list(map(Column, names)), rows)


def curve_table(results: Results) -> ReportTable | None:
    """Expected error against the events: to be downloaded, the picture is for reading."""
    columns = list(map(Column, ("ratio", "sample", "events over those now", "expected error")))
    rows = [
        [words(curve.ratio), words(curve.sample or ALL), number(factor, 4), number(error, 6)]
        for curve in (results.sizing.curves if results.sizing is not None else ())
        for factor, error in zip(curve.factors, curve.errors, strict=True)
    ]
    return table("sizing_curves", "Expected error against the events", columns, rows)


def toy_table(results: Results) -> ReportTable | None:
    """Precision and coverage from toys with templates drawn anew."""
    sizing = results.sizing
    if sizing is None:
        return None
    labels = {part.ratio: part.label for part in sizing.ratios}
    columns = [
        Column("Ratio", text=True),
        Column("events", text=True, names=("what", "sample", "events over those now")),
        Column("true / injected"),
        Column("toys", names=("toys", "failed")),
        Column("expected error"),
        Column("mean error of the fits"),
        Column("spread", names=("spread", "error of spread")),
        Column("bias", names=("bias", "error of bias")),
        Column("pull width", names=("pull width", "error of pull width")),
        Column("coverage at 68.3 %", names=("coverage", "coverage, low", "coverage, high")),
    ]
    samples = {part.sample: part.label for part in sizing.samples}
    rows = [_toy_cells(toys, part, labels, samples) for toys in sizing.toys for part in toys.ratios]
    return table("sizing_toys", "Toys with templates and data drawn anew", columns, rows)


def _toy_cells(toys: SizingToys, part: SizingToyRatio, labels: dict[str, str], samples: dict[str, str]) -> list[Cell]:
    places = digits_for(part.spread_error) if part.spread_error else 4
    failed = f"{toys.failures} failed" if toys.failures else ""
    interval = (part.coverage, part.coverage_low, part.coverage_high)
    return [
        words(labels.get(part.ratio, part.ratio)),
        Cell(_events(toys, samples), (toys.what, toys.sample, toys.factor)),
        Cell(f"×{GAP}{toys.multiple:.3g}", (toys.multiple,)),
        Cell(count(toys.number).shown, (toys.number, toys.failures), failed),
        number(part.expected, places),
        number(part.mean_error, places),
        measured(part.spread, part.spread_error),
        measured(part.bias, part.bias_error),
        measured(part.pull_width, part.pull_width_error),
        Cell(share(part.coverage).shown, interval, f"{share(interval[1]).shown} to {share(interval[2]).shown}"),
    ]


def _events(toys: SizingToys, samples: dict[str, str]) -> str:
    if toys.factor is None:
        return "as needed"
    factor = f"×{GAP}{toys.factor:.3g}"
    return f"{factor} of {samples.get(toys.sample, toys.sample)}" if toys.what == "alone" else factor


def check_table(results: Results) -> ReportTable | None:
    """The formula against templates generated anew."""
    sizing = results.sizing
    if sizing is None:
        return None
    labels = {part.sample: part.label for part in sizing.samples}
    ratios = {part.ratio: part.label for part in sizing.ratios}
    columns = [
        Column("Sample", text=True, names=("sample", "label")),
        Column("ratio", text=True),
        Column("generated anew", text=True, names=("generated anew", "fraction", "sets")),
        Column("predicted", names=("predicted", "error of predicted")),
        Column("measured", names=("measured", "error of measured")),
        Column("scatter of the ratio", names=("scatter", "error of scatter")),
        Column("p"),
    ]
    rows = [
        [
            words(labels.get(check.sample, ALL), check.sample, labels.get(check.sample, ALL)),
            words(ratios.get(check.ratio, check.ratio)),
            Cell(
                f"{found.what}, ×{GAP}{found.fraction:.3g}, {found.sets} set{'s' * (found.sets != 1)}",
                (found.what, found.fraction, found.sets),
            ),
            _measured(check.predicted, check.predicted_error),
            _measured(check.measured, check.measured_error),
            _measured(check.scatter, check.scatter_error),
            chance(check.p_value),
        ]
        for found in sizing.verifications
        for check in found.checks
    ]
    return table("sizing_checks", "The prediction, tried by generating anew", columns, rows)


def allocation_table(results: Results) -> ReportTable | None:
    """The best and the cheapest numbers of events."""
    sizing = results.sizing
    if sizing is None or sizing.allocation is None:
        return None
    labels = {part.sample: part.label for part in sizing.samples}
    columns = [
        Column("Sample", text=True, names=("sample", "label")),
        Column("time of an event", unit="ns", names=("time of an event", "its error")),
        Column("events now"),
        Column("best in the same time"),
        Column("cheapest for the aim"),
    ]
    rows = [
        [
            words(labels.get(part.sample, part.sample), part.sample, labels.get(part.sample, part.sample)),
            _measured(part.nanoseconds, part.nanoseconds_error),
            count(part.now),
            count(part.best),
            count(part.cheapest),
        ]
        for part in sizing.allocation.samples
    ]
    return table("sizing_allocation", "Events of each sample, best shared out", columns, rows)


def gain_table(results: Results) -> ReportTable | None:
    """What the best allocation does for each ratio."""
    sizing = results.sizing
    if sizing is None or sizing.allocation is None:
        return None
    labels = {part.ratio: part.label for part in sizing.ratios}
    columns = [
        Column("Ratio", text=True),
        Column("templates now"),
        Column("templates best"),
        Column("error now"),
        Column("error best"),
        Column("error cheapest"),
    ]
    rows = []
    for part in sizing.allocation.gains:
        places = digits_for(part.error_now) + 2
        values = (part.templates_now, part.templates_best, part.error_now, part.error_best, part.error_cheapest)
        rows.append([words(labels.get(part.ratio, part.ratio)), *(number(value, places) for value in values)])
    return table("sizing_gains", "What the best use of the time brings", columns, rows)


def _uncertain(value: float, error: float, places: int) -> Cell:
    shown, beyond = formatted(value, f".{places}f"), 0.5 * 10.0**-places
    return Cell(f"{shown}{GAP}±{GAP}{formatted(error, f'.{places}f')}" if error >= beyond else shown, (value, error))


def _measured(value: float | None, error: float | None) -> Cell:
    if value is None:
        return Cell(NOTHING, (None, error))
    if not error:
        return Cell(counted(value) if value >= 1000 else formatted(value, ".3g"), (value, error))
    return Cell(measured(value, error).shown, (value, error))
