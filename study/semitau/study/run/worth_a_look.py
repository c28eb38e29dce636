"""What does not stop a study but should be looked at, each with what to do about it."""

from __future__ import annotations

from collections.abc import Iterator, Sequence

from semitau.core.true_minus import formatted

from ..numbers import percent, signed
from ..results import CutFlowComponent, DataSource, Fit, RatioResult

BAD_FIT = 0.001
"""p-value below which a fit does not describe its data; by chance it happens in one study of a thousand."""

FAR_PULL = 3.0
"""Standard deviations from its auxiliary measurement at which a constrained parameter is far away."""

MUCH = 0.05
"""Share of a component's selected events outside the axes that is worth a line."""


def worth_a_look(
    fit: Fit,
    ratios: Sequence[RatioResult],
    data: DataSource,
    cut_flow: Sequence[CutFlowComponent],
    protected_bins: int,
) -> tuple[str, ...]:
    """Warnings, each a sentence with advice; empty if there is nothing."""
    return (*_of_fit(fit, data, protected_bins), *_of_errors(ratios), *_of_axes(cut_flow))


def _of_fit(fit: Fit, data: DataSource, protected_bins: int) -> Iterator[str]:
    goodness = fit.goodness
    if goodness is not None and data.kind != "expected":
        p_value = goodness.p_value if goodness.toy_p_value is None else goodness.toy_p_value
        if p_value is not None and p_value < BAD_FIT:
            yield (
                f"The model does not describe the data (p = {formatted(p_value, '.1g')}): look for the projection that "
                "is off, and for a component or variation that is missing."
            )
    for parameter in fit.parameters:
        if parameter.constraint is not None:
            pull = (parameter.value - parameter.injected) / parameter.constraint
            if abs(pull) > FAR_PULL:
                yield (
                    f"{parameter.label} is fitted {signed(pull, 1, plus=True)} standard deviations from what it was "
                    "made with: its templates or its constraint may be wrong."
                )
    if protected_bins:
        yield (
            f"{protected_bins} bins have an expectation that had to be kept above zero: merge bins, or generate more "
            "events."
        )


def _of_errors(ratios: Sequence[RatioResult]) -> Iterator[str]:
    for ratio in ratios:
        if ratio.statistical and ratio.template_statistics and ratio.template_statistics > 0.5 * ratio.statistical:
            yield (
                f"Finite templates make {percent(ratio.template_statistics / ratio.error, 0)} of the error of "
                f"{ratio.label}: generate more events."
            )


def _of_axes(cut_flow: Sequence[CutFlowComponent]) -> Iterator[str]:
    for component in cut_flow:
        if len(component.steps) > 1 and component.steps[-1].efficiency < 1 - MUCH:
            lost = 1 - component.steps[-1].efficiency
            yield f"{percent(lost)} of the selected {component.label} lie outside the axes: widen their range."
