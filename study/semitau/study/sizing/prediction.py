"""What expected information says of templates and their events: errors, costs, needed events, curves."""

from __future__ import annotations

from collections.abc import Iterator, Mapping
from dataclasses import dataclass
from math import ceil
from typing import Literal

import numpy as np
from semitau.core.templates import Floats
from semitau.fit.fitting.model import Model
from semitau.fit.uncertainty.template_bias import TemplateBias, bias_is_known, template_bias
from semitau.fit.uncertainty.template_costs import EventNumbers, event_numbers
from semitau.gen.study_file.sizing import SizingSection

from .part import SizingCost, SizingCurve, SizingRatio, SizingSample
from .samples import Sample, effective_events, members

PLACES = 25
"""Points of a curve."""

Reason = Literal["precision", "bias", "reported error"]
REASONS: tuple[Reason, Reason, Reason] = ("precision", "bias", "reported error")

LOWEST, HIGHEST = 1e-2, 1e2
"""Ends of the curves, in multiples of the events."""


@dataclass(frozen=True, eq=False)
class Prediction:
    """The expected errors of a model, and the events that it asks for.

    shares : (samples,) chosen costs.
    formula : (ratios, samples) multiples of the events at which each sample costs its share, to first order.
    needs : (3, ratios, samples) multiples that do for precision, bias and reported error. need_errors : of them.
    pulled : what is known of bias, one for each multiple of the true ratios; empty if nothing is.
    events : sample -> generated ones, None if they are not known. least : of each sample.
    """

    model: Model
    numbers: EventNumbers
    samples: tuple[Sample, ...]
    shares: Floats
    formula: Floats
    needs: Floats
    need_errors: Floats
    pulled: tuple[TemplateBias, ...]
    events: Mapping[str, int] | None
    least: int

    @property
    def needed(self) -> Floats:
        """(ratios, samples) multiples of the events that do in every respect."""
        most: Floats = self.needs.max(axis=0)
        return most

    @property
    def needed_factors(self) -> Floats:
        """(samples,) multiples of the events that every ratio is content with."""
        most = self.needed.max(axis=0)
        if self.events is None:
            return np.where(most > 0.0, most, 1.0)
        asked = [self.needed_events[name] / self.events[name] for name in self.numbers.samples]
        return np.array(asked)

    @property
    def needed_events(self) -> dict[str, int]:
        """Sample -> number of events; empty if it is not known how many there are."""
        if self.events is None:
            return {}
        most = dict(zip(self.numbers.samples, self.needed.max(axis=0).tolist(), strict=True))
        return {name: max(ceil(most[name] * events), self.least) for name, events in self.events.items()}


def predicted(
    model: Model, samples: tuple[Sample, ...], asked: SizingSection, events: Mapping[str, int] | None
) -> Prediction:
    """Raises InputError and RunError as `event_numbers`."""
    numbers = event_numbers(model, members(samples))
    wanted = np.array([asked.shares.get(sample.name, asked.share) for sample in samples])
    first, unsure = numbers.first_order(), numbers.first_order_errors()
    relative = np.where(first > 0.0, unsure / np.where(first > 0.0, first, 1.0), 0.0)
    precision = numbers.needed(wanted)
    needs, errors = np.zeros((3, *first.shape)), np.zeros((3, *first.shape))
    needs[0], errors[0] = precision, precision * relative
    pulled = tuple(_pulled(model, samples, numbers, asked)) if bias_is_known(model) else ()
    exact = numbers.errors(np.inf)[:, None]
    for known in pulled:
        _raise(needs[1], errors[1], np.abs(known.bias) / (wanted * exact), known.bias_error / (wanted * exact))
        _raise(needs[2], errors[2], known.understated / wanted**2, known.understated_error / wanted**2)
    formula = numbers.needed_first_order(wanted)
    return Prediction(model, numbers, samples, wanted, formula, needs, errors, pulled, events, asked.least)


def _pulled(
    model: Model, samples: tuple[Sample, ...], numbers: EventNumbers, asked: SizingSection
) -> Iterator[TemplateBias]:
    ratios = [name for name in numbers.ratios if model.parameters[model.index(name)].function is None]
    for multiple in asked.multiples:
        true = {name: multiple * float(model.injected[model.index(name)]) for name in ratios}
        yield template_bias(model, members(samples), true)


def _raise(most: Floats, errors: Floats, other: Floats, other_errors: Floats) -> None:
    """The larger of both, in place."""
    larger = other > most
    most[larger], errors[larger] = other[larger], other_errors[larger]


