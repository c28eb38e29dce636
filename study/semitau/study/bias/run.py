"""The bias matrix of a study: each alternative made with each, and fitted with each."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass
from math import isfinite

import numpy as np
from scipy.stats import norm
from semitau.core.errors import InputError, Problem
from semitau.core.streams import stream_key
from semitau.fit.toys.pulls import Summary
from semitau.fit.toys.toys import ToyResults, run_toys
from semitau.fit.uncertainty.covering import covering_error, judge_shift
from semitau.fit.uncertainty.foreign_fit import ForeignFit, foreign_fit, shift_errors
from semitau.gen.study_file.alternative_studies import alternative_changes
from semitau.gen.study_file.alternatives import NOMINAL
from semitau.gen.study_file.study import StudyConfig

from ..graph.materials import Materials
from .part import Bias, BiasChange, BiasCoverage, BiasGoodness, BiasPair, BiasRatio, BiasStudy
from .sentences import not_covered, other_sentences
from .worlds import World, worlds

Report = Callable[[str, int, int | None], None]


def bias_part(study: StudyConfig, materials: Materials, workers: int | None, report: Report | None) -> Bias:
    """Shift, pulls, coverage and goodness of fit of every pair, and whether the assigned systematic covers the shift.

    report : called as report(label, done, total).

    Raises
    ------
    InputError : the study has no alternatives, or one of them cannot be built.
    """
    if not study.alternatives:
        remedy = "Add [[alternative]] tables: docs/bias.md shows how."
        raise InputError(Problem("the study has no alternatives", where=str(study.path), remedy=remedy))
    found = worlds(study, materials, report)
    parts = _studies(study)
    pairs = list(_pairs(study, found, workers, report))
    ordered = sorted(pairs, key=lambda pair: _place(parts, pair))
    sources = {parameter.name: parameter.label for world in reversed(found) for parameter in world.model.parameters}
    return Bias(
        studies=parts,
        negligible=study.bias.negligible,
        not_covered=tuple(not_covered(parts, ordered, sources)),
        sentences=tuple(other_sentences(parts, ordered, sources)),
        pairs=tuple(ordered),
    )


def ingredients(study: StudyConfig) -> object:
    """What the bias matrix depends on besides the templates, [fit], and all that events are made from; JSON values."""
    return study.model_dump(mode="json", include={"alternatives", "bias"})


def _studies(study: StudyConfig) -> tuple[BiasStudy, ...]:
    nominal = BiasStudy(name=NOMINAL, label="the study itself", changes=(), covered_by=())
    return (
        nominal,
        *(
            BiasStudy(
                name=alternative.name,
                label=alternative.label or alternative.name,
                changes=tuple(
                    BiasChange(key=key, before=before, after=after)
                    for key, before, after in alternative_changes(study, alternative)
                ),
                covered_by=alternative.covered_by or (),
            )
            for alternative in study.alternatives
        ),
    )


def _place(studies: Sequence[BiasStudy], pair: BiasPair) -> tuple[int, int]:
    names = [study.name for study in studies]
    return names.index(pair.made_with), names.index(pair.fitted_with)


@dataclass(frozen=True, eq=False)
class _Meeting:
    """Data made with one study and fitted with another. fit, errors : of the expected set. toys : None for none."""

    made: World
    fitted: World
    fit: ForeignFit
    errors: Mapping[str, float]
    toys: ToyResults | None


def _pairs(
    study: StudyConfig, found: Sequence[World], workers: int | None, report: Report | None
) -> Sequence[BiasPair]:
    """Fitted study by fitted study, whose own toys are needed by all of its pairs."""
    pairs = []
    for fitted in found:
        own: ToyResults | None = None
        for made in [fitted, *(world for world in found if world is not fitted)]:
            meeting = _met(study, made, fitted, workers)
            own = meeting.toys if made is fitted else own
            pairs.append(_pair(study, meeting, own))
            if report is not None:
                report("bias matrix", len(pairs), len(found) ** 2)
    return pairs


def _met(study: StudyConfig, made: World, fitted: World, workers: int | None) -> _Meeting:
    expectation, settings = made.expectation, study.bias
    fit = foreign_fit(fitted.model, expectation)
    errors: Mapping[str, float] = {}
    if fit.result.valid:
        if made is fitted:
            noise = np.zeros((settings.replicas, fitted.model.bins))  # the same events on both sides
        else:
            noise = made.noise.sum(axis=1) - fitted.fitted_noise(fit.result)
        errors = shift_errors(fitted.model, expectation, fit, noise)
    toys = None
    if settings.toys:
        seed = int(stream_key(study.study.seed, "bias matrix"))
        toys = run_toys(fitted.model, settings.toys, seed, workers, expectation=expectation)
    return _Meeting(made, fitted, fit, errors, toys)


def _pair(study: StudyConfig, met: _Meeting, own: ToyResults | None) -> BiasPair:
    result = met.fit.result
    return BiasPair(
        made_with=met.made.name,
        fitted_with=met.fitted.name,
        valid=result.valid,
        reason="; ".join(str(reason) for reason in result.reasons),
        outside=met.fit.outside,
        toys=0 if met.toys is None else met.toys.number,
        failures=0 if met.toys is None else sum(met.toys.failures.values()),
        goodness=_goodness(met, own) if result.valid else None,
        ratios=tuple(_ratio(study, met, name) for name in met.fit.shifts),
    )


def _goodness(met: _Meeting, own: ToyResults | None) -> BiasGoodness:
    goodness, toys = met.fit.result.goodness, met.toys
    from_toys = None
    if toys is not None and own is not None and toys.valid.any() and own.valid.any():
        from_toys = own.share_above(float(np.median(toys.statistics[toys.valid])))
    return BiasGoodness(
        deviance=max(0.0, goodness.statistic),
        degrees_of_freedom=goodness.degrees_of_freedom,
        p_value=met.fit.p_value,
        toy_p_value=from_toys,
    )


def _ratio(study: StudyConfig, met: _Meeting, name: str) -> BiasRatio:
    model = met.fitted.model
    shift, error = met.fit.shifts[name], met.fit.errors[name]
    shift_error = met.errors[name] if isfinite(met.errors[name]) else error  # too few fits to tell: as good as unknown
    names = _covered_by(met)
    budget = met.fitted.budgets.get(name)
    covering = 0.0 if budget is None else covering_error(model, budget, names)
    summary = None if met.toys is None else met.toys.summary(name)
    usable = summary is not None and summary.fitted > 1
    return BiasRatio(
        ratio=name,
        label=model.parameters[model.index(name)].label,
        true=met.made.expectation.true[name],
        shift=shift,
        shift_error=shift_error,
        error=error,
        significance=shift / error,
        covering=covering,
        covered_by=names,
        status=judge_shift(shift, shift_error, covering, error, study.bias.negligible),
        pull_mean=summary.pull_mean if summary is not None and usable else None,
        pull_mean_error=summary.pull_mean_error if summary is not None and usable else None,
        pull_width=summary.pull_width if summary is not None and usable else None,
        pull_width_error=summary.pull_width_error if summary is not None and usable else None,
        coverage=_coverage(summary, shift / error) if summary is not None and usable else (),
    )


def _coverage(summary: Summary, shift: float) -> tuple[BiasCoverage, ...]:
    return tuple(
        BiasCoverage(
            level=part.nominal,
            expected=float(norm.cdf(part.half_width - shift) - norm.cdf(-part.half_width - shift)),
            fraction=part.fraction,
            low=part.low,
            high=part.high,
        )
        for part in summary.coverage
    )


def _covered_by(met: _Meeting) -> tuple[str, ...]:
    """What is meant to cover the change from one to the other: of both, if both are alternatives."""
    chosen = [world.covered_by for world in (met.made, met.fitted) if world.name != NOMINAL]
    if not all(chosen):
        return ()
    return tuple(dict.fromkeys(name for names in chosen for name in names))
