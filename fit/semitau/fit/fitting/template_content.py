"""What to know of a template set before it is fitted: bins with little, nothing or less than nothing in them."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from semitau.core.templates import TemplateSet

POOR = 0.3
"""Relative error of a bin's expectation from finite templates above which a Gaussian factor is a crude one: about ten
generated events in the bin."""


@dataclass(frozen=True)
class TemplateContent:
    """Numbers of bins. The first three count each component by itself, in categories where it expects something.

    negative : contents below zero. cancelled : content of zero, but with a variance: weights that cancel.
    empty : nothing generated. unfilled : no component expects anything, so the bin is left out of the fit.
    poor : relative error of the whole expectation above POOR. bins : all.
    """

    negative: int
    cancelled: int
    empty: int
    unfilled: int
    poor: int
    bins: int

    @property
    def text(self) -> str:
        """In one line with advice; "" if there is nothing to say."""
        parts = (
            (self.poor, f"{self.poor} of {self.bins} bins know their expectation to no better than {POOR:.0%}"),
            (self.unfilled, f"{self.unfilled} expect nothing and are left out"),
            (self.negative, f"{self.negative} contents of single components are negative"),
            (self.cancelled, f"{self.cancelled} cancel to zero"),
        )
        said = [text for number, text in parts if number]
        return "Templates: " + "; ".join(said) + ". Merge bins, or generate more events." if said else ""


def template_content(templates: TemplateSet) -> TemplateContent:
    """Count the bins that deserve a look."""
    negative = cancelled = empty = unfilled = poor = bins = 0
    for category in templates.categories:
        mine = [t for (name, _), t in templates.templates.items() if name == category.name]
        total, variance = np.zeros(category.shape), np.zeros(category.shape)
        for template in mine:
            total += template.nominal
            variance += template.variance
            if template.nominal.any():
                negative += int((template.nominal < 0).sum())
                cancelled += int(((template.nominal == 0) & (template.variance > 0)).sum())
                empty += int(((template.nominal == 0) & (template.variance == 0)).sum())
        bins += total.size
        unfilled += int((total == 0).sum())
        poor += int(((total > 0) & (np.sqrt(variance) > POOR * np.abs(total))).sum())
    return TemplateContent(negative, cancelled, empty, unfilled, poor, bins)
