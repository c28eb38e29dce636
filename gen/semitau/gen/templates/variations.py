"""What each [[variation]] of a study does to one decay chain: weights, constant factors, or another scenario.

Form factors and the soft-particle efficiency weigh every event; D** fractions, identification and misidentification are
constant factors of a chain in a category; resolution and momentum scale reconstruct the same events anew, from the same
random numbers. Plus and minus sides are at one standard deviation.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, replace
from typing import TypeGuard

import numpy as np
import numpy.typing as npt
from semitau.core.errors import InputError, Problem

from ..decays.chains import Channel
from ..decays.decay import Decay
from ..decays.double_charm import AnyChain
from ..decays.form_factor_directions import moved
from ..decays.form_factor_set import FormFactorSet
from ..response.candidates import Scenario
from ..study_file.detector import Curve
from ..study_file.names import FORM_FACTORS_OF, LEPTONS
from ..study_file.study import StudyConfig
from ..study_file.variations import (
    ComponentFraction,
    FormFactor,
    FormFactorDirection,
    LeptonIdentificationEfficiency,
    Misidentification,
    MomentumScale,
    ProductionRatio,
    ResidualEnergyScale,
    SingleVariation,
    SoftPionEfficiency,
    TagResolution,
)

Floats = npt.NDArray[np.float64]
Side = tuple[str, int]
"""Name of a variation, and +1 or -1."""

SIGNS = (1, -1)
_SOFT_KIND = {"charged": "charged_pion", "neutral": "neutral_pion", "photon": "photon"}


@dataclass(frozen=True)
class ChannelVariations:
    """How the variations act on a channel; those that do not act on it are absent.

    decays : the channel's decay with other form factors, to weigh events with (shape only).
    soft : factors on the efficiency of its soft particle.
    factors : (categories,) constant weights by category, in the study's order.
    """

    decays: Mapping[Side, Decay]
    soft: Mapping[Side, float]
    factors: Mapping[Side, Floats]


def scenarios(study: StudyConfig) -> dict[Side, Scenario]:
    """The reconstructions besides the nominal one."""
    found: dict[Side, Scenario] = {}
    for variation in study.variations:
        for sign in SIGNS:
            factor = 1.0 + sign * (getattr(variation, "relative", None) or 0.0)
            if isinstance(variation, TagResolution):
                found[variation.name, sign] = Scenario(tag_width=factor, momentum=1.0, residual=1.0)
            elif isinstance(variation, MomentumScale):
                found[variation.name, sign] = Scenario(tag_width=1.0, momentum=factor, residual=1.0)
            elif isinstance(variation, ResidualEnergyScale):
                found[variation.name, sign] = Scenario(tag_width=1.0, momentum=1.0, residual=factor)
    return found


def channel_variations(
    study: StudyConfig, mode: str, channel: Channel, shares: Mapping[str, float], leptons: Sequence[str]
) -> ChannelVariations:
    """Variations of one channel of a mode.

    shares : of the component's expected decays, by charm family; they sum to 1. leptons : of the study's categories.
    """
    decays: dict[Side, Decay] = {}
    soft, factors = common_variations(study, study.variations, channel, leptons)
    for variation in study.variations:
        for sign in SIGNS:
            side = variation.name, sign
            change = 1.0 + sign * (getattr(variation, "relative", None) or 0.0)
            if isinstance(variation, FormFactor | FormFactorDirection):
                if FORM_FACTORS_OF[channel.family] in moved_transitions(study, variation.set):
                    decays[side] = replace(channel.decay, form_factors=varied_set(study, variation, sign))
            elif isinstance(variation, ComponentFraction):
                share = shares.get(variation.charm, 0.0)
                acts = variation.components is None or mode in variation.components
                if acts and 0.0 < share < 1.0:
                    rest = (1.0 - share * change) / (1.0 - share)
                    factors[side] = np.full(len(leptons), change if channel.family == variation.charm else rest)
    return ChannelVariations(decays, soft, factors)


def common_variations(
    study: StudyConfig, variations: Sequence[SingleVariation], channel: AnyChain, leptons: Sequence[str]
) -> tuple[dict[Side, float], dict[Side, Floats]]:
    """`soft` and `factors` of what acts on any decay chain: soft-particle and identification efficiencies.

    variations : those of the study.
    """
    soft: dict[Side, float] = {}
    factors: dict[Side, Floats] = {}
    for variation in variations:
        for sign in SIGNS:
            change = 1.0 + sign * (getattr(variation, "relative", None) or 0.0)
            if isinstance(variation, SoftPionEfficiency):
                if _SOFT_KIND[variation.particle] == channel.soft:
                    soft[variation.name, sign] = change
            elif isinstance(variation, ProductionRatio):
                charged = study.experiment.charged_fraction
                moved = charged * change / (charged * change + 1.0 - charged)
                if 0.0 < charged < 1.0:
                    factor = moved / charged if channel.parent == "B+" else (1.0 - moved) / (1.0 - charged)
                    factors[variation.name, sign] = np.full(len(leptons), factor)
            elif _names_the_lepton(variation, channel):
                is_lepton = np.array([lepton == variation.lepton for lepton in leptons])
                factors[variation.name, sign] = np.where(is_lepton, change, 1.0)
    return soft, factors


def _names_the_lepton(
    variation: SingleVariation, channel: AnyChain
) -> TypeGuard[LeptonIdentificationEfficiency | Misidentification]:
    """Whether it changes the chance that what a chain leaves is called a lepton: by its name, or a pion of a tau."""
    if isinstance(variation, Misidentification):
        return channel.seen_lepton not in LEPTONS
    return isinstance(variation, LeptonIdentificationEfficiency) and channel.seen_lepton == variation.lepton


def background_factors(study: StudyConfig, misidentified: bool) -> dict[Side, Floats]:
    """Constant weights by category of a background: the misidentification rates, if it is made of such leptons."""
    leptons = np.array([category.lepton for category in study.categories])
    return {
        (variation.name, sign): np.where(leptons == variation.lepton, 1.0 + sign * variation.relative, 1.0)
        for variation in study.variations
        if misidentified and isinstance(variation, Misidentification)
        for sign in SIGNS
    }


def moved_transitions(study: StudyConfig, transition: str) -> tuple[str, ...]:
    """What a variation of one entry of [form_factors] moves: both D and D* if they are one set of shared parameters."""
    both = ("D", "Dst")
    one_set = transition in both and study.form_factors.Dst == study.form_factors.D
    return both if one_set and study.form_factor_set(transition).shared else (transition,)


def varied_set(study: StudyConfig, variation: FormFactor | FormFactorDirection, sign: int) -> FormFactorSet:
    """The study's form-factor set of that transition, moved by one standard deviation."""
    nominal = study.form_factor_set(variation.set)
    if isinstance(variation, FormFactorDirection):
        order, number = variation.order, variation.direction - 1
        return moved(nominal, variation.set, order, number, float(sign), study.excited_families)
    member = nominal[variation.set]
    shift = variation.shift
    if shift is None:
        shift = dict(zip(member.names, member.errors, strict=True))[variation.parameter]
    return nominal.shifted({variation.parameter: sign * shift}, variation.set)


