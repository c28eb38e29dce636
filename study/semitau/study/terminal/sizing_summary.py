"""Sizing as a person sees it in the terminal: what was found, in words, then the numbers."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from ..numbers import GAP, counted, digits_for, percent, shortened, signed, with_error
from ..sizing.part import Sizing, SizingAllocation, SizingSample
from .summary import plain_table


def sizing_summary(found: Sizing) -> Iterator[RenderableType]:
    """Sentences, samples, toys, verification, allocation, and the lines for the study file."""
    for sentence in found.sentences:
        yield Text(f"• {sentence}", style="yellow" if sentence.startswith("Look at this") else "")
    yield ""
    yield sample_table(found)
    yield ""
    if found.toys:
        yield from (toy_table(found), "")
    for verification in found.verifications:
        yield from (check_table(found, verification.what), "")
    if found.allocation is not None:
        yield from (allocation_table(found, found.allocation), "", Text(found.allocation.snippet, style="dim"))
    elif found.snippet:
        yield Text(found.snippet, style="dim")


def sample_table(found: Sizing) -> Table:
    """Events and costs of every sample."""
    table = plain_table(
        "Sample", "events", "effective", *(f"part of {ratio.label}" for ratio in found.ratios), "share",
        "needed, times", "needed events",
    )  # fmt: skip
    costs = {(cost.sample, cost.ratio): cost for cost in found.costs}
    for sample in found.samples:
        own = [costs[sample.sample, ratio.ratio] for ratio in found.ratios]
        table.add_row(
            shortened(sample.label),
            "–" if sample.generated is None else counted(sample.generated),
            counted(sample.effective),
            *(with_error(cost.part, cost.part_error) if cost.part_error > 0.0 else "0" for cost in own),
            percent(sample.share, 0),
            Text(_needed(sample), style="bold red" if sample.needed > 1.0 else ""),
            "–" if sample.needed_events is None else counted(sample.needed_events),
        )
    return table


def _needed(sample: SizingSample) -> str:
    if not sample.needed > 0.0:
        return "any"
    return with_error(sample.needed, sample.needed_error) if sample.needed_error > 0.0 else f"{sample.needed:.3g}"


def toy_table(found: Sizing) -> Table:
    """Toys with new templates: errors, bias, pulls, coverage."""
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    samples = {sample.sample: sample.label for sample in found.samples}
    table = plain_table("Toys: events", "true", "", "expected", "reported", "scatter", "bias", "pull width", "covers")
    for toys in found.toys:
        events = "needed" if toys.factor is None else f"× {toys.factor:g} {samples.get(toys.sample, '')}".rstrip()
        for part in toys.ratios:
            places = digits_for(part.mean_error) + 1
            error = 50.0 * (part.coverage_high - part.coverage_low)
            table.add_row(
                events,
                f"× {toys.multiple:g}",
                labels[part.ratio],
                signed(part.expected, places),
                signed(part.mean_error, places),
                with_error(part.spread, part.spread_error),
                f"{signed(part.bias, places, plus=True)}{GAP}±{GAP}{signed(part.bias_error, places)}",
                with_error(part.pull_width, part.pull_width_error),
                f"{signed(100.0 * part.coverage, 1)}{GAP}±{GAP}{error:.1f}{GAP}%",
            )
            events = ""
    return table


def check_table(found: Sizing, what: str) -> Table:
    """Template errors, predicted and generated."""
    verification = next(each for each in found.verifications if each.what == what)
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    samples = {sample.sample: sample.label for sample in found.samples}
    title = (
        f"{verification.sets} × {verification.fraction:.3g} of the {'events' if what == 'fewer' else 'needed events'}"
    )
    table = plain_table(title, "", "predicted", "by variances", "scatter of fits", "p")
    for check in verification.checks:
        scatter = None if check.scatter is None else with_error(check.scatter, check.scatter_error or 0.0)
        table.add_row(
            shortened(samples.get(check.sample, "all together")),
            labels[check.ratio],
            with_error(check.predicted, check.predicted_error),
            with_error(check.measured, check.measured_error),
            scatter or "–",
            "–" if check.p_value is None else signed(check.p_value, 3),
        )
    return table


def allocation_table(found: Sizing, best: SizingAllocation) -> Table:
    """Events of every sample: now, best in the time, cheapest for the aim."""
    labels = {sample.sample: sample.label for sample in found.samples}
    table = plain_table(
        "Allocation", "ns an event", "now", f"best in {best.seconds:.2g} s", f"for {percent(best.aim, 0)} in all"
    )
    for sample in best.samples:
        error = sample.nanoseconds_error
        pace = f"{sample.nanoseconds:.0f}" if error is None else with_error(sample.nanoseconds, max(error, 0.1))
        table.add_row(
            shortened(labels[sample.sample]), pace, counted(sample.now), counted(sample.best), counted(sample.cheapest)
        )
    return table
