"""Averages as tables for people."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text
from semitau.core.true_minus import formatted

from ..numbers import GAP, digits_for, percent, shortened, signed, with_error
from ..terminal.summary import plain_table
from .part import AveragedRatio, AverageResults, TensionPart
from .tables import RATIOS

FORMS = {"linear": "best linear unbiased estimate", "likelihood": "likelihood with asymmetric errors"}
OUTCOMES = {"average": "at the average", "prediction": "at the prediction"}


def average_summary(results: AverageResults) -> Iterator[RenderableType]:
    """Inputs with their weights, the average, common sources, the tension, and what planned measurements would do."""
    yield Text(results.name, style="bold")
    if results.note:
        yield Text(results.note, style="dim")
    yield from ("", input_table(results), "", ratio_table(results), "", quality_line(results))
    if results.sources:
        yield from ("", source_table(results))
    if results.tension is not None:
        yield from ("", tension_text(results))
    if results.planned:
        yield from ("", what_if_table(results))


def input_table(results: AverageResults) -> Table:
    """Each measured ratio, its weight in each averaged ratio, its pull."""
    names = [ratio.name for ratio in results.ratios]
    table = plain_table(
        "Measurement", "", "value", "stat.", "syst.", *(f"weight in {RATIOS[name]}" for name in names), "pull"
    )
    last = ""
    for entry in results.inputs:
        places = digits_for(min(filter(None, (*entry.statistical, *entry.systematic))))
        table.add_row(
            shortened(entry.measurement) if entry.measurement != last else "",
            RATIOS[entry.ratio],
            signed(entry.value, places),
            _sides(entry.statistical, places),
            _sides(entry.systematic, places),
            *(percent(entry.weights[name]) for name in names),
            "–" if entry.pull is None else signed(entry.pull, 2, plus=True),
        )
        last = entry.measurement
    return table


def ratio_table(results: AverageResults) -> Table:
    """The average with its errors by kind."""
    two_sided = results.form == "likelihood"
    table = plain_table("Average", "", *("+ side", "− side") * two_sided, "statistical", "systematic")
    for ratio in results.ratios:
        places = digits_for(ratio.error) + 1
        table.add_row(
            ratio.label,
            with_error(ratio.value, ratio.error),
            *(f"{sign}{GAP}{side:.{places}f}" for sign, side in (("+", ratio.up), ("−", ratio.down)) if two_sided),
            *(signed(part, places) for part in (ratio.statistical, ratio.systematic)),
        )
    return table


def quality_line(results: AverageResults) -> Text:
    """How the average was made, and how well the inputs agree."""
    parts = [f"{FORMS[results.form].capitalize()}."]
    if results.correlation is not None:
        parts.append(f"Correlation {signed(results.correlation, 2, plus=True)}.")
    if results.p_value is not None:
        freedom = results.degrees_of_freedom
        parts.append(
            f"χ² {results.chi2:.1f} for {freedom} degree{'s' * (freedom != 1)} of freedom, "
            f"p = {formatted(results.p_value, '.2g')}."
        )
    return Text(" ".join(parts))


def source_table(results: AverageResults) -> Table:
    """What each common source contributes to the errors."""
    table = plain_table("Common source", "correlation", *(f"error of {ratio.label}" for ratio in results.ratios))
    for source in results.sources:
        shown = (signed(source.errors[r.name], digits_for(r.error) + 1) for r in results.ratios)
        table.add_row(source.label, signed(source.correlation, 2), *shown)
    return table


def tension_text(results: AverageResults) -> Text:
    """The average against the prediction in sentences."""
    found = results.tension
    if found is None:
        return Text("")
    predicted = ", ".join(
        f"{RATIOS[entry.ratio]} = {signed(entry.value, 3)} ± {entry.error:.3f}" for entry in results.prediction
    )
    single = ", ".join(f"{signed(sigmas, 1, plus=True)}{GAP}σ in {RATIOS[r]}" for r, sigmas in found.each.items())
    text = f"From the prediction {predicted} it differs by {single}"
    if found.degrees_of_freedom > 1:
        text += f"; together by {found.sigmas:.2f}{GAP}σ (χ² {found.chi2:.1f}, p = {formatted(found.p_value, '.2g')})"
    return Text(f"{text}.")


def what_if_table(results: AverageResults) -> Table:
    """The average as it is and with each planned measurement."""
    compared = results.tension is not None
    table = plain_table("What if", "found", *(ratio.label for ratio in results.ratios), *["tension"] * compared)
    now = {ratio.name: ratio for ratio in results.ratios}
    table.add_row("as it is", "", *(_shown(now[name]) for name in now), *_tension(results.tension, compared))
    for case in results.planned:
        then = {ratio.name: ratio for ratio in case.ratios}
        cells = (_shown(then[name]) for name in now)
        table.add_row(
            f"+ {shortened(case.planned)}", OUTCOMES[case.found_at], *cells, *_tension(case.tension, compared)
        )
    return table


def _shown(ratio: AveragedRatio) -> str:
    return with_error(ratio.value, ratio.error)


def _tension(tension: TensionPart | None, compared: bool) -> list[str]:
    return ([f"{tension.sigmas:.2f}{GAP}σ"] if tension is not None else ["–"]) if compared else []


def _sides(spread: tuple[float, float], places: int) -> str:
    up, down = spread
    return f"{up:.{places}f}" if up == down else f"+{up:.{places}f} −{down:.{places}f}"
