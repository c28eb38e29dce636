"""Toys and linearity of the fit package as parts of `results.json`, and the verdict on the whole fit."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from math import isfinite
from typing import Literal

import numpy as np
from semitau.fit.toys.straightness import Line
from semitau.fit.toys.straightness import Linearity as FitLinearity
from semitau.fit.toys.toys import ToyResults
from semitau.fit.toys.verdict import SIGNIFICANT, TOLERATED

from ..numbers import percent
from ..results import Coverage, Linearity, LinearityPoint, PullHistogram, ToyRatio, Toys, Verdict

PULL_BINS, PULL_RANGE = 40, 5.0

TOLERATED_FAILURES = 0.01
"""Share of failed toy fits above which the verdict doubts: what is left may be a biased choice."""

Status = Literal["sound", "doubtful", "unsound", "undecided"]


def toys_part(toys: ToyResults, labels: Mapping[str, str]) -> Toys:
    """Bias, pulls, coverage and judgement of each ratio; ratios that no toy could fit are left out.

    labels : parameter name -> label for people.
    """
    verdicts = toys.verdict()
    found = []
    for name, summary in toys.summaries().items():
        verdict = verdicts[name]
        if summary.fitted < 2 or not isfinite(summary.pull_width_error):
            continue
        pulls = toys.pulls(name)
        counts, edges = np.histogram(pulls, bins=PULL_BINS, range=(-PULL_RANGE, PULL_RANGE))
        found.append(
            ToyRatio(
                ratio=name,
                label=labels[name],
                injected=summary.injected,
                mean=summary.injected + summary.bias,
                bias=summary.bias,
                bias_error=summary.bias_error,
                mean_error=summary.mean_error,
                pull_mean=summary.pull_mean,
                pull_mean_error=summary.pull_mean_error,
                pull_width=summary.pull_width,
                pull_width_error=summary.pull_width_error,
                coverage=tuple(
                    Coverage(level=part.nominal, fraction=part.fraction, low=part.low, high=part.high)
                    for part in summary.coverage
                ),
                pulls=PullHistogram(
                    edges=tuple(edges.tolist()), counts=tuple(counts.tolist()), outside=int(pulls.size - counts.sum())
                ),
                judgement=verdict.judgement,
                significance=_finite(verdict.significance),
                excluded=_finite(verdict.excluded),
                toys_needed=verdict.toys_needed,
                covers=verdict.covers,
                verdict=_labelled(verdict.text, name, labels),
            )
        )
    failures = int((~toys.valid).sum())
    return Toys(number=toys.number, failures=failures, failure_reasons=toys.failures, ratios=tuple(found))


def linearity_parts(linearity: FitLinearity, labels: Mapping[str, str]) -> tuple[Linearity, ...]:
    """Points and line of each ratio."""
    found = []
    for name, line in linearity.lines.items():
        summaries = [point.summary(name) for point in linearity.points]
        found.append(
            Linearity(
                ratio=name,
                label=labels[name],
                points=tuple(
                    LinearityPoint(
                        injected=summary.injected,
                        mean=summary.injected + summary.bias,
                        mean_error=summary.bias_error,
                        spread=summary.mean_error,
                        toys=summary.fitted,
                        failures=summary.failures,
                    )
                    for summary in summaries
                ),
                slope=line.slope,
                slope_error=line.slope_error,
                intercept=line.intercept,
                intercept_error=line.intercept_error,
                p_value=line.p_value,
                verdict=_labelled(line.text, name, labels),
            )
        )
    return tuple(found)


def overall_verdict(toys: Toys | None, linearity: Sequence[Linearity], lines: Mapping[str, Line]) -> Verdict:
    """The judgement on the fit: the worst of what toys and linearity say of any ratio.

    unsound : a ratio is biased, and by more than a tenth of its error for all the toys can tell.
    doubtful : a significant bias that is smaller, errors that do not cover, fitted values that do not follow the
        injected ones, or more than one fit in a hundred failed.
    undecided : too few toys to exclude a bias of a tenth of the error.
    """
    if toys is None or not toys.ratios:
        why = "No toys were asked for." if toys is None else "No toy could be fitted."
        return Verdict(status="undecided", sentences=(f"{why} Nothing is known about bias and coverage.",))
    crooked = [line for line in lines.values() if abs(line.slope - 1.0) >= SIGNIFICANT * line.slope_error]
    biased = [ratio for ratio in toys.ratios if ratio.judgement == "biased"]
    status: Status = "sound"
    if any(ratio.judgement == "undecided" for ratio in toys.ratios):
        status = "undecided"
    if (
        biased
        or crooked
        or not all(ratio.covers for ratio in toys.ratios)
        or toys.failures > TOLERATED_FAILURES * toys.number
    ):
        status = "doubtful"
    if any(ratio.excluded is None or ratio.excluded > TOLERATED for ratio in biased):
        status = "unsound"
    sentences = [ratio.verdict for ratio in toys.ratios] + [line.verdict for line in linearity]
    if toys.failures > TOLERATED_FAILURES * toys.number:
        sentences.append(
            f"{percent(toys.failures / toys.number)} of the toy fits failed: look at the reasons before you trust it."
        )
    return Verdict(status=status, sentences=tuple(sentences))


def _labelled(text: str, name: str, labels: Mapping[str, str]) -> str:
    """The fit speaks of parameters by name; people read labels."""
    return labels[name] + text.removeprefix(name) if text.startswith(f"{name}:") else text


def _finite(value: float) -> float | None:
    return value if isfinite(value) else None
