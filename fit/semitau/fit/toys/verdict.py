"""The verdict on a fit, in words that say how far the toys reach.

Toys never show that there is no bias. They show that a bias beyond some size is excluded; with few toys that size is
large, and the verdict then says that it cannot tell.
"""

from __future__ import annotations

from dataclasses import dataclass
from math import ceil, isfinite

import numpy as np
from scipy.stats import binomtest, norm
from scipy.stats import t as student
from semitau.core.true_minus import formatted, with_sign

from .pulls import Summary, binomial_interval

SIGNIFICANT = 3.0
"""Standard deviations from which a departure is called one; by chance it happens once in 370 tests."""

RARE = float(2.0 * norm.sf(SIGNIFICANT))
"""Chance of such a departure."""

FEW = 20
"""Toys below which the pull width, whose error comes from the same pulls, is not judged."""

TOLERATED = 0.1
"""Bias in units of the fit's error that "no bias" must exclude: it would add half a percent to the total error."""

AT_95 = float(norm.isf(0.025))
"""Standard deviations of a two-sided exclusion at 95% confidence."""


@dataclass(frozen=True)
class Verdict:
    """Judgement of the toys of one parameter.

    judgement : "biased" (the departure is significant), "unbiased" (a bias above TOLERATED of the fit's error is
        excluded at 95% confidence), or "undecided" (too few toys for either).
    significance, p_value : the bias over its own error, and how often chance alone does that (Student's law).
    excluded : a bias beyond this, in units of the fit's error, is excluded at 95% confidence.
    toys_needed : about how many toys would exclude a bias above TOLERATED if none is there.
    covers : whether pull width and both coverages agree with their nominal values within SIGNIFICANT.
    text : all of it in words.
    """

    parameter: str
    judgement: str
    significance: float
    p_value: float
    excluded: float
    toys_needed: int
    covers: bool
    text: str


def judge(summary: Summary) -> Verdict:
    """What the toys of one parameter show, and what they do not."""
    if summary.fitted < 2 or not (summary.bias_error > 0 and summary.mean_error > 0):
        text = f"{summary.parameter}: {summary.fitted} of {summary.toys} toys were fitted: nothing can be said."
        return Verdict(summary.parameter, "undecided", float("nan"), 1.0, float("inf"), 0, False, text)
    significance = summary.bias / summary.bias_error
    # The error of a mean of few toys is known by these toys only: Student's law.
    p_value = float(2.0 * student.sf(abs(significance), summary.fitted - 1))
    reach = float(student.isf(0.025, summary.fitted - 1)) * summary.bias_error
    excluded = (abs(summary.bias) + reach) / summary.mean_error
    needed = ceil((AT_95 * summary.spread / (TOLERATED * summary.mean_error)) ** 2)
    if p_value <= RARE:
        judgement = "biased"
    else:
        judgement = "unbiased" if excluded <= TOLERATED else "undecided"
    departures = _departures(summary)
    sentences = [_of_bias(summary, judgement, significance, p_value, excluded, needed), _of_errors(summary, departures)]
    if summary.failures:
        _, high = binomial_interval(summary.failures, summary.toys, 0.9)
        sentences.append(
            f"{summary.failures} of {summary.toys} fits failed (rate below {high:.1%} at 95% confidence); "
            "they are left out of all of this."
        )
    return Verdict(
        parameter=summary.parameter,
        judgement=judgement,
        significance=significance,
        p_value=p_value,
        excluded=excluded,
        toys_needed=needed,
        covers=not departures,
        text=" ".join([f"{summary.parameter}:", *sentences]),
    )


def _of_bias(
    summary: Summary, judgement: str, significance: float, p_value: float, excluded: float, needed: int
) -> str:
    size = with_sign(summary.bias, summary.bias_error)
    relative = f"{formatted(summary.bias / summary.mean_error, '+.3f')} of the fit's error"
    if judgement == "biased":
        return (
            f"biased by {size}, {relative} ({abs(significance):.1f} standard deviations, "
            f"p = {formatted(p_value, '.1g')}, {summary.fitted} toys); "
            f"a bias beyond {excluded:.2f} of the error is excluded at 95% confidence."
        )
    chance = formatted(p_value, ".2g")
    seen = f"mean of fitted minus injected {size} ({abs(significance):.1f} standard deviations, p = {chance})"
    if judgement == "unbiased":
        return (
            f"{seen}; {summary.fitted} toys exclude a bias beyond {excluded:.3f} of the fit's error at 95% confidence."
        )
    return (
        f"undecided: {seen}; {summary.fitted} toys only exclude a bias beyond {excluded:.2f} of the fit's error at 95% "
        f"confidence; about {needed} toys would reach {TOLERATED:g}."
    )


def _departures(summary: Summary) -> list[str]:
    """Pull width and coverages that do not agree with their nominal values."""
    found = []
    width = (summary.pull_width - 1.0) / summary.pull_width_error if summary.pull_width_error > 0 else np.inf
    if summary.fitted >= FEW and not (isfinite(width) and abs(width) < SIGNIFICANT):
        found.append(f"pull width {summary.pull_width:.3f} ± {summary.pull_width_error:.3f}")
    for part in summary.coverage:
        if binomtest(part.inside, part.number, part.nominal).pvalue < RARE:
            found.append(f"coverage {part.fraction:.1%} where {part.nominal:.1%} is due")
    return found


def _of_errors(summary: Summary, departures: list[str]) -> str:
    if departures:
        way = "too small" if summary.pull_width > 1 else "too large"
        return f"The errors do not cover as they should: {' and '.join(departures)}; they look {way}."
    shares = " and ".join(f"{part.fraction:.1%} (nominal {part.nominal:.1%})" for part in summary.coverage)
    return (
        f"Pull width {summary.pull_width:.3f} ± {summary.pull_width_error:.3f}, coverage {shares}: "
        f"no departure of {SIGNIFICANT:g} standard deviations."
    )
