"""Event weights: against traces over the whole chain, against rates, and the tabulated ones of blocks against both.

Mean weights fluctuate with the events: every comparison asks for 5 standard deviations (6e-7 each, below 1e-4 for the
file). The seed is fixed unless SEMITAU_TEST_SEED says otherwise. The rest is exact to rounding.
"""

from __future__ import annotations

import os
import pickle
from dataclasses import replace

import awkward as ak
import numpy as np
import pytest
from semitau import gen
from semitau.core.errors import InputError
from semitau.core.streams import stream_key
from semitau.gen.block import LANES, new_block
from semitau.gen.decays.chains import chains_of
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.decay_record import decay_of
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.variation_weights import variation_table, variation_weights

from . import brute_chain, dirac

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
NEW = {
    "VR": {"VR": 0.3 - 0.2j},
    "S": {"SL": 0.4 + 0.3j, "SR": -0.2 + 0.5j},
    "T": {"T": 0.1 - 0.15j},
    "all": {"VL": 0.1, "VR": -0.2j, "SL": 0.3j, "SR": 0.2, "T": 0.05 + 0.1j},
}


def vector(events: ak.Array, name: str, i: int) -> np.ndarray:
    """(E, px, py, pz) of one event."""
    return np.array([events[name][part][i] for part in ("E", "px", "py", "pz")])


def brute_density(decay: gen.Decay, events: ak.Array, i: int) -> float:
    """|M|² of event i from its momenta; tau neutrinos integrated."""
    has_tau = decay.lepton == "tau"
    charm = vector(events, "Dst" if "Dst" in events.fields else "D", i)
    lepton = vector(events, "tau" if has_tau else "lepton", i)
    p = dirac.Point(vector(events, "B", i), charm, lepton, vector(events, "nu", i), np.zeros((3, 4)), decay.m_lepton)
    d = vector(events, "D", i) if "Dst" in events.fields else None
    photon = d is not None and vector(events, "soft", i)[0] - np.linalg.norm(vector(events, "soft", i)[1:]) < 1e-4
    found = brute_chain.operators(decay, p, d, photon)
    if not has_tau:
        return dirac.squared(p, found)
    chain = brute_chain.leptonic_tau if "nu_lepton" in events.fields else brute_chain.pion_tau
    return chain(p, found, vector(events, "lepton", i))


@pytest.mark.parametrize("new", NEW)
@pytest.mark.parametrize(
    ("charm", "lepton", "tau_to", "charm_to"),
    [
        ("D-", "tau", "mu", None),
        ("D-", "tau", "pi", None),
        ("D-", "mu", "mu", None),
        ("D*-", "tau", "mu", "D0 pi+"),
        ("D*-", "tau", "e", "D+ gamma"),
        ("D*-", "tau", "pi", "D+ pi0"),
        ("D*-", "mu", "mu", "D0 pi+"),
        ("D*-", "mu", "mu", "D+ gamma"),
    ],
)
def test_against_traces(charm: str, lepton: str, tau_to: str, charm_to: str | None, new: str) -> None:
    """Ratio of traces over the whole chain, at the momenta of the events in the frame of an Upsilon(4S)."""
    old, other = gen.Decay("B0", charm, lepton), gen.Decay("B0", charm, lepton, wilson=NEW[new])
    events = gen.simulate(old, 12, SEED, tau_to=tau_to, charm_to=charm_to, frame="Upsilon")
    ours = gen.weights(events, other)
    brute = [brute_density(other, events, i) / brute_density(old, events, i) for i in range(len(events))]
    np.testing.assert_allclose(ours, brute, rtol=1e-7)
    assert np.ptp(ours) > 1e-3 or (charm == "D-" and new == "VR")


@pytest.mark.parametrize("new", NEW)
@pytest.mark.parametrize(
    ("charm", "lepton", "tau_to"),
    [("D-", "tau", "e"), ("D-", "mu", "mu"), ("D*-", "tau", "mu"), ("D*-", "tau", "pi"), ("D*-", "e", "mu")],
)
def test_mean_weight_is_rate_ratio(charm: str, lepton: str, tau_to: str, new: str) -> None:
    old, other = gen.Decay("B0", charm, lepton), gen.Decay("B0", charm, lepton, wilson=NEW[new])
    weights = gen.weights(gen.simulate(old, 60_000, SEED + 1, tau_to=tau_to), other)
    check_mean(weights, gen.observables(other).rate / gen.observables(old).rate)


