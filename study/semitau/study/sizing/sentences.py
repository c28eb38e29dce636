"""What sizing found, in words: the most important first."""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from math import sqrt

from semitau.core.true_minus import formatted
from semitau.fit.toys.pulls import LEVELS

from ..numbers import GAP, bracketed, counted, duration, percent, signed
from .part import Sizing, SizingRatio, SizingSample, SizingToyRatio, SizingToys, SizingVerification

UNLIKELY = 0.0027
"""p-value of three standard deviations: a prediction that fares worse is doubted."""


def sentences(found: Sizing) -> Iterator[str]:
    """Cost now, needed events, coverage, verification, allocation."""
    yield from _costs(found)
    yield _needs(found)
    yield from _coverage(found)
    for verification in found.verifications:
        yield _verified(found, verification)
    yield from _allocation(found)


def _costs(found: Sizing) -> Iterator[str]:
    for ratio in found.ratios:
        growth = ratio.now / ratio.exact - 1.0
        yield (
            f"{ratio.label}: template statistics are {bracketed(ratio.templates, ratio.templates_error)} "
            f"of the expected error of {signed(ratio.now, 4)}, which is {percent(growth)} larger than with exact "
            f"templates; with the needed events {percent(ratio.with_needed / ratio.exact - 1.0)}" + _bias(ratio)
        )


def _bias(ratio: SizingRatio) -> str:
    if ratio.bias_now is None or ratio.bias_needed is None:
        return "."
    now, needed = (signed(bias / ratio.exact, 3, plus=True) for bias in (ratio.bias_now, ratio.bias_needed))
    return f". Noise of the templates pulls it by {now} errors, with the needed events by {needed}."


def _needs(found: Sizing) -> str:
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    short = sorted((s for s in found.samples if s.needed > 1.0), key=lambda s: -s.needed)
    if not short:
        return "Every component has the events that it needs."
    told = "; ".join(f"{s.label} {_times(s)} for the {s.because} of {labels[s.decisive]}" for s in short)
    enough = len(found.samples) - len(short)
    others = {0: "", 1: " One other has enough."}.get(enough, f" {enough} others have enough.")
    return f"Too few events: {told}.{others}"


def _times(sample: SizingSample) -> str:
    text = f"needs {counted(sample.needed)} times as many"
    return text if sample.needed_events is None else f"{text} ({counted(sample.needed_events)})"


def _coverage(found: Sizing) -> Iterator[str]:
    """Coverage at the events nearest to those of now, with the needed ones, and the lowest of the multiples tried."""
    together = [toys for toys in found.toys if toys.factor is not None and toys.what == "all"]
    if not together:
        return
    nearest = min(together, key=lambda toys: abs(toys.factor - 1.0) if toys.factor else 0.0).factor
    events = "the events as they are" if nearest == 1.0 else f"{nearest:g} times the events"
    needed = [toys for toys in found.toys if toys.what == "needed"]
    for ratio in found.ratios:
        lowest = min(together, key=lambda toys: _of(toys, ratio.ratio).coverage)
        yield (
            f"{ratio.label}: intervals of one error (nominal {percent(LEVELS[1])}) hold the true value in "
            f"{_shares([t for t in together if t.factor == nearest], ratio.ratio)} with {events}, in "
            f"{_shares(needed, ratio.ratio)} with the needed ones. Of the multiples that were tried "
            f"{lowest.factor:g} times the events have the lowest coverage, {_shares([lowest], ratio.ratio)}."
        )
    for ratio in found.ratios:
        poor = [
            toys for toys in needed if _of(toys, ratio.ratio).coverage + 3.0 * _error(toys, ratio.ratio) < LEVELS[1]
        ]
        if poor:
            yield (
                f"Look at this: with the needed events intervals of {ratio.label} cover too little. Ask for a smaller "
                "share, or take the interval that is corrected for poor templates."
            )


def _shares(toys: Sequence[SizingToys], ratio: str) -> str:
    """E.g. "68.1 ± 2.7 % (59.9 ± 2.9 % with ratios 1.2 times those of the templates)"."""
    parts = []
    for each in toys:
        part = _of(each, ratio)
        share = f"{signed(100.0 * part.coverage, 1)}{GAP}±{GAP}{100.0 * _error(each, ratio):.1f}{GAP}%"
        other = "" if each.multiple == 1.0 else f" with true ratios {each.multiple:g} times those of the templates"
        parts.append(share + other)
    return parts[0] + (f" ({', '.join(parts[1:])})" if parts[1:] else "") if parts else "–"


def _error(toys: SizingToys, ratio: str) -> float:
    part = _of(toys, ratio)
    return 0.5 * (part.coverage_high - part.coverage_low)


def _of(toys: SizingToys, ratio: str) -> SizingToyRatio:
    return next(part for part in toys.ratios if part.ratio == ratio)


def _verified(found: Sizing, verification: SizingVerification) -> str:
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    whole = [check for check in verification.checks if check.sample == ""]
    if verification.what == "needed":
        told = ", ".join(
            f"{labels[c.ratio]} {bracketed(c.measured, c.measured_error)} "
            f"(predicted {bracketed(c.predicted, c.predicted_error)})"
            for c in whole
        )
        capped = "" if verification.fraction == 1.0 else f", {percent(verification.fraction, 0)} of them"
        return f"Generated anew with the needed events{capped}: template statistics of {told}."
    told = ", ".join(
        f"{labels[c.ratio]} {bracketed(c.scatter or 0.0, c.scatter_error or 0.0)} "
        f"(predicted {bracketed(c.predicted, c.predicted_error)})"
        for c in whole
    )
    tested = [check.p_value for check in verification.checks if check.p_value is not None]
    lowest = min(tested, default=1.0)
    # The smallest of n independent p-values; those of all samples together and of the ratios are not quite independent.
    chance = 1.0 - (1.0 - lowest) ** len(tested)
    verdict = "agree with the prediction" if chance > UNLIKELY else "do not agree with the prediction"
    return (
        f"Ratios fitted with {verification.sets} new sets of templates, {verification.fraction:.3g} of the "
        f"events each, scatter by {told}. The {len(tested)} scatters of single components and of all {verdict} "
        f"(smallest p-value {formatted(lowest, '.2g')}, so small or smaller by chance in {percent(chance, 0)} of "
        "cases)."
    )


def _allocation(found: Sizing) -> Iterator[str]:
    best = found.allocation
    if best is None:
        return
    labels = {ratio.ratio: ratio.label for ratio in found.ratios}
    same = abs(best.seconds / best.seconds_now - 1.0) < 1e-9
    told = ", ".join(
        f"{labels[gain.ratio]} from {signed(gain.templates_now, 4)} to {signed(gain.templates_best, 4)}"
        for gain in best.gains
    )
    when = "the processor time that the events take now" if same else f"{duration(best.seconds)} of processor time"
    yield f"Best shared out, {when} ({duration(best.seconds)}) brings template statistics of {told}."
    yield (
        f"All template statistics together cost {percent(best.aim, 0)} of the error in quadrature, that is "
        f"{percent(sqrt(1.0 + best.aim**2) - 1.0)} of it, after {duration(best.seconds_aim)} best shared out; "
        f"{duration(best.seconds_aim_as_now)} shared out as now."
    )
