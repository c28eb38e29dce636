"""The prediction against templates generated anew, with events that those of the study know nothing of.

The templates of one sample, or of all, are taken from a new set, the others are those of the study, and the model is
fitted to the expected set of the study. What the fitted ratio does from set to set is the template error itself:
derivatives, variations and all. Beside it stands the same part as the new templates tell it from their variances.
"""

from __future__ import annotations

from collections.abc import Callable, Iterator, Mapping
from dataclasses import dataclass, field, replace

import numpy as np
from scipy.stats import chi2
from semitau.core.errors import RunError
from semitau.core.templates import Floats, TemplateSet
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.newton import maximise
from semitau.fit.uncertainty.template_costs import event_numbers
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import Build
from semitau.gen.templates.imported import with_imports

from ..run.study_model import study_model
from .part import SizingCheck, SizingVerification
from .prediction import Prediction, quadratic_error
from .samples import generated, members, seconds_per_event, with_events

Report = Callable[[str, int, int | None], None]
Make = Callable[[StudyConfig, str], Build]
LABEL = "templates with other events"
SETS_AT_LEAST = 4


@dataclass
class Verified:
    """verifications : parts of the results. paces : sample -> seconds per event of each set that was generated."""

    verifications: list[SizingVerification] = field(default_factory=list)
    paces: dict[str, list[float]] = field(default_factory=dict)


@dataclass(frozen=True)
class Plan:
    """How many sets, and with which fraction of the events."""

    sets: int
    fraction: float


def plan_of_sets(events: int, sets: int, fraction: float, events_at_most: int) -> Plan | None:
    """Sets become fewer, then smaller, so that all events together are at most so many; None if nothing is left."""
    if sets == 0 or events == 0:
        return None
    fitting = min(sets, int(events_at_most / (fraction * events)))
    if fitting < SETS_AT_LEAST:
        fitting = SETS_AT_LEAST
        fraction = min(fraction, events_at_most / (fitting * events))
    return Plan(fitting, fraction)


def verify(study: StudyConfig, own: TemplateSet, found: Prediction, make: Make, report: Report | None) -> Verified:
    """Generate, fit and compare.

    own : the templates of the study. make : a study and the purpose of its random numbers -> its templates.

    Raises InputError as the build; RunError where a fit fails in more than half of the sets.
    """
    verified = Verified()
    asked, events = study.sizing, found.events
    if asked is None or events is None:
        return verified
    plan = plan_of_sets(sum(events.values()), asked.sets, asked.fraction, asked.events_at_most)
    if plan is None:
        return verified
    needed = found.needed_events
    scale = min(1.0, asked.events_at_most / sum(needed.values()))
    steps = plan.sets + 1
    fewer = {name: max(1, round(plan.fraction * n)) for name, n in events.items()}
    sets = []
    for k in range(plan.sets):
        if report is not None:
            report(LABEL, k, steps)
        sets.append(_New.made(study, found, fewer, make, f"sizing {k}"))
    verified.verifications.append(_fewer(study, own, found, sets, plan))
    if report is not None:
        report(LABEL, plan.sets, steps)
    enough = {name: max(1, round(scale * n)) for name, n in needed.items()}
    one = _New.made(study, found, enough, make, "sizing needed")
    verified.verifications.append(_as_needed(study, found, one, scale))
    for new in (*sets, one):
        for name, pace in new.paces.items():
            verified.paces.setdefault(name, []).append(pace)
    if report is not None:
        report(LABEL, steps, steps)
    return verified


@dataclass(frozen=True, eq=False)
class _New:
    """One set of templates. events : sample -> generated."""

    templates: TemplateSet
    events: Mapping[str, int]
    paces: Mapping[str, float]

    @classmethod
    def made(cls, study: StudyConfig, found: Prediction, events: Mapping[str, int], make: Make, purpose: str) -> _New:
        other = with_events(study, events)
        build = make(other, purpose)
        paces = seconds_per_event(found.samples, build)
        return cls(with_imports(other, build.templates), generated(found.samples, build), paces)


def _fewer(study: StudyConfig, own: TemplateSet, found: Prediction, sets: list[_New], plan: Plan) -> SizingVerification:
    checks = [check for name in ("", *found.numbers.samples) for check in _scattered(study, own, found, sets, name)]
    events = sum(sum(new.events.values()) for new in sets)
    return SizingVerification(what="fewer", sets=len(sets), fraction=plan.fraction, events=events, checks=tuple(checks))