def test_mean_weight_back() -> None:
    """Events drawn with complex couplings, by the complex kernel, weighted back to the standard model."""
    new, old = gen.Decay("B0", "D*-", "tau", wilson=NEW["all"]), gen.Decay("B0", "D*-", "tau")
    weights = gen.weights(gen.simulate(new, 60_000, SEED + 2), old)
    check_mean(weights, gen.observables(old).rate / gen.observables(new).rate)


@pytest.mark.parametrize("charm", ["D1(2420)-", "D2*(2460)-", "D0*(2300)-", "D1'(2430)-"])
def test_mean_weight_of_excited_states(charm: str) -> None:
    old, new = gen.Decay("B0", charm, "tau"), gen.Decay("B0", charm, "tau", wilson={"VR": 0.3 + 0.2j})
    weights = gen.weights(gen.simulate(old, 30_000, SEED + 3), new)
    check_mean(weights, gen.observables(new).rate / gen.observables(old).rate)


def check_mean(weights: np.ndarray, expected: float) -> None:
    # rounding, where all weights are equal
    error = np.std(weights) / np.sqrt(len(weights)) + 1e-13 * expected
    assert abs(np.mean(weights) - expected) < 5.0 * error


def shifted(decay: gen.Decay, shifts: dict[str, float]) -> gen.Decay:
    return replace(decay, form_factors=decay.form_factors.shifted(shifts, decay.transition))


VARIATIONS = {
    "D-": [{"a0": 0.02}, {"a1": -0.3}, {"b1": 0.2}],
    "D*-": [{"R0(1)": 0.07}, {"rho2": 0.1}, {"R1(1)": 0.1}, {"R2(1)": -0.1}, {"R0(1)": -0.07}, {"rho2": -0.1}] * 2,
    "D1(2420)-": [{"tau_slope": 0.3}],
    "D2*(2460)-": [{"tau_slope": -0.3}],
}


@pytest.mark.parametrize("wilson", [None, {"T": 0.1j, "SL": 0.2}])
@pytest.mark.parametrize("lepton", ["tau", "mu"])
@pytest.mark.parametrize("charm", VARIATIONS)
def test_blocks_agree_with_events(charm: str, lepton: str, wilson: dict[str, complex] | None) -> None:
    """Tabulated weights against those computed from momenta: the same up to the interpolation between table nodes."""
    orbital = charm.startswith(("D1", "D2"))
    if orbital and wilson:
        wilson = {"VR": 0.2j}
    decay = gen.Decay("B0", charm, lepton, wilson=wilson)
    others = [shifted(decay, shifts) for shifts in VARIATIONS[charm]]
    if orbital:  # a slope does not turn the spin
        others.append(replace(decay, wilson={"VR": 0.3 - 0.1j}))
    for chain in chains_of(decay, ("mu",)):
        block, n = new_block(), LANES - 3
        out = np.full((n, len(others) + 1), np.nan)
        draw_decays(block, channel_table(chain), stream_key(SEED, "simulate"), np.uint64(0))
        variation_weights(block, variation_table(chain, others, shape_only=False), out, n)
        assert np.isnan(out[:, -1]).all(), "a column that nobody asked for was written"
        soft = {"charged_pion": "pi+", "neutral_pion": "pi0", "photon": "gamma", "none": ""}[chain.soft]
        # how the D* of a D** decays does not change the draws that weights look at
        to = f"{chain.vector or chain.ground} {chain.light_mesons}" if orbital else f"{chain.ground} {soft}"
        events = gen.simulate(decay, n, SEED, charm_to=None if charm == "D-" else to)
        for v, other in enumerate(others):
            np.testing.assert_allclose(out[:, v], gen.weights(events, other), rtol=2e-4)


