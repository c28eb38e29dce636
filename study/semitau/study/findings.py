"""The most important of every part of a study, for the terminal and the first page of the report."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass

from .averages.part import AverageResults
from .bias.part import Bias
from .design.part import Design
from .numbers import counted, percent, signed, with_error
from .reach.part import Reach
from .results import Results
from .sizing.part import Sizing

BAD_FIT = 0.01
"""p-value of the fit below which it is worth a look; by chance it happens in one study of a hundred."""


@dataclass(frozen=True)
class Finding:
    """section : where it stands in full. topic, text : what was found. alarming : whether somebody must look at it."""

    section: str
    topic: str
    text: str
    alarming: bool = False


def findings(results: Results) -> tuple[Finding, ...]:
    """What each section found, in the order of the report."""
    found = [*_uncertainty(results)]
    if results.bias is not None:
        found.append(_bias(results.bias))
    if results.sizing is not None:
        found.append(_sizing(results.sizing))
    found += _goodness(results)
    if results.design is not None:
        found.append(_design(results.design))
    if results.reach is not None:
        found.append(_reach(results.reach))
    if results.average is not None:
        found.append(_average(results.average))
    return tuple(found)


def _uncertainty(results: Results) -> Iterator[Finding]:
    parts = []
    ratios = {ratio.name: ratio for ratio in results.ratios}
    for budget in results.budget:
        ratio = ratios[budget.ratio]
        # Hidden ratios are no scale for errors.
        scale = abs(ratio.injected if results.blinding is not None else ratio.value)
        if not (scale and budget.rows):
            continue
        ordered = sorted(budget.rows, key=lambda row: -row.error)[:2]
        sources = ", then ".join(f"{row.label} {percent(row.error / scale)}" for row in ordered)
        parts.append(f"{ratio.label} to {percent(budget.total / scale)}, first of all {sources}")
    if parts:
        yield Finding("uncertainty", "Uncertainty", f"{'; '.join(parts)}.")


def _bias(bias: Bias) -> Finding:
    labels = {study.name: study.label for study in bias.studies}
    nominal, *others = labels
    missed = {
        pair.made_with
        for pair in bias.pairs
        if pair.fitted_with == nominal and any(ratio.status == "not covered" for ratio in pair.ratios)
    }
    if missed:
        names = ", ".join(labels[name] for name in others if name in missed)
        which = f"{_alternatives(len(missed), len(others))} not covered: {names}."
        return Finding("bias", "Alternatives", " ".join((which, *bias.not_covered[:1])), alarming=True)
    count = len(others)
    open_cases = any(r.status == "undecided" for p in bias.pairs if p.fitted_with == nominal for r in p.ratios)
    known = "known to be uncovered" if open_cases else "left uncovered"
    text = f"No shift of a ratio by {'the alternative' if count == 1 else f'one of the {count}'} is {known}."
    return Finding("bias", "Alternatives", " ".join((text, *bias.not_covered[:1], *bias.sentences[:1])))


def _alternatives(missed: int, of: int) -> str:
    return f"{missed} of {of} alternative{'s' * (of != 1)} {'is' if missed == 1 else 'are'}"


def _sizing(sizing: Sizing) -> Finding:
    """Cost of finite templates, who has too few events, and what is marked as worth a look."""
    costs = " and ".join(f"of {ratio.label} by {percent(ratio.now / ratio.exact - 1.0)}" for ratio in sizing.ratios)
    short = sorted((sample for sample in sizing.samples if sample.needed > 1.0), key=lambda sample: -sample.needed)
    needs = "; ".join(f"{sample.label} needs {counted(sample.needed)} times as many" for sample in short)
    few = f"Too few events: {needs}." if short else "Every component has the events that it needs."
    mark = "Look at this: "  # which an alarming finding gets anyway
    marked = [sentence.removeprefix(mark) for sentence in sizing.sentences if sentence.startswith(mark)]
    marked = [sentence[:1].upper() + sentence[1:] for sentence in marked]
    text = f"{few} Finite templates enlarge the expected error {costs}."
    return Finding("sizing", "How many events", " ".join((*marked, text)), alarming=bool(marked))


def _goodness(results: Results) -> Iterator[Finding]:
    goodness = results.fit.goodness
    if goodness is None or results.data.kind == "expected":
        return
    p_value = goodness.p_value if goodness.toy_p_value is None else goodness.toy_p_value
    if p_value is None:
        return
    where = "goodness" if results.quality is not None else "fit"
    source = "χ²" if goodness.toy_p_value is None else "toys"
    text = f"{_p(p_value)} from {source}"
    if results.quality is not None and results.quality.categories:
        worst = min(results.quality.categories, key=lambda category: category.p_value)
        text += f"; worst category: {worst.label}, {_p(worst.p_value)}"
    yield Finding(where, "Quality of the fit", f"{text}.", alarming=p_value < BAD_FIT)


def _p(p_value: float) -> str:
    return "p < 0.001" if p_value < 0.0005 else f"p = {signed(p_value, 3)}"


def _design(design: Design) -> Finding:
    check = design.confirmation
    flat = [curve.label for curve in design.curves if not curve.matters]
    text = (
        f"The expected error at the proposed working point is smaller by {percent(check.gain)} ± "
        f"{percent(check.uncertainty)} on independent events ({percent(design.gain)} on those of the search)"
    )
    if not design.snippet:
        text = "Nothing better than the study as it is was found."
    elif check.confirmed:
        text += "."
    elif check.noise is None:
        text += ": not confirmed, there are too few events to tell it from fluctuations of the templates."
    else:
        text += ": not confirmed. Keep the study as it is, or generate more events."
    if flat:
        text += f" Does not matter: {', '.join(flat)}."
    return Finding("design", "Design", text)


def _reach(reach: Reach) -> Finding:
    """When a deviation is seen, and the walls within the range; without either, what limits each ratio."""
    sentences = [part.sentence for part in reach.needed]
    sentences += [part.sentence for part in reach.walls if part.factor is not None or not reach.needed]
    return Finding("reach", "Reach", " ".join(sentences))


def _average(average: AverageResults) -> Finding:
    values = ", ".join(f"{ratio.label} = {with_error(ratio.value, ratio.error)}" for ratio in average.ratios)
    text = f"With the other measurements: {values}"
    if average.tension is not None:
        text += f", {signed(average.tension.sigmas, 2)} σ from the prediction"
        for case in average.planned[:2]:
            if case.tension is not None:
                text += f"; with {case.planned} found at the {case.found_at}, {signed(case.tension.sigmas, 2)} σ"
    return Finding("average", "Average", f"{text}.")
