"""Goodness of fit in parts, as parts of `results.json`."""

from __future__ import annotations

from semitau.core.templates import Category
from semitau.fit.fitting.model import Model
from semitau.fit.uncertainty.fit_quality import BinQuality as FitBin
from semitau.fit.uncertainty.fit_quality import Quality as FitQuality

from ..results import BinQuality, CategoryQuality, ProjectionQuality, Quality
from .signal_share import signal_shares


def quality_part(model: Model, found: FitQuality, withheld: float | None = None) -> Quality:
    """What there is to show.

    withheld : expected share of signal above which a bin is left out of the worst ones; None shows all.
    """
    categories = {category.name: category for category in model.templates.categories}
    shares = signal_shares(model)
    return Quality(
        bins=found.bins,
        constraints=found.constraints,
        categories=tuple(
            CategoryQuality(
                category=part.category,
                label=categories[part.category].label,
                statistic=part.statistic,
                bins=part.bins,
                p_value=part.p_value,
            )
            for part in found.categories
        ),
        projections=tuple(
            ProjectionQuality(
                category=part.category,
                label=categories[part.category].label,
                observable=_label(categories[part.category], part.observable),
                distance=part.distance,
                p_value=part.p_value,
            )
            for part in found.projections
        ),
        worst=tuple(
            BinQuality(
                category=categories[part.category].label,
                where=_in_words(categories[part.category], part),
                observed=part.observed,
                expected=part.expected,
                significance=part.significance,
            )
            for part in found.worst
            if withheld is None or shares[part.category][part.place] <= withheld
        ),
        worst_p_value=found.worst_p_value,
    )


def _label(category: Category, observable: str) -> str:
    return next(o.label for o in category.observables if o.name == observable)


def _in_words(category: Category, part: FitBin) -> str:
    return ", ".join(
        f"{o.label} {low:g} to {high:g} {o.unit}".rstrip()
        for o, (low, high) in zip(category.observables, part.edges, strict=True)
    )