def check_shares(study: StudyConfig, mode: str, shares: Mapping[str, float]) -> None:
    """No varied share of a component may pass 1: the rest of it would be negative. InputError that lists all that do.

    mode, shares : as for `channel_variations`.
    """
    problems = [
        passing_share(variation.name, mode, shares[variation.charm], variation.relative)
        for variation in study.variations
        if isinstance(variation, ComponentFraction)
        and (variation.components is None or mode in variation.components)
        and 0.0 < shares.get(variation.charm, 0.0) < 1.0 < shares[variation.charm] * (1.0 + variation.relative)
    ]
    if problems:
        raise InputError(*problems)


def passing_share(variation: str, component: str, share: float, relative: float) -> Problem:
    """The problem of a share that passes 1 when it is varied."""
    return Problem(
        f"the varied share of {component} passes 1",
        where=f"variation {variation}",
        got=f"{share:.4g} × {1 + relative:g}",
        wanted=f"relative up to {1 / share - 1:.3g}",
    )


def check_efficiencies(study: StudyConfig) -> None:
    """No varied efficiency may pass 1. Raises InputError that lists all that do."""
    soft, lepton = study.detector.soft_pion, study.detector.lepton_id
    curves: dict[str, Curve] = {
        "charged": soft.charged,
        "neutral": soft.neutral,
        "photon": study.detector.photons.efficiency,
        "e": lepton.e,
        "mu": lepton.mu,
    }
    problems = []
    for variation in study.variations:
        if isinstance(variation, SoftPionEfficiency | LeptonIdentificationEfficiency):
            what = variation.particle if isinstance(variation, SoftPionEfficiency) else variation.lepton
            most = max(curves[what].value)
            if most * (1.0 + variation.relative) > 1.0:
                problems.append(
                    Problem(
                        "the varied efficiency passes 1",
                        where=f"variation {variation.name}",
                        got=f"{most:g} × {1 + variation.relative:g}",
                        wanted=f"relative up to {1 / most - 1:.3g}",
                    )
                )
    if problems:
        raise InputError(*problems)
