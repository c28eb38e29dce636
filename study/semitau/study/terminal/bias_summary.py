"""The bias matrix as a person sees it in the terminal: what is not covered first."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from ..bias.part import Bias, BiasPair, BiasRatio
from ..numbers import GAP, digits_beside, digits_for, percent, shortened, signed
from .summary import listed, plain_table

COLOURS = {"not covered": "bold red", "undecided": "yellow", "covered": "", "negligible": "dim"}


def bias_summary(bias: Bias) -> Iterator[RenderableType]:
    """What no systematic covers, every alternative fitted with the study, the matrix of shifts, and the rest."""
    yield _uncovered(bias)
    yield shift_table(bias)
    yield ""
    if any(ratio.coverage for pair in bias.pairs for ratio in pair.ratios):
        yield toy_table(bias)
        yield ""
    for name, label in {ratio.ratio: ratio.label for pair in bias.pairs for ratio in pair.ratios}.items():
        yield shift_matrix(bias, name, label)
        yield ""
    yield listed(bias.sentences)


def shift_table(bias: Bias) -> Table:
    """Shift and judgement of each ratio for each alternative fitted with the study itself."""
    table = plain_table("Made with, fitted with the study", "", "shift", "in errors", "covering error", "")
    for made, _, ratio in _fitted_with_study(bias):
        if ratio is None:
            table.add_row(made, "", "the fit failed")
            continue
        places = digits_for(ratio.error) + 1
        table.add_row(
            made,
            ratio.label,
            f"{signed(ratio.shift, places, plus=True)}{GAP}±{GAP}{signed(ratio.shift_error, places)}",
            signed(ratio.significance, 2, plus=True),
            signed(ratio.covering, digits_beside(ratio.covering, ratio.error)),
            Text(ratio.status, style=COLOURS[ratio.status]),
        )
    return table


def toy_table(bias: Bias) -> Table:
    """Pulls, coverage and goodness of fit for each alternative fitted with the study itself."""
    levels = next((ratio.coverage for pair in bias.pairs for ratio in pair.ratios), ())
    heads = (f"{percent(part.level)} covers" for part in levels)
    table = plain_table("Toys", "", "pull mean", "pull width", *heads, "typical p")
    for made, pair, ratio in _fitted_with_study(bias):
        if ratio is None or not ratio.coverage:
            continue
        p_value = None if pair.goodness is None else pair.goodness.p_value
        table.add_row(
            made,
            ratio.label,
            _pull(ratio.pull_mean, ratio.pull_mean_error),
            _pull(ratio.pull_width, ratio.pull_width_error),
            *(f"{signed(100 * c.fraction, 1)} ± {percent((c.high - c.low) / 2)}" for c in ratio.coverage),
            "–" if p_value is None else signed(p_value, 2),
        )
    return table


def _fitted_with_study(bias: Bias) -> Iterator[tuple[str, BiasPair, BiasRatio | None]]:
    """Label (on its first line alone), pair and ratio; None for a fit that failed."""
    nominal = bias.studies[0].name
    labels = {study.name: shortened(study.label) for study in bias.studies}
    for pair in bias.pairs:
        if pair.fitted_with == nominal and pair.made_with != nominal:
            for number, ratio in enumerate(pair.ratios or (None,)):
                yield labels[pair.made_with] if number == 0 else "", pair, ratio


def _pull(value: float | None, error: float | None) -> str:
    return "–" if value is None or error is None else f"{signed(value, 2)}{GAP}±{GAP}{signed(error, 2)}"


def shift_matrix(bias: Bias, name: str, label: str) -> Table:
    """Shift of one ratio in its errors; columns are the studies by their numbers."""
    numbers = {study.name: number for number, study in enumerate(bias.studies)}
    table = plain_table(f"{label} made with ↓, fitted with →", *map(str, numbers.values()))
    found = {(pair.made_with, pair.fitted_with): pair for pair in bias.pairs}
    for study in bias.studies:
        cells = [_shift(found[study.name, other.name], name) for other in bias.studies]
        table.add_row(f"{numbers[study.name]} {shortened(study.label)}", *cells)
    return table


def _shift(pair: BiasPair, name: str) -> Text:
    ratio = next((ratio for ratio in pair.ratios if ratio.ratio == name), None)
    if pair.made_with == pair.fitted_with:
        return Text("·", style="dim")
    if ratio is None:
        return Text("failed")
    mark = {"not covered": "*", "undecided": "?"}.get(ratio.status, " ")
    return Text(signed(ratio.significance, 2, plus=True) + mark, style=COLOURS[ratio.status])


def _uncovered(bias: Bias) -> RenderableType:
    """What no systematic covers, or that there is no such thing."""
    if not bias.not_covered:
        return Text("No alternative is found to shift a ratio by more than what covers it.\n", style="bold green")
    headline = Text("Not covered by the assigned systematic errors:", style="bold red")
    return Group(headline, listed(bias.not_covered), "")
