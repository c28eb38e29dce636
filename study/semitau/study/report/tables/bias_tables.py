"""The bias matrix: what each alternative changes, what it does to each ratio, and whether a systematic covers it."""

from __future__ import annotations

from collections.abc import Iterator

from ...bias.part import Bias, BiasPair, BiasRatio
from ...numbers import GAP, digits_beside, digits_for, percent
from ...results import Results
from ..table import NOTHING, Cell, Column, ReportTable, chance, measured, number, table, words

MARKS = {"covered": "covered", "not covered": f"NOT{GAP}COVERED", "negligible": "negligible", "undecided": "undecided"}


def change_table(results: Results) -> ReportTable | None:
    """The alternatives and what they change."""
    columns = [
        Column("Alternative", text=True, names=("alternative", "label")),
        Column("key", text=True),
        Column("study", text=True),
        Column("alternative", text=True, names=("changed to",)),
        Column("meant to cover it", text=True),
    ]
    rows = []
    for study in results.bias.studies[1:] if results.bias is not None else ():
        covered = ", ".join(study.covered_by) or "whole systematic error"
        for change in study.changes:
            rows.append(
                [
                    words(study.label, study.name, study.label),
                    words(change.key),
                    words(change.before or NOTHING, change.before),
                    words(change.after),
                    words(covered),
                ]
            )
    return table("alternatives", "Alternatives and what they change", columns, rows)


def nominal_table(results: Results) -> ReportTable | None:
    """Each alternative fitted with the model of the study: the shift of each ratio, and what covers it."""
    columns = [
        Column("Made with", text=True),
        Column("ratio", text=True),
        Column("shift", names=("shift", "error of shift")),
        Column("shift / error"),
        Column("covering error"),
        Column("judgement", text=True),
        Column("pull mean", names=("pull mean", "error of pull mean")),
        Column("pull width", names=("pull width", "error of pull width")),
        Column("coverage", names=("coverage", "nominal")),
        Column("typical p"),
    ]
    if results.bias is None or not results.bias.studies:
        return None
    labels = {study.name: study.label for study in results.bias.studies}
    nominal = results.bias.studies[0].name
    rows = [
        [words(labels[pair.made_with], pair.made_with), *_nominal_cells(pair, ratio)]
        for pair in results.bias.pairs
        if pair.fitted_with == nominal and pair.made_with != nominal
        for ratio in pair.ratios
    ]
    return table("bias", "Alternatives fitted with the model of the study", columns, rows)


def _nominal_cells(pair: BiasPair, ratio: BiasRatio) -> Iterator[Cell]:
    yield words(ratio.label)
    yield _shift(ratio)
    yield number(ratio.significance, 2, plus=True)
    yield number(ratio.covering, digits_beside(ratio.covering, ratio.error))
    yield words(MARKS[ratio.status], ratio.status)
    yield _pull(ratio.pull_mean, ratio.pull_mean_error)
    yield _pull(ratio.pull_width, ratio.pull_width_error)
    if ratio.coverage:
        first = ratio.coverage[0]
        yield Cell(percent(first.fraction), (first.fraction, first.level), f"of {percent(first.level)}")
    else:
        yield Cell(NOTHING, (None, None))
    yield chance(None if pair.goodness is None else pair.goodness.p_value)


def _shift(ratio: BiasRatio) -> Cell:
    """The shift with its error; what is exact, or nearly so, without it."""
    if ratio.shift_error > 1e-3 * ratio.error:
        return measured(ratio.shift, ratio.shift_error)
    return Cell(number(ratio.shift, digits_for(ratio.error) + 2, plus=True).shown, (ratio.shift, ratio.shift_error))


def _pull(value: float | None, error: float | None) -> Cell:
    if value is None or error is None:
        return Cell(NOTHING, (value, error))
    return measured(value, error)


def pair_table(results: Results) -> ReportTable | None:
    """Every pair, to the last number: to be downloaded, the matrices are for reading."""
    if results.bias is None:
        return None
    headings = "made with,fitted with,valid,reason,outside,toys,failures,deviance,degrees of freedom,p,p from toys,"
    headings += "ratio,true,shift,error of shift,error,shift / error,covering error,judgement,pull mean,"
    headings += "error of pull mean,pull width,error of pull width,coverage"
    columns = [Column(name) for name in headings.split(",")]
    rows = [list(map(_plain, values)) for pair in results.bias.pairs for values in _pair_values(pair)]
    return table("bias_pairs", "All pairs", columns, rows)


Plain = str | float | bool | None


def _plain(value: Plain) -> Cell:
    return Cell(str(value), (value,))


def _pair_values(pair: BiasPair) -> Iterator[list[Plain]]:
    fit = pair.goodness
    goodness: list[Plain] = [None] * 4
    if fit is not None:
        goodness = [fit.deviance, fit.degrees_of_freedom, fit.p_value, fit.toy_p_value]
    start: list[Plain] = [
        pair.made_with,
        pair.fitted_with,
        pair.valid,
        pair.reason,
        pair.outside,
        pair.toys,
        pair.failures,
    ]
    if not pair.ratios:
        yield [*start, *goodness, *[None] * 13]
    for r in pair.ratios:
        pulls: list[Plain] = [r.pull_mean, r.pull_mean_error, r.pull_width, r.pull_width_error]
        shift: list[Plain] = [r.ratio, r.true, r.shift, r.shift_error, r.error, r.significance, r.covering, r.status]
        yield [*start, *goodness, *shift, *pulls, r.coverage[0].fraction if r.coverage else None]


def matrix_tables(results: Results) -> Iterator[ReportTable]:
    """One matrix a ratio: shift in errors, made with (rows) and fitted with (columns)."""
    bias = results.bias
    if bias is None:
        return
    labels = {study.name: study.label for study in bias.studies}
    for name, label in {ratio.ratio: ratio.label for pair in bias.pairs for ratio in pair.ratios}.items():
        columns = [Column("Made with", text=True), *(Column(labels[study.name]) for study in bias.studies)]
        rows = [
            [
                words(labels[made.name], made.name),
                *(_matrix_cell(bias, made.name, fit.name, name) for fit in bias.studies),
            ]
            for made in bias.studies
        ]
        title = f"Shift of {label} in its errors: made with (rows), fitted with (columns)"
        found = table(f"bias_{name}", title, columns, rows)
        if found is not None:
            yield found


def _matrix_cell(bias: Bias, made: str, fitted: str, ratio: str) -> Cell:
    for pair in bias.pairs:
        if (pair.made_with, pair.fitted_with) == (made, fitted):
            for part in pair.ratios:
                if part.ratio == ratio:
                    beside = MARKS[part.status] if part.status in ("not covered", "undecided") else ""
                    return Cell(number(part.significance, 2, plus=True).shown, (part.significance,), beside)
            return Cell("no fit", (None,))
    return Cell(NOTHING, (None,))
