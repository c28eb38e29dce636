"""What the bias matrix says, in words: what no systematic covers first."""

from __future__ import annotations

from collections.abc import Iterator, Mapping, Sequence

from ..numbers import counted, digits_beside, digits_for, signed
from .part import BiasPair, BiasRatio, BiasStudy

UNLIKELY = 0.01
"""p-value of a typical data set below which the goodness of fit would show that the model is wrong."""

SAME = 1e-9
"""Deviance below which the fitted study describes the other one exactly."""

Case = tuple[BiasPair, BiasRatio]


def not_covered(studies: Sequence[BiasStudy], pairs: Sequence[BiasPair], sources: Mapping[str, str]) -> Iterator[str]:
    """Shifts beyond what covers them: first what the study's own fit gets wrong, then what it is right about and an
    alternative would not be, each the worst first; pairs of two alternatives in one line.

    sources : what covers -> its label; what has none goes by its name.
    """
    labels = {study.name: study.label for study in studies}
    nominal = studies[0].name
    cases = _cases(pairs, "not covered")
    for pair, ratio in _of_study(cases, nominal):
        yield f"{_shift(pair, ratio, labels, nominal)}, beyond the {_covering(ratio, sources)}{_seen(pair)}."
    rest = [(pair, ratio) for pair, ratio in cases if nominal not in (pair.made_with, pair.fitted_with)]
    if rest:
        pair, ratio = rest[0]
        others = sum(nominal not in (p.made_with, p.fitted_with) and p.made_with != p.fitted_with for p in pairs)
        count = len({(pair.made_with, pair.fitted_with) for pair, _ in rest})
        yield (
            f"Of the {others} pairs of two alternatives {count} are not covered, the worst of them {ratio.label} made "
            f"with {labels[pair.made_with]}, fitted with {labels[pair.fitted_with]}: "
            f"{signed(ratio.significance, 2, plus=True)} of its error."
        )


def other_sentences(
    studies: Sequence[BiasStudy], pairs: Sequence[BiasPair], sources: Mapping[str, str]
) -> Iterator[str]:
    """What is not decided, what else went wrong, and how much is well. sources : as for `not_covered`."""
    labels = {study.name: study.label for study in studies}
    nominal = studies[0].name
    for pair, ratio in _of_study(_cases(pairs, "undecided"), nominal):
        yield (
            f"{_shift(pair, ratio, labels, nominal)}, against the {_covering(ratio, sources)}: the generated events "
            "are too few to decide whether that matters."
        )
    apart = [pair for pair in pairs if pair.made_with != pair.fitted_with]
    own = [pair for pair in apart if pair.fitted_with == nominal]
    well = [pair for pair in own if pair.ratios and all(r.status in ("covered", "negligible") for r in pair.ratios)]
    yield (
        f"Fitted with the study itself, {len(well)} of {len(own)} alternatives shift every ratio negligibly, or by no "
        "more than what covers it."
    )
    for pair in own:
        if pair.goodness is not None and pair.goodness.deviance < SAME:
            yield f"{_made(pair, labels, nominal)}: the study's own model describes it exactly."
    for pair in pairs:
        if not pair.valid:
            yield f"{_made(pair, labels, nominal)}: the fit to the expected set failed ({pair.reason})."
        if pair.failures:
            yield f"{_made(pair, labels, nominal)}: {counted(pair.failures)} of {counted(pair.toys)} toys failed."
        if pair.outside > 0.5:
            yield (
                f"{_made(pair, labels, nominal)}: {counted(pair.outside)} expected events lie in bins where the fitted "
                "study expects none, and are left out."
            )


def _cases(pairs: Sequence[BiasPair], status: str) -> list[Case]:
    """Ratios of pairs with this status, the largest excess over the covering error first."""
    found = [(pair, ratio) for pair in pairs for ratio in pair.ratios if ratio.status == status]
    return sorted(found, key=lambda case: (case[1].covering - abs(case[1].shift)) / case[1].error)


def _of_study(cases: Sequence[Case], nominal: str) -> Iterator[Case]:
    yield from (case for case in cases if case[0].fitted_with == nominal)
    yield from (case for case in cases if case[0].made_with == nominal and case[0].fitted_with != nominal)


def _made(pair: BiasPair, labels: dict[str, str], nominal: str) -> str:
    if pair.fitted_with == nominal:
        return f"Made with {labels[pair.made_with]}"
    return f"Made with {labels[pair.made_with]}, fitted with {labels[pair.fitted_with]}"


def _shift(pair: BiasPair, ratio: BiasRatio, labels: dict[str, str], nominal: str) -> str:
    places = digits_for(ratio.error) + 1
    return (
        f"{_made(pair, labels, nominal)}: {ratio.label} shifts by {signed(ratio.shift, places, plus=True)} ± "
        f"{signed(ratio.shift_error, places)}, {signed(ratio.significance, 2, plus=True)} of its error"
    )


def _covering(ratio: BiasRatio, sources: Mapping[str, str]) -> str:
    names = [sources.get(name, name) for name in ratio.covered_by]
    whose = _listed(names) if names else "the whole systematic error"
    return f"{signed(ratio.covering, digits_beside(ratio.covering, ratio.error))} of {whose}"


def _listed(names: Sequence[str]) -> str:
    return " and ".join([", ".join(names[:-1]), names[-1]]) if len(names) > 1 else names[0]


def _seen(pair: BiasPair) -> str:
    """Whether the goodness of fit would tell."""
    p_value = None if pair.goodness is None else pair.goodness.p_value
    if p_value is None:
        return ""
    if p_value < UNLIKELY:
        chance = "p < 0.001" if p_value < 0.001 else f"p = {p_value:.3f}"
        return f"; a typical data set would show it ({chance})"
    return f"; the goodness of fit would not show it (p = {p_value:.2f} for a typical data set)"
