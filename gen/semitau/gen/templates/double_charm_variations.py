"""What each [[variation]] of a study does to the chains of a [[double_charm]] component.

Shares of its parts are constant factors that keep the component's total, for the fit has a yield for that. Form factors
of B -> D(*) l nu do not act on it.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence

import numpy as np
from semitau.core.errors import InputError

from ..decays.double_charm import DoubleCharmChain, relative_error
from ..study_file.study import StudyConfig
from ..study_file.variations import DoubleCharmShare
from .variations import SIGNS, ChannelVariations, common_variations, passing_share

Expected = Sequence[tuple[DoubleCharmChain, float]]


def double_charm_variations(study: StudyConfig, name: str, whole: Expected) -> Iterator[ChannelVariations]:
    """Variations of each chain of a component of this name. whole : all its chains with their expected decays.

    InputError if a varied share passes 1.
    """
    leptons = [category.lepton for category in study.categories]
    variations = study.variations
    shares = [variation for variation in variations if isinstance(variation, DoubleCharmShare)]
    changes = [(variation, *_change(study, variation, whole)) for variation in shares]
    passing = [
        passing_share(variation.name, name, share, relative)
        for variation, share, relative in changes
        if 0.0 < share < 1.0 < share * (1.0 + relative)
    ]
    if passing:
        raise InputError(*passing)
    for chain, _ in whole:
        soft, factors = common_variations(study, variations, chain, leptons)
        for variation, share, relative in changes:
            if 0.0 < share < 1.0:
                for sign in SIGNS:
                    mine = 1.0 + sign * relative
                    rest = (1.0 - share * mine) / (1.0 - share)
                    factor = mine if belongs(chain, variation) else rest
                    factors[variation.name, sign] = np.full(len(leptons), factor)
        yield ChannelVariations({}, soft, factors)


def belongs(chain: DoubleCharmChain, variation: DoubleCharmShare) -> bool:
    """Whether a chain is of the part that the variation changes."""
    return chain.beside == variation.beside if variation.beside is not None else chain.source == variation.source


def _change(study: StudyConfig, variation: DoubleCharmShare, whole: Expected) -> tuple[float, float]:
    """Share of the part in the component, and one standard deviation of it, relative."""
    weights: dict[tuple[str, ...], float] = {}
    for chain, expected in whole:
        if expected > 0.0 and belongs(chain, variation):
            key = chain.entry if variation.beside is not None else (chain.meson, chain.hadron or chain.lepton)
            weights[key] = weights.get(key, 0.0) + expected
    share = sum(weights.values()) / sum(expected for _, expected in whole)
    if variation.relative is not None or not weights:
        return share, variation.relative or 0.0
    known = study.fractions
    of = known.to_two_charmed if variation.beside is not None else known.to_leptons
    rows = ((weight, of(key[0])[key[1:]]) for key, weight in weights.items())
    return share, relative_error((weight / fraction.value, fraction) for weight, fraction in rows)
