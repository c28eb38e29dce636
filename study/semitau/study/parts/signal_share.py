"""How much of each bin is signal, as expected: known before anything is fitted."""

from __future__ import annotations

import numpy as np
from semitau.core.templates import Floats
from semitau.fit.fitting.model import Model


def signal_components(model: Model) -> set[str]:
    """Components that a ratio scales."""
    return {c.name for c in model.templates.components if set(c.scales_with) & set(model.ratios)}


def signal_shares(model: Model) -> dict[str, Floats]:
    """Category name -> share of the components that a ratio scales, in the shape of its axes; 1 in empty bins."""
    signal = signal_components(model)
    contributions = model.contributions()
    shares = {}
    for category in model.templates.categories:
        of_signal, total = np.zeros(category.shape), np.zeros(category.shape)
        for component in model.templates.components:
            contents = contributions.get((category.name, component.name))
            if contents is not None:
                total += contents
                of_signal += contents if component.name in signal else 0.0
        shares[category.name] = np.where(total > 0, of_signal / np.where(total > 0, total, 1.0), 1.0)
    return shares