def ratio_parts(found: Prediction) -> tuple[SizingRatio, ...]:
    """Errors of every ratio: with exact templates, as it is, with the needed events."""
    numbers, model = found.numbers, found.model
    parts, unsure = numbers.parts(1.0), numbers.part_errors(1.0)
    whole = np.sqrt((parts**2).sum(axis=1))
    exact, now, needed = (numbers.errors(factors) for factors in (np.inf, 1.0, found.needed_factors))
    return tuple(
        SizingRatio(
            ratio=name,
            label=model.parameters[model.index(name)].label,
            injected=float(model.injected[model.index(name)]),
            exact=float(exact[r]),
            now=float(now[r]),
            templates=float(whole[r]),
            templates_error=quadratic_error(parts[r], unsure[r]),
            with_needed=float(needed[r]),
            bias_now=_bias(found, r, np.ones(len(found.samples))),
            bias_needed=_bias(found, r, found.needed_factors),
        )
        for r, name in enumerate(numbers.ratios)
    )


def _bias(found: Prediction, ratio: int, factors: Floats) -> float | None:
    """Of all samples together, the largest of all true ratios that were tried."""
    return max((float((known.bias[ratio] / factors).sum()) for known in found.pulled), key=abs, default=None)


def quadratic_error(parts: Floats, errors: Floats) -> float:
    """Error of the quadratic sum of parts."""
    whole = float(np.sqrt((parts**2).sum()))
    return float(np.sqrt(((parts * errors) ** 2).sum())) / whole if whole > 0.0 else 0.0


def sample_parts(found: Prediction) -> tuple[SizingSample, ...]:
    """What every sample has and needs."""
    ratios = found.numbers.ratios
    parts = []
    for s, sample in enumerate(found.samples):
        decisive = int(np.argmax(found.needed[:, s]))
        why = int(np.argmax(found.needs[:, decisive, s]))
        parts.append(
            SizingSample(
                sample=sample.name,
                label=sample.label,
                components=sample.components,
                generated=None if found.events is None else found.events[sample.name],
                effective=effective_events(sample, found.model.templates),
                share=float(found.shares[s]),
                needed=float(found.needed[decisive, s]),
                needed_error=float(found.need_errors[why, decisive, s]),
                needed_events=found.needed_events.get(sample.name),
                decisive=ratios[decisive],
                because=REASONS[why],
            )
        )
    return tuple(parts)


def cost_parts(found: Prediction) -> Iterator[SizingCost]:
    """What every sample does to every ratio."""
    numbers = found.numbers
    parts, unsure, costs = numbers.parts(1.0), numbers.part_errors(1.0), numbers.costs(1.0)
    for s, sample in enumerate(numbers.samples):
        for r, ratio in enumerate(numbers.ratios):
            why = int(np.argmax(found.needs[:, r, s]))
            pulls = [(float(known.bias[r, s]), float(known.bias_error[r, s])) for known in found.pulled]
            false = [(float(known.understated[r, s]), float(known.understated_error[r, s])) for known in found.pulled]
            bias, bias_error = max(pulls, key=lambda pull: abs(pull[0]), default=(None, None))
            understated, understated_error = max(false, key=lambda part: part[0], default=(None, None))
            yield SizingCost(
                sample=sample,
                ratio=ratio,
                part=float(parts[r, s]),
                part_error=float(unsure[r, s]),
                cost=float(costs[r, s]),
                bias=bias,
                bias_error=bias_error,
                understated=understated,
                understated_error=understated_error,
                needed=float(found.needed[r, s]),
                needed_error=float(found.need_errors[why, r, s]),
                decisive=REASONS[why],
                needed_precision=float(found.needs[0, r, s]),
                needed_formula=float(found.formula[r, s]),
                needed_bias=float(found.needs[1, r, s]) if found.pulled else None,
                needed_reported=float(found.needs[2, r, s]) if found.pulled else None,
            )


def curve_parts(numbers: EventNumbers) -> Iterator[SizingCurve]:
    """Expected errors against the events: of all samples at once, then of each with the others exact."""
    factors = np.geomspace(LOWEST, HIGHEST, PLACES)
    together = np.array([numbers.errors(factor) for factor in factors])
    for r, ratio in enumerate(numbers.ratios):
        yield SizingCurve(
            ratio=ratio, sample="", factors=tuple(factors.tolist()), errors=tuple(together[:, r].tolist())
        )
    for s, sample in enumerate(numbers.samples):
        alone = np.full(len(numbers.samples), np.inf)
        errors = []
        for factor in factors:
            alone[s] = factor
            errors.append(numbers.errors(alone))
        for r, ratio in enumerate(numbers.ratios):
            column = tuple(float(error[r]) for error in errors)
            yield SizingCurve(ratio=ratio, sample=sample, factors=tuple(factors.tolist()), errors=column)
