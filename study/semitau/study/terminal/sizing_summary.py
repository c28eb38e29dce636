"""Sizing as a person sees it in the terminal: what was found, in words, then the numbers."""

from __future__ import annotations

from collections.abc import Iterator

from rich.console import RenderableType
from rich.table import Table
from rich.text import Text

from ..numbers import bracketed, counted, digits_for, duration, percent, shortened, signed
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
        "Sample", "events", *(f"part of {ratio.label}" for ratio in found.ratios), "needed, times", "for", "events"
    )
    costs = {(cost.sample, cost.ratio): cost for cost in found.costs}
    for sample in found.samples:
        own = [costs[sample.sample, ratio.ratio] for ratio in found.ratios]
        table.add_row(
            shortened(sample.label),
            "–" if sample.generated is None else counted(sample.generated),
            *(bracketed(cost.part, cost.part_error) for cost in own),
            Text(_needed(sample), style="bold red" if sample.needed > 1.0 else ""),
            sample.because,
            "–" if sample.needed_events is None else counted(sample.needed_events),
        )
    return table


def _needed(sample: SizingSample) -> str:
    return bracketed(sample.needed, sample.needed_error) if sample.needed > 0.0 else "any"


def toy_table(found: Sizing) -> Table:
    """Toys with new templates: errors, bias, pulls, coverage."""
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    samples = {sample.sample: sample.label for sample in found.samples}
    table = plain_table("Toys: events", "true", "", "reported", "scatter", "bias", "pull width", "covers, %")
    for toys in found.toys:
        label = shortened(samples.get(toys.sample, ""), 20)
        events = "needed" if toys.factor is None else f"×{toys.factor:g} {label}".rstrip()
        for part in toys.ratios:
            table.add_row(
                events,
                f"×{toys.multiple:g}" if events else "",
                labels[part.ratio],
                signed(part.mean_error, digits_for(part.mean_error) + 1),
                bracketed(part.spread, part.spread_error),
                bracketed(part.bias, part.bias_error),
                bracketed(part.pull_width, part.pull_width_error),
                bracketed(100.0 * part.coverage, 50.0 * (part.coverage_high - part.coverage_low)),
            )
            events = ""
    return table


def check_table(found: Sizing, what: str) -> Table:
    """Template errors, predicted and generated."""
    verification = next(each for each in found.verifications if each.what == what)
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    samples = {sample.sample: sample.label for sample in found.samples}
    events = "events" if what == "fewer" else "needed events"
    title = f"{verification.sets} × {verification.fraction:.3g} of the {events}"
    table = plain_table(title, "", "predicted", "by variances", "scatter of fits", "p")
    for check in verification.checks:
        scatter = None if check.scatter is None else bracketed(check.scatter, check.scatter_error or 0.0)
        table.add_row(
            shortened(samples.get(check.sample, "all together")),
            labels[check.ratio],
            bracketed(check.predicted, check.predicted_error),
            bracketed(check.measured, check.measured_error),
            scatter or "–",
            "–" if check.p_value is None else signed(check.p_value, 3),
        )
    return table


def allocation_table(found: Sizing, best: SizingAllocation) -> Table:
    """Events of every sample: now, best in the time, cheapest for the aim."""
    labels = {sample.sample: sample.label for sample in found.samples}
    table = plain_table(
        "Allocation", "ns an event", "now", f"best in {duration(best.seconds)}", f"for {percent(best.aim, 0)} in all"
    )
    for sample in best.samples:
        table.add_row(
            shortened(labels[sample.sample]),
            bracketed(sample.nanoseconds, sample.nanoseconds_error or 0.0),
            counted(sample.now),
            counted(sample.best),
            counted(sample.cheapest),
        )
    return table