@pytest.mark.parametrize("lepton", ["tau", "e"])
def test_shape_only_has_mean_one(lepton: str) -> None:
    decay = gen.Decay("B+", "D*0", lepton)
    others = [shifted(decay, {"R0(1)": 0.2}), shifted(decay, {"rho2": 0.2})]
    chain = next(chains_of(decay, ("mu",)))
    table, weights = channel_table(chain), variation_table(chain, others, shape_only=True)
    block, out = new_block(), np.empty((60 * LANES, 2))
    for start in range(0, len(out), LANES):
        draw_decays(block, table, stream_key(SEED, "shape"), np.uint64(start))
        variation_weights(block, weights, out[start : start + LANES], LANES)
    for column in out.T:
        # linear interpolation of the amplitudes between nodes; seen where R0 moves an electron's weight by 1e-7
        assert abs(np.mean(column) - 1.0) < 5.0 * np.std(column) / np.sqrt(len(column)) + 1e-6
    assert np.std(out[:, 1]) > 0.01


def test_variation_of_another_decay() -> None:
    chain = next(chains_of(gen.Decay("B0", "D*-", "mu"), ()))
    with pytest.raises(InputError, match=r"same decay .*B0 -> D\*- e"):
        variation_table(chain, [gen.Decay("B0", "D*-", "e")], shape_only=True)
    with pytest.raises(InputError, match="no variation"):
        variation_table(chain, [], shape_only=True)


def test_events_know_their_decay() -> None:
    decay = gen.Decay("B0", "D*-", "tau", form_factors="CLN-2021", wilson={"T": 0.1j})
    events = gen.simulate(decay, 50, SEED)
    same = [
        events[10:],
        events[events.lepton.E > 0.5],
        events[[3, 1, 2]],
        ak.concatenate([events, events]),
        pickle.loads(pickle.dumps(events)),
        ak.with_field(events, events.lepton.E, "energy"),
        ak.mask(events, events.lepton.E > 0.5),
    ]
    assert all(decay_of(sample) == decay for sample in same)
    plain = gen.Decay("B0", "D*-", "tau")
    np.testing.assert_array_equal(gen.weights(events[[3, 1, 2]], plain), gen.weights(events, plain)[[3, 1, 2]])


def test_joined_samples_of_different_decays_are_refused() -> None:
    plain, other = gen.Decay("B0", "D*-", "tau"), gen.Decay("B0", "D*-", "tau", wilson={"T": 0.1j})
    joined = ak.concatenate([gen.simulate(plain, 5, 1), gen.simulate(other, 5, 1)])
    with pytest.raises(InputError, match=r"do not say .* Pass drawn_from"):
        gen.weights(joined, plain)
    assert len(gen.weights(joined[:5], other, drawn_from=plain)) == 5


def test_events_that_do_not_fit() -> None:
    events = gen.simulate(gen.Decay("B0", "D*-", "tau"), 5, 1)
    with pytest.raises(InputError, match=r"another charm \(got 'D-', allowed 'D\*-'\)"):
        gen.weights(events, gen.Decay("B0", "D-", "tau"))
    with pytest.raises(InputError, match=r"another lepton"):
        gen.weights(events, gen.Decay("B0", "D*-", "mu"))
    with pytest.raises(InputError, match=r"fields are missing .*got B, tau"):
        gen.weights(events[["B", "tau"]], gen.Decay("B0", "D*-", "tau"), drawn_from=gen.Decay("B0", "D*-", "tau"))


def test_events_with_holes_or_none_at_all() -> None:
    decay = gen.Decay("B0", "D*-", "tau")
    events = gen.simulate(decay, 5, 1)
    with pytest.raises(InputError, match=r"records are missing.* ak\.drop_none"):
        gen.weights(ak.mask(events, events.lepton.E > 1.0), decay)
    with pytest.raises(InputError, match=r"not an array of events.*got list"):
        gen.weights([1, 2, 3], decay)
    with pytest.raises(InputError, match=r"not a decay.*got str"):
        gen.weights(events, "B0 -> D*- tau")


def test_no_events() -> None:
    decay = gen.Decay("B0", "D*-", "tau")
    assert gen.weights(gen.simulate(decay, 0, 1), decay).shape == (0,)
    assert gen.weights(gen.simulate(decay, 3, 1), decay) == pytest.approx([1.0, 1.0, 1.0], abs=0)
