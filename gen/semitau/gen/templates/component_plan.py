"""From the [[mode]] and [[double_charm]] tables to channels with their expected and generated numbers of decays."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from semitau.core.errors import InputError, Problem

from ..decays.branching_fractions import BranchingFractions
from ..decays.chains import Channel, channels, semileptonic_branching_fraction
from ..decays.decay import Decay, WilsonCoefficients, charm_name
from ..decays.double_charm import AnyChain, DoubleCharmChain, double_charm_chains
from ..study_file.components import Mode
from ..study_file.double_charm import DoubleCharm
from ..study_file.names import CHARM_OF_RATIO, FORM_FACTORS_OF
from ..study_file.parameter_names import component_name, split_by_parent
from ..study_file.study import StudyConfig
from .double_charm_variations import double_charm_variations
from .fraction_changes import fraction_changes, with_fractions
from .variations import ChannelVariations, channel_variations, check_shares

LEAST_EVENTS = 256
"""Each chain gets at least this many decays, one block, however small its share."""


@dataclass(frozen=True)
class ChannelPlan:
    """One decay chain of a component.

    component : name of the template component (a mode's, or a part of it by parent if ratios are separate).
    expected : decays of this chain in the data, times tag and charm efficiency; acceptance is still to come.
    events : decays to generate.
    """

    component: str
    mode: str
    channel: AnyChain
    expected: float
    events: int
    variations: ChannelVariations


def plan_channels(study: StudyConfig) -> tuple[ChannelPlan, ...]:
    """All chains of all modes, then of double charm, in the order of the study file; those that can never be seen are
    left out.

    Raises InputError for a component of which nothing is expected.
    """
    modes = [plan for mode in study.modes for plan in _plan_mode(study, mode)]
    return (*modes, *(plan for item in study.double_charms for plan in _plan_double_charm(study, item)))


def _plan_mode(study: StudyConfig, mode: Mode) -> list[ChannelPlan]:
    sets = {name: study.form_factor_set(name) for name in ("D", "Dst", "Dss")}
    given = study.wilson.by_lepton

    def chains_with(fractions: BranchingFractions) -> tuple[Channel, ...]:
        return channels(
            mode.parents, mode.charm, mode.leptons, tau_to=mode.tau_to, form_factors=sets,
            wilson=given.tau, tensor=given.tensor, light={"e": given.e, "mu": given.mu},
            fractions=fractions,
        )  # fmt: skip

    chains = chains_with(study.fractions)
    expected = np.array([expected_decays(study, chain) for chain in chains])
    expected *= np.array([injected_factor(study, mode, chain.parent) for chain in chains])
    _check_expected(expected, f"mode {mode.name}")
    events = shared_out(mode.events, expected)
    # Shares of the whole component: fraction variations keep its total.
    names = [component_name(study, mode, chain.parent) for chain in chains]
    shares = {
        name: family_shares([(c, e) for c, e, other in zip(chains, expected, names, strict=True) if other == name])
        for name in dict.fromkeys(names)
    }
    leptons = [category.lepton for category in study.categories]
    for mine in shares.values():
        check_shares(study, mode.name, mine)
    plans, changes = [], fraction_changes(study, chains_with)
    for k, (name, chain, n_expected, n) in enumerate(zip(names, chains, expected, events, strict=True)):
        if n_expected > 0.0:
            variations = channel_variations(study, mode.name, chain, shares[name], leptons)
            variations = with_fractions(variations, changes, k, len(leptons))
            plans.append(ChannelPlan(name, mode.name, chain, float(n_expected), int(n), variations))
    return plans


def _plan_double_charm(study: StudyConfig, item: DoubleCharm) -> list[ChannelPlan]:
    def chains_with(fractions: BranchingFractions) -> tuple[DoubleCharmChain, ...]:
        return double_charm_chains(
            item.parents, item.charm, item.beside, item.leptons,
            form_factors=study.form_factor_set("Dst"), fractions=fractions,
        )  # fmt: skip

    chains, changes = chains_with(study.fractions), fraction_changes(study, chains_with)
    expected = np.array([expected_decays(study, chain) for chain in chains])
    _check_expected(expected, f"double_charm {item.name}")
    whole = [(chain, float(n)) for chain, n in zip(chains, expected, strict=True)]
    events, variations = shared_out(item.events, expected), double_charm_variations(study, item.name, whole)
    return [
        ChannelPlan(
            item.name, item.name, chain, n_expected, n, with_fractions(acting, changes, k, len(study.categories))
        )
        for k, ((chain, n_expected), n, acting) in enumerate(zip(whole, events, variations, strict=True))
        if n_expected > 0.0
    ]


def _check_expected(expected: np.ndarray, where: str) -> None:
    if not expected.sum() > 0.0:
        remedy = "Raise the tag efficiency, the charm efficiency or b_pairs, or remove it."
        raise InputError(Problem("a component with no events", where=where, remedy=remedy))


def family_shares(chains: Sequence[tuple[Channel, float]]) -> dict[str, float]:
    """Share of each charm family in a list of chains and their expected decays."""
    total = sum(expected for _, expected in chains)
    shares: dict[str, float] = {}
    for chain, expected in chains:
        shares[chain.family] = shares.get(chain.family, 0.0) + expected / total
    return shares


def expected_decays(study: StudyConfig, channel: AnyChain) -> float:
    """Decays of a chain beside a tag, whose D goes to a channel that is looked for.

    2 * pairs * share of the parent * branching fraction * tag efficiency * charm efficiency: either B of a pair can be
    the signal, and the tag efficiency is that of one B.
    """
    detector = study.detector
    return (
        2.0
        * parent_pairs(study, channel.parent)
        * channel.branching_fraction
        * detector.tag.kept(channel.parent)
        * detector.charm.reconstructed[channel.ground]
    )


def parent_pairs(study: StudyConfig, parent: str) -> float:
    """Pairs of this B species in the data."""
    share = study.experiment.charged_fraction
    return study.experiment.b_pairs * (share if parent == "B+" else 1.0 - share)


def shared_out(events: int, expected: Sequence[float] | np.ndarray) -> list[int]:
    """Events in proportion to what is expected: largest remainders, and LEAST_EVENTS for every chain that can occur."""
    shares = np.asarray(expected, dtype=np.float64)
    exact = events * shares / shares.sum()
    whole = np.floor(exact).astype(np.int64)
    left = int(events - whole.sum())
    whole[np.argsort(whole - exact, kind="stable")[:left]] += 1
    return [max(int(n), LEAST_EVENTS) if share > 0.0 else 0 for n, share in zip(whole, shares, strict=True)]


def predicted_ratio(
    study: StudyConfig, name: str, parents: Sequence[str], couplings: WilsonCoefficients | None = None
) -> float:
    """R_D or R_Dst from the study's form factors: tau over the mean of e and mu, for this mix of tagged parents.

    couplings : of the tau, those of the study if left out.
    """
    given = study.wilson.by_lepton if couplings is None else study.wilson.by_lepton.with_tau(couplings)
    family = CHARM_OF_RATIO[name]
    chosen = study.form_factor_set(FORM_FACTORS_OF[family])
    sums = {"e": 0.0, "mu": 0.0, "tau": 0.0}
    for parent in parents:
        tagged = parent_pairs(study, parent) * study.detector.tag.kept(parent)
        for lepton in sums:
            charm, model = charm_name(parent, family), given.model(lepton)
            decay = Decay(parent, charm, lepton, chosen, given[lepton], model)
            sums[lepton] += tagged * semileptonic_branching_fraction(decay, study.fractions)
    return 2.0 * sums["tau"] / (sums["e"] + sums["mu"])


def ratio_parents(study: StudyConfig, mode: Mode, parent: str) -> tuple[str, ...]:
    """The parents that share a ratio parameter with the decays of `parent` in a mode."""
    if split_by_parent(study, mode):
        return (parent,)
    return tuple(dict.fromkeys(p for m in study.modes if m.scales_with == mode.scales_with for p in m.parents))


def injected_ratio(study: StudyConfig, mode: Mode, parent: str) -> float:
    """The ratio that the templates of a mode with a ratio are made with: the study's, or the form factors'."""
    name = str(mode.scales_with)
    given: Mapping[str, float] = {str(key): value for key, value in study.fit.injected.items()}
    return given[name] if name in given else predicted_ratio(study, name, ratio_parents(study, mode, parent))


def injected_factor(study: StudyConfig, mode: Mode, parent: str) -> float:
    """Injected over predicted ratio; 1 for modes without a ratio."""
    if mode.scales_with is None or mode.scales_with not in study.fit.injected:
        return 1.0
    predicted = predicted_ratio(study, mode.scales_with, ratio_parents(study, mode, parent))
    return injected_ratio(study, mode, parent) / predicted


def template_fraction(study: StudyConfig, decay: Decay) -> float | None:
    """Branching fraction of a decay that the templates are made with, injected ratio included; None for a decay that no
    mode has."""
    for mode in study.modes:
        if decay.parent in mode.parents and decay.family in mode.charm and decay.lepton in mode.leptons:
            fraction = semileptonic_branching_fraction(decay, study.fractions)
            return fraction * injected_factor(study, mode, decay.parent)
    return None