def _scattered(
    study: StudyConfig, own: TemplateSet, found: Prediction, sets: list[_New], sample: str
) -> Iterator[SizingCheck]:
    """One sample, or all for "", with the templates of each set in turn."""
    events = found.events or {}
    numbers = found.numbers
    columns = range(len(numbers.samples)) if sample == "" else [numbers.samples.index(sample)]
    names = {c for s in found.samples if sample in ("", s.name) for c in s.components}
    factors = np.array([sets[0].events[n] / events[n] if sample in ("", n) else 1.0 for n in numbers.samples])
    truth = found.model.expected_counts()
    values, parts = [], []
    for new in sets:
        model = study_model(study, mixed(own, new.templates, names))
        parts.append(event_numbers(model, members(found.samples)).parts(1.0)[:, columns])
        counts = np.where(model.layout.bin_lane >= 0, truth, 0.0)
        result = maximise(model, Data(counts, model.injected, np.ones(model.bins)))
        if result.valid:
            values.append([result.value(ratio) for ratio in numbers.ratios])
    if len(values) < max(2, len(sets) // 2):
        raise RunError(*result.reasons)
    measured = np.sqrt((np.array(parts) ** 2).sum(axis=2))
    fitted = np.array(values)
    expected, unsure = numbers.parts(factors)[:, columns], numbers.part_errors(factors)[:, columns]
    for r, ratio in enumerate(numbers.ratios):
        whole = float(np.sqrt((expected[r] ** 2).sum()))
        scatter = float(fitted[:, r].std(ddof=1))
        yield SizingCheck(
            sample=sample,
            ratio=ratio,
            predicted=whole,
            predicted_error=quadratic_error(expected[r], unsure[r]),
            measured=float(measured[:, r].mean()),
            measured_error=float(measured[:, r].std(ddof=1)) / len(sets) ** 0.5,
            scatter=scatter,
            scatter_error=scatter / (2.0 * (len(values) - 1)) ** 0.5,
            p_value=_two_sided(scatter, whole, len(values)),
        )


def _two_sided(scatter: float, expected: float, sets: int) -> float | None:
    """(n - 1) s²/σ² follows χ² with n - 1 degrees of freedom if the fitted values are normal."""
    if not expected > 0.0:
        return None
    statistic = (sets - 1) * (scatter / expected) ** 2
    return float(min(1.0, 2.0 * min(chi2.cdf(statistic, sets - 1), chi2.sf(statistic, sets - 1))))


def _as_needed(study: StudyConfig, found: Prediction, new: _New, scale: float) -> SizingVerification:
    """All samples with what they need."""
    events = found.events or {}
    factors = np.array([new.events[name] / events[name] for name in found.numbers.samples])
    own = event_numbers(study_model(study, new.templates), members(found.samples))
    expected, unsure = found.numbers.parts(factors), found.numbers.part_errors(factors)
    measured, noise = own.parts(1.0), own.part_errors(1.0)
    checks = []
    for r, ratio in enumerate(found.numbers.ratios):
        checks.append(_unscattered("", ratio, expected[r], unsure[r], measured[r], noise[r]))
        for s, sample in enumerate(found.numbers.samples):
            one = slice(s, s + 1)
            checks.append(
                _unscattered(sample, ratio, expected[r][one], unsure[r][one], measured[r][one], noise[r][one])
            )
    return SizingVerification(
        what="needed", sets=1, fraction=scale, events=sum(new.events.values()), checks=tuple(checks)
    )


def _unscattered(
    sample: str, ratio: str, expected: Floats, unsure: Floats, measured: Floats, noise: Floats
) -> SizingCheck:
    return SizingCheck(
        sample=sample,
        ratio=ratio,
        predicted=float(np.sqrt((expected**2).sum())),
        predicted_error=quadratic_error(expected, unsure),
        measured=float(np.sqrt((measured**2).sum())),
        measured_error=quadratic_error(measured, noise),
        scatter=None,
        scatter_error=None,
        p_value=None,
    )


def mixed(own: TemplateSet, new: TemplateSet, names: set[str]) -> TemplateSet:
    """The templates `own` with those of the named components from `new`."""
    chosen = {key: template for key, template in own.templates.items() if key[1] not in names}
    chosen |= {key: template for key, template in new.templates.items() if key[1] in names}
    return replace(own, templates=chosen, data={})
