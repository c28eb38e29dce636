"""What a [[variation]] of a branching fraction does to decay chains: a constant factor for each."""

from __future__ import annotations

from collections.abc import Callable, Mapping, Sequence
from dataclasses import replace

import numpy as np
import numpy.typing as npt

from ..decays.branching_fractions import BranchingFractions
from ..decays.double_charm import AnyChain
from ..study_file.study import StudyConfig
from ..study_file.variations import BranchingFractionChange
from .variations import SIGNS, ChannelVariations, Side

Floats = npt.NDArray[np.float64]


def fraction_changes(
    study: StudyConfig, chains_with: Callable[[BranchingFractions], Sequence[AnyChain]]
) -> dict[Side, Floats]:
    """Factor (chains,) on the rate of each chain of a component, for both sides of the variations of fractions.

    chains_with : all chains of the component, made with these fractions, in an order that does not depend on them.
    """
    known = study.fractions
    varied = [variation for variation in study.variations if isinstance(variation, BranchingFractionChange)]
    if not varied:
        return {}
    nominal = np.array([chain.branching_fraction for chain in chains_with(known)])
    changes: dict[Side, Floats] = {}
    for variation in varied:
        particle, final = variation.particle, variation.decay
        relative = known.relative_error(particle, final, variation.relative)
        for sign in SIGNS:
            moved = known.moved(particle, final, known.value(particle, final) * (1.0 + sign * relative))
            rates = np.array([chain.branching_fraction for chain in chains_with(moved)])
            changes[variation.name, sign] = np.divide(rates, nominal, out=np.ones_like(rates), where=nominal > 0.0)
    return changes


def with_fractions(
    variations: ChannelVariations, changes: Mapping[Side, Floats], chain: int, categories: int
) -> ChannelVariations:
    """The variations of a chain, the one at this place of its component, with those of fractions that act on it."""
    acting = {side: float(factors[chain]) for side, factors in changes.items() if factors[chain] != 1.0}
    more = {side: np.full(categories, factor) for side, factor in acting.items()}
    return replace(variations, factors={**variations.factors, **more}) if acting else variations
