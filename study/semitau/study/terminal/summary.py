"""What a person sees in the terminal: ratios beside injected values, budget, toys, verdict."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from rich import box
from rich.console import Group, RenderableType
from rich.table import Table
from rich.text import Text

from ..findings import Finding, findings
from ..numbers import GAP, counted, digits_for, percent, signed, with_error
from ..results import (
    Blinding,
    Budget,
    CutFlowComponent,
    Fit,
    Linearity,
    NuisanceResult,
    RatioResult,
    Results,
    Toys,
    Verdict,
)

VERDICT_COLOURS = {"sound": "green", "doubtful": "yellow", "unsound": "red", "undecided": "yellow"}

VERDICT_WORDS = {
    "sound": "The fit is sound",
    "doubtful": "The fit is doubtful",
    "unsound": "The fit is not sound",
    "undecided": "Not decided: too few toys",
}


def summary(results: Results, report: str) -> RenderableType:
    """The whole study in one screen. report : where the report lies."""
    parts: list[RenderableType] = [
        Text(results.study.name, style="bold"),
        Text(results.statement, style="dim"),
        ratio_table(results.ratios),
    ]
    if results.blinding is not None:
        parts.append(hidden_line(results.blinding))
    if results.fit.goodness is not None and results.data.kind != "expected":
        parts.append(goodness_line(results.fit))
    if results.budget:
        parts.append(budget_table(results.budget, results.ratios))
    if results.toys is not None:
        parts.append(toy_table(results.toys))
    if results.linearity:
        parts.append(linearity_table(results.linearity))
    parts.append(verdict_text(results.verdict))
    if found := findings(results):
        parts.append(findings_text(found))
    parts.extend(Text(f"Look at this: {warning}", style="yellow") for warning in results.warnings)
    parts.append(Text(f"Report: {report}"))
    return Group(*(line for part in parts for line in ((part, "") if isinstance(part, Table) else (part,))))


def ratio_table(ratios: Sequence[RatioResult]) -> Table:
    """Fitted ratios beside the injected ones, errors split by kind."""
    table = plain_table("", "fitted", "injected", "pull", "statistical", "templates", "systematic")
    for ratio in ratios:
        places = digits_for(ratio.error) + 1
        table.add_row(
            ratio.label,
            with_error(ratio.value, ratio.error),
            signed(ratio.injected, digits_for(ratio.error)),
            "hidden" if ratio.pull is None else signed(ratio.pull, 2, plus=True),
            *(_part(part, places) for part in (ratio.statistical, ratio.template_statistics, ratio.systematic)),
        )
    return table


def hidden_line(blinding: Blinding) -> Text:
    """That the ratios are not what they seem."""
    return Text(
        f"The fitted ratios are hidden ({blinding.kind}, passphrase {blinding.fingerprint}): not the true ones.\n",
        style="yellow",
    )


def goodness_line(fit: Fit) -> Text:
    """Goodness of fit in one line."""
    goodness = fit.goodness
    if goodness is None:
        return Text("Goodness of fit: not known")
    p_value = "–" if goodness.p_value is None else signed(goodness.p_value, 3)
    from_toys = "" if goodness.toy_p_value is None else f" ({signed(goodness.toy_p_value, 3)} from the toys)"
    freedom = counted(goodness.degrees_of_freedom)
    return Text(
        f"Goodness of fit: {goodness.statistic:.1f} for {freedom} degrees of freedom, p = {p_value}{from_toys}\n"
    )


def parameter_table(fit: Fit) -> Table:
    """Every fitted parameter."""
    table = plain_table("Parameter", "fitted", "made with", "constraint")
    for parameter in fit.parameters:
        if not parameter.error > 0:
            continue
        places = digits_for(parameter.error)
        constraint = "free" if parameter.constraint is None else f"± {parameter.constraint:.2f}"
        table.add_row(
            parameter.label,
            with_error(parameter.value, parameter.error),
            signed(parameter.injected, places),
            constraint,
        )
    return table


def held_table(budgets: Sequence[Budget], ratios: Sequence[RatioResult]) -> Table:
    """By how much the error of each ratio falls, in quadrature, when a source alone is held."""
    labels = {ratio.name: ratio.label for ratio in ratios}
    table = plain_table("When held, the error falls by", *(labels[budget.ratio] for budget in budgets))
    sources = {row.source: row.label for budget in budgets for row in budget.rows if row.source != "statistical"}
    for source, label in sources.items():
        held = [{row.source: row.held for row in budget.rows}.get(source) for budget in budgets]
        places = [digits_for(budget.total) + 1 for budget in budgets]
        table.add_row(label, *(_part(part, place) for part, place in zip(held, places, strict=True)))
    return table


def budget_table(budgets: Sequence[Budget], ratios: Sequence[RatioResult]) -> Table:
    """Error of each ratio by source, with its share of the ratio."""
    labels = {ratio.name: ratio.label for ratio in ratios}
    # Hidden ratios are no scale for errors.
    values = {ratio.name: abs(ratio.injected if ratio.pull is None else ratio.value) for ratio in ratios}
    table = plain_table("Uncertainty from", *(cell for budget in budgets for cell in (labels[budget.ratio], "")))
    sources = {row.source: row.label for budget in budgets for row in budget.rows}
    for source, label in sources.items():
        table.add_row(label, *_budget_cells(budgets, values, source))
    table.add_section()
    table.add_row("total", *_budget_cells(budgets, values, None), style="bold")
    return table


def nuisance_table(nuisances: Sequence[NuisanceResult], ratios: Sequence[RatioResult], most: int = 20) -> Table:
    """Constrained parameters, the strongest first: pull, constraint, larger shift of each ratio in its errors."""
    table = plain_table("Nuisance", "pull", "constraint", *(f"shifts {ratio.label}" for ratio in ratios))
    errors = {ratio.name: ratio.error for ratio in ratios}
    for nuisance in nuisances[:most]:
        cells = []
        for shift in nuisance.shifts:
            ends = [end for end in (shift.down, shift.up) if end is not None]
            size = max(ends, key=abs) / errors[shift.ratio] if ends else None
            cells.append("–" if size is None else f"{signed(size, 2, plus=True)}{GAP}σ")
        table.add_row(nuisance.label, signed(nuisance.pull, 2, plus=True), signed(nuisance.constraint, 2), *cells)
    if len(nuisances) > most:
        table.caption = f"and {len(nuisances) - most} weaker ones"
    return table


def toy_table(toys: Toys) -> Table:
    """Bias, pulls and coverage."""
    levels = [coverage.level for coverage in toys.ratios[0].coverage] if toys.ratios else []
    table = plain_table("", "pull mean", "pull width", *(f"{percent(level)} covers" for level in levels))
    table.caption = f"{counted(toys.number)} toys, {counted(toys.failures)} failed"
    for ratio in toys.ratios:
        table.add_row(
            ratio.label,
            with_error(ratio.pull_mean, ratio.pull_mean_error),
            with_error(ratio.pull_width, ratio.pull_width_error),
            *(f"{signed(100 * c.fraction, 1)} ± {percent((c.high - c.low) / 2)}" for c in ratio.coverage),
        )
    return table


def linearity_table(lines: Iterable[Linearity]) -> Table:
    """Slope and offset of fitted against injected ratio."""
    table = plain_table("Linearity", "slope", "intercept")
    for line in lines:
        table.add_row(
            line.label, with_error(line.slope, line.slope_error), with_error(line.intercept, line.intercept_error)
        )
    return table


def verdict_text(verdict: Verdict) -> RenderableType:
    """The judgement, its headline in colour."""
    headline = Text(f"{VERDICT_WORDS[verdict.status]}.", style=f"bold {VERDICT_COLOURS[verdict.status]}")
    return Group(headline, listed(verdict.sentences), "")


def listed(sentences: Sequence[str]) -> Table:
    """Sentences as a list. A grid keeps the indent of those that take several lines."""
    grid = Table.grid(padding=(0, 1))
    for sentence in sentences:
        grid.add_row("  •", Text(sentence))
    return grid


def findings_text(found: Sequence[Finding]) -> RenderableType:
    """What must be looked at first, then the most important of every other part."""
    lines = Table.grid(padding=(0, 1))
    for finding in sorted(found, key=lambda finding: not finding.alarming):
        mark = "Look at this: " if finding.alarming else ""
        lines.add_row(finding.topic, Text(f"{mark}{finding.text}"), style="yellow" if finding.alarming else "")
    return Group(lines, "")


def cut_flow_table(flow: Sequence[CutFlowComponent]) -> Table:
    """What the selection leaves of each component; every step stands in the JSON and in the report."""
    table = plain_table("Component", flow[0].steps[0].name if flow else "", "selected", "efficiency", "purity")
    for component in flow:
        first, last = component.steps[0].events, component.steps[-1].events
        table.add_row(
            component.label,
            counted(first),
            counted(last),
            percent(last / first) if first else "–",
            percent(component.purity),
        )
    return table


def plain_table(*headings: str) -> Table:
    """An empty table with these headings, numbers to the right."""
    table = Table(box=box.SIMPLE_HEAD, pad_edge=False, show_edge=False, header_style="bold", caption_justify="left")
    for number, heading in enumerate(headings):
        table.add_column(heading, justify="right" if number else "left", no_wrap=True)
    return table


def _part(part: float | None, places: int) -> str:
    return "–" if part is None else signed(part, places)


def _budget_cells(budgets: Sequence[Budget], values: dict[str, float], source: str | None) -> Iterable[str]:
    for budget in budgets:
        error = budget.total if source is None else {row.source: row.error for row in budget.rows}.get(source)
        if error is None:
            yield from ("–", "")
        else:
            yield signed(error, digits_for(budget.total) + 1)
            yield percent(error / values[budget.ratio]) if values[budget.ratio] else ""
