"""Precision and coverage against the events, from toys in which templates and data are drawn anew."""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass
from typing import Literal

from semitau.core.streams import stream_key
from semitau.fit.toys.redrawn_templates import toys_with_new_templates
from semitau.fit.toys.toys import ToyResults
from semitau.fit.uncertainty.template_costs import EventNumbers
from semitau.gen.study_file.sizing import SizingSection

from .part import SizingToyRatio, SizingToys
from .prediction import Prediction

Report = Callable[[str, int, int | None], None]
LABEL = "toys with new templates"


@dataclass(frozen=True)
class Trial:
    """Toys at one number of events. what : of `SizingToys`. factors : sample -> multiple of its events."""

    what: Literal["all", "needed", "alone"]
    factors: Mapping[str, float]
    multiple: float
    factor: float | None = None
    sample: str = ""


def trials(found: Prediction, asked: SizingSection) -> Iterator[Trial]:
    """All samples at each factor, then with what they need, at each multiple of the true ratios; then every sample
    alone at the lowest factor, at the highest multiple."""
    names = found.numbers.samples
    needed = dict(zip(names, found.needed_factors.tolist(), strict=True))
    for multiple in asked.multiples:
        for factor in asked.factors:
            yield Trial("all", dict.fromkeys(names, factor), multiple, factor)
        yield Trial("needed", needed, multiple)
    if asked.alone:
        for name in names:
            lowest = asked.factors[0]
            yield Trial("alone", dict.fromkeys(names, 1.0) | {name: lowest}, asked.multiples[-1], lowest, name)


def toy_parts(
    found: Prediction, asked: SizingSection, seed: int, workers: int | None, report: Report | None
) -> Iterator[SizingToys]:
    """One entry a trial; imported components keep the events that they have.

    All trials draw with the same random numbers, so that their differences are those of the events. Trials without two
    valid fits are left out.
    """
    model, numbers = found.model, found.numbers
    kept = dict.fromkeys((component.name for component in model.templates.components), 1.0)
    ratios = [name for name in numbers.ratios if model.parameters[model.index(name)].function is None]
    planned, stream = tuple(trials(found, asked)), int(stream_key(seed, "sizing"))
    for done, trial in enumerate(planned):
        toys = toys_with_new_templates(
            model,
            kept | {name: trial.factors[s.name] for s in found.samples for name in s.components},
            asked.toys,
            stream,
            workers,
            None if report is None else _after(report, done * asked.toys, len(planned) * asked.toys),
            injected={name: trial.multiple * float(model.injected[model.index(name)]) for name in ratios},
        )
        if toys.valid.sum() > 1:
            yield _part(toys, numbers, trial)


def _after(report: Report, before: int, whole: int) -> Callable[[str, int, int], None]:
    """The progress of one set of toys as part of that of all."""
    return lambda _, done, __: report(LABEL, before + done, whole)


def _part(found: ToyResults, numbers: EventNumbers, trial: Trial) -> SizingToys:
    each = [trial.factors[name] for name in numbers.samples]
    expected = dict(zip(numbers.ratios, numbers.errors(each).tolist(), strict=True))
    ratios = []
    for name in numbers.ratios:
        summary = found.summary(name)
        one = summary.coverage[0]
        ratios.append(
            SizingToyRatio(
                ratio=name,
                true=summary.injected,
                expected=expected[name],
                mean_error=summary.mean_error,
                spread=summary.spread,
                spread_error=_spread_error(found, name, summary.spread),
                bias=summary.bias,
                bias_error=summary.bias_error,
                pull_width=summary.pull_width,
                pull_width_error=summary.pull_width_error,
                coverage=one.fraction,
                coverage_low=one.low,
                coverage_high=one.high,
            )
        )
    return SizingToys(
        what=trial.what,
        sample=trial.sample,
        factor=trial.factor,
        multiple=trial.multiple,
        number=found.number,
        failures=int((~found.valid).sum()),
        ratios=tuple(ratios),
    )


def _spread_error(found: ToyResults, name: str, spread: float) -> float:
    """From the fourth moment: no distribution is assumed."""
    values = found.fitted(name)
    fourth = float(((values - values.mean()) ** 4).mean())
    return max(0.0, (fourth - spread**4) / values.size) ** 0.5 / (2.0 * spread) if spread > 0.0 else 0.0
