"""From decays to observables and categories: closed forms, truth of a faultless detector, brute force with `vector`.

Statistical tests use a fixed seed that SEMITAU_TEST_SEED replaces, and allow five standard deviations: with about
thirty comparisons a fresh seed fails somewhere with a chance below 1e-4.
"""

from __future__ import annotations

import os
from typing import Any

import numpy as np
import pytest
import vector
from semitau.core.constants import MASS
from semitau.core.streams import stream_key
from semitau.gen import block as row
from semitau.gen.block import LANES
from semitau.gen.decays.chains import Channel
from semitau.gen.response.candidates import Scenario, Windows, reconstruct
from semitau.gen.response.recording import CANDIDATE_ROWS, TRUTH_ROWS, event_recorder
from semitau.gen.response.setup import kernel_chain
from semitau.gen.templates.binning import category_code
from semitau.gen.templates.chunk_tasks import Bench, make_bench

from .blocks import channel, measured, plan, values
from .marlow_study import PERFECT, study

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
SIGMAS = 5.0
STREAM = stream_key(SEED, "reconstruction")
OPEN = Windows(1, *(-np.inf, np.inf) * 8)
NOMINAL = Scenario(1.0, 1.0, 1.0)


def bench(**changes: Any) -> Bench:
    return make_bench(study(**changes), variations=False)


def recorded(
    chain: Channel, made: Bench, n: int, scenario: Scenario = NOMINAL
) -> tuple[dict[str, np.ndarray], dict[str, np.ndarray]]:
    """Truth and candidates by column; the truth is that of the candidates, in their order."""
    events = event_recorder(plan(chain), made, STREAM, scenario)(0, n)
    truth = {name: column[events.number] for name, column in zip(TRUTH_ROWS, events.truth, strict=True)}
    return truth, dict(zip(CANDIDATE_ROWS, events.candidates, strict=True))


def vectors(columns: dict[str, np.ndarray], name: str) -> vector.MomentumNumpy4D:
    return vector.array({axis: columns[f"{name}_{axis}"] for axis in ("px", "py", "pz", "E")})


def codes(charm: str) -> set[int]:
    return {category_code(charm, "e"), category_code(charm, "mu")}


def expect_share(passed: np.ndarray, chances: np.ndarray | float) -> None:
    chances = np.broadcast_to(chances, passed.shape)
    spread = np.sqrt((chances * (1.0 - chances)).sum())
    assert abs(passed.sum() - chances.sum()) <= SIGMAS * spread + 1e-9


CHAINS = [
    ("D0", channel("B+", "D", "mu")),
    ("D+", channel("B0", "D", "e")),
    ("D*+", channel("B0", "D*", "mu", soft="charged_pion")),
    ("D*+", channel("B0", "D*", "e", soft="neutral_pion")),
    ("D*0", channel("B+", "D*", "mu", soft="neutral_pion")),
    ("D*0", channel("B+", "D*", "e", soft="photon")),
    ("D0", channel("B+", "D", "tau", tau_to="e")),
    ("D*+", channel("B0", "D*", "tau", tau_to="mu", soft="charged_pion")),
    ("D*0", channel("B+", "D2*(2460)", "mu", soft="neutral_pion", bachelor="neutral")),
]


@pytest.mark.parametrize(("charm", "chain"), CHAINS, ids=[chain.name for _, chain in CHAINS])
def test_faultless_detector_gives_the_truth(charm: str, chain: Channel) -> None:
    """Nothing lost, nothing smeared: every decay in its category, observables those of the four-momenta in the B frame,
    and a missing mass of zero where one neutrino is all that is missing."""
    truth, seen = recorded(chain, bench(**PERFECT), 4000)
    assert len(seen["mm2"]) == 4000
    assert set(seen["category"]) == {category_code(charm, chain.seen_lepton)}
    parent = vector.obj(px=0.0, py=0.0, pz=0.0, E=chain.decay.m_parent)
    lepton, hadron = vectors(truth, "lepton"), vectors(truth, "D")
    if chain.soft != "none":
        hadron = hadron + vectors(truth, "soft")
    np.testing.assert_allclose(seen["q2"], (parent - hadron).mass2, atol=1e-8)
    np.testing.assert_allclose(seen["mm2"], (parent - hadron - lepton).mass2, atol=1e-8)
    np.testing.assert_allclose(seen["el"], lepton.E, atol=1e-9)
    if chain.bachelor == "none":
        np.testing.assert_allclose(seen["q2"], truth["q2"], atol=1e-8)
    if chain.lepton != "tau" and chain.bachelor == "none":
        np.testing.assert_allclose(seen["mm2"], 0.0, atol=1e-8)
    known = MASS[charm] - chain.m_ground if "*" in charm else 0.0
    np.testing.assert_allclose(seen["delta_m"], known, atol=1e-9)


@pytest.mark.parametrize("scenario", [NOMINAL, Scenario(1.3, 0.98, 1.0)])
@pytest.mark.parametrize(("charm", "chain"), CHAINS[2:6:2], ids=["charged", "neutral"])
def test_observables_of_measured_momenta(charm: str, chain: Channel, scenario: Scenario) -> None:
    """Brute force with the library's four-vectors, from what a real detector measured."""
    made = bench(detector__soft_pion__random={"charged": 0.0, "neutral": 0.0, "photon": 0.0})
    beams = made.detector.beams
    compared = 0
    for k in range(8):
        _, y, n = measured(plan(chain), made, STREAM, k * LANES)
        reconstruct(y, kernel_chain(chain), beams, scenario, OPEN)
        category = values(y, row.CATEGORY)[:n]
        pick = np.flatnonzero(category == category_code(charm, chain.seen_lepton))

        def three(first: int, factor: float, mass: float, pick: np.ndarray = pick, y: np.ndarray = y) -> Any:
            p = factor * values(y, first, first + LANES, first + 2 * LANES)[:, pick]
            return vector.array({"px": p[0], "py": p[1], "pz": p[2], "mass": np.full(len(pick), mass)})

        scale = scenario.momentum
        d = three(row.MEASURED_D_PX, scale, chain.m_ground)
        soft_scale = scale if chain.soft == "charged_pion" else 1.0
        soft = three(row.MEASURED_SOFT_PX, soft_scale, chain.m_soft)
        dst = (d + soft).to_pxpypz()
        hadron = vector.array({"px": dst.px, "py": dst.py, "pz": dst.pz, "mass": np.full(len(pick), MASS[charm])})
        lepton = three(row.MEASURED_LEPTON_PX, scale, MASS[chain.seen_lepton])
        tag = values(y, row.TAG_PX, row.TAG_PY, row.TAG_PZ) + scenario.tag_width * values(
            y, row.TAG_SHIFT_X, row.TAG_SHIFT_Y, row.TAG_SHIFT_Z
        )
        half = np.full(len(pick), 0.5 * beams.energy)
        in_cm = vector.array({"px": tag[0, pick], "py": tag[1, pick], "pz": tag[2, pick], "E": half})
        parent = in_cm.boostZ(beta=beams.beta)
        for first, expected in (
            (row.DELTA_M, (d + soft).mass - chain.m_ground),
            (row.Q2_MEASURED, (parent - hadron).mass2),
            (row.MM2, (parent - hadron - lepton).mass2),
            (row.EL, lepton.boostCM_of(parent).E),
            (row.P_LEPTON, lepton.p),
            (row.P_CHARM, hadron.p),
        ):
            np.testing.assert_allclose(values(y, first)[pick], expected, rtol=1e-9, atol=1e-9)
        compared += len(pick)
    assert compared > 200


def test_missing_mass_resolution_follows_from_the_tag() -> None:
    """With the tag alone smeared by σ on each component, mm2 = (E² − |p_ν + δ|²) − ...: for a neutrino of momentum p in
    the centre-of-mass frame it is −2 p·δ − δ², with mean −3σ² and variance 4σ²⟨p²⟩ + 6σ⁴ (Gaussian moments)."""
    sigma = 0.03
    made = bench(**(PERFECT | {"detector__tag__momentum_resolution": sigma}))
    chain = channel("B+", "D", "mu")
    truth, seen = recorded(chain, made, 40_000)
    # A massless neutrino of energy E* in the B frame has energy γ(E* + β·p*) in the centre-of-mass frame; the B flies
    # independently of its decay, with sin² of the polar angle but an isotropic decay: ⟨p²⟩ = E*² γ² (1 + β²/3).
    energy = chain.decay.m_parent - truth["D_E"] - truth["lepton_E"]
    gamma = 0.5 * made.detector.beams.energy / chain.decay.m_parent
    square = (energy**2).mean() * (gamma**2 + (gamma**2 - 1.0) / 3.0)
    variance = 4.0 * sigma**2 * square + 6.0 * sigma**4
    n = len(seen["mm2"])
    assert abs(seen["mm2"].mean() + 3.0 * sigma**2) < SIGMAS * np.sqrt(variance / n)
    kurtosis = ((seen["mm2"] - seen["mm2"].mean()) ** 4).mean() / variance**2
    assert abs(seen["mm2"].var() / variance - 1.0) < SIGMAS * np.sqrt((kurtosis - 1.0) / n)


def test_a_wider_tag_is_the_same_events_wider() -> None:
    """The shifted scenario is what another detector gives from the same random numbers."""
    chain = channel("B+", "D", "mu")
    _, scenario = recorded(chain, bench(), 3000, Scenario(1.25, 1.0, 1.0))
    wide = bench(detector__tag__momentum_resolution=1.25 * 0.022, detector__tag__wrong_momentum_resolution=1.25 * 0.16)
    _, other = recorded(chain, wide, 3000)
    for name in scenario:
        np.testing.assert_allclose(scenario[name], other[name], rtol=1e-9, atol=1e-9)


def test_momentum_scale_acts_on_charged_tracks_alone() -> None:
    """A lepton of a D0 scales exactly; delta_m of a neutral pion feels the D alone."""
    chain = channel("B+", "D*", "mu", soft="neutral_pion")
    made = bench(**PERFECT)
    _, plain = recorded(chain, made, 2000)
    truth, shifted = recorded(chain, made, 2000, Scenario(1.0, 1.01, 1.0))
    np.testing.assert_allclose(shifted["p_lepton"], 1.01 * plain["p_lepton"], rtol=1e-12)
    assert len(truth["q2"]) == 2000
    # First order: δ(m²) = 2 ε p_D·(E_soft v_D − p_soft) in the laboratory; its size is a few MeV at most.
    assert 1e-5 < np.abs(shifted["delta_m"] - plain["delta_m"]).max() < 5e-3


def test_scaled_residual_energy_is_the_same_events_with_more_left_over() -> None:
    """The shifted scenario is what a noisier calorimeter gives from the same random numbers (beside a D0 without a soft
    particle noise and wrong tags are all there is); with lost soft pions e_res scales, and nothing else moves."""
    chain = channel("B+", "D", "mu")
    _, scenario = recorded(chain, bench(), 3000, Scenario(1.0, 1.0, 1.25))
    residual = study().detector.residual_energy
    noisy = bench(
        detector__residual_energy__noise_mean=1.25 * residual.noise_mean,
        detector__residual_energy__wrong_tag_mean=1.25 * residual.wrong_tag_mean,
    )
    _, other = recorded(chain, noisy, 3000)
    for name in scenario:
        np.testing.assert_allclose(scenario[name], other[name], rtol=1e-9, atol=1e-12)
    star = channel("B+", "D*", "mu", soft="neutral_pion")
    _, plain = recorded(star, bench(), 3000)
    _, scaled = recorded(star, bench(), 3000, Scenario(1.0, 1.0, 1.25))
    np.testing.assert_allclose(scaled.pop("e_res"), 1.25 * plain.pop("e_res"), rtol=1e-12)
    for name in plain:
        np.testing.assert_array_equal(scaled[name], plain[name])


# --- categories -----------------------------------------------------------------------------------------------------


def test_lost_soft_pions_feed_down() -> None:
    """D*0 → D0 π0: found with the efficiency at its laboratory momentum, else a D0. The laboratory momentum averages
    over the flight of the B: the share found is the mean efficiency of an independent sample with `vector`."""
    curve = {"momentum": [0.05, 0.3], "value": [0.1, 0.9]}
    made = bench(**(PERFECT | {"detector__soft_pion": PERFECT["detector__soft_pion"] | {"neutral": curve}}))
    chain = channel("B+", "D*", "mu", soft="neutral_pion")
    truth, seen = recorded(chain, made, 30_000)
    assert len(seen["mm2"]) == 30_000
    generator = np.random.default_rng(SEED)
    n = len(seen["mm2"])
    # sin² of the polar angle by rejection from the square
    cosine = generator.uniform(-1.0, 1.0, 4 * n)
    cosine = cosine[generator.uniform(size=4 * n) < 1.0 - cosine**2][:n]
    azimuth = generator.uniform(0.0, 2.0 * np.pi, n)
    sine = np.sqrt(1.0 - cosine**2)
    beta = np.sqrt(1.0 - (2.0 * chain.decay.m_parent / made.detector.beams.energy) ** 2)
    flight = vector.array(
        {"px": beta * sine * np.cos(azimuth), "py": beta * sine * np.sin(azimuth), "pz": beta * cosine}
    )
    soft = vectors(truth, "soft").boost_beta3(flight).boostZ(beta=made.detector.beams.beta)
    chances = np.interp(soft.p, curve["momentum"], curve["value"])
    found = np.isin(seen["category"], list(codes("D*0")))
    # Both samples fluctuate: binomial, and the spread of the chances.
    spread = np.sqrt(n * (chances.mean() * (1.0 - chances.mean()) + chances.var()))
    assert abs(found.sum() - chances.sum()) < SIGMAS * spread
    assert set(seen["category"]) == codes("D*0") & {category_code("D*0", "mu")} | {category_code("D0", "mu")}
    # What is lost has the mass missing that it carries: never found ones keep their energy or leave it.
    lost = ~found
    assert np.all(seen["delta_m"][lost] == 0.0)


def test_random_soft_particles_feed_up() -> None:
    """B → D0 μ ν: a random candidate in 12% + 10%, evenly over 0.1351 to 0.18; those within the window make a D*0."""
    random = {"charged": 0.03, "neutral": 0.12, "photon": 0.10}
    changes = PERFECT | {
        "detector__soft_pion": PERFECT["detector__soft_pion"] | {"random": random},
        "selection": {"delta_m": {"min": 0.138, "max": 0.147}},
    }
    _, seen = recorded(channel("B+", "D", "mu"), bench(**changes), 40_000)
    raised = np.isin(seen["category"], list(codes("D*0")))
    expect_share(raised, (0.12 + 0.10) * (0.147 - 0.138) / (0.18 - 0.1351))
    assert np.all((seen["delta_m"][raised] >= 0.138) & (seen["delta_m"][raised] < 0.147))
    assert len(seen["mm2"]) == 40_000
    # The soft particle takes momentum from nothing: m(D soft) is what was drawn, so q2 falls as energy is added.
    truth, _ = recorded(channel("B+", "D", "mu"), bench(**PERFECT), 40_000)
    assert seen["q2"][raised].mean() < truth["q2"].mean()


def test_the_candidate_nearest_to_the_known_mass_difference_wins() -> None:
    """True pion found exactly, random candidate always there: with no resolution the true one is always nearest."""
    random = {"charged": 1.0, "neutral": 1.0, "photon": 0.0}
    changes = PERFECT | {"detector__soft_pion": PERFECT["detector__soft_pion"] | {"random": random}}
    chain = channel("B0", "D*", "mu", soft="charged_pion")
    truth, seen = recorded(chain, bench(**changes), 3000)
    assert set(seen["category"]) == {category_code("D*+", "mu")}
    np.testing.assert_allclose(seen["delta_m"], MASS["D*+"] - MASS["D0"], atol=1e-9)
    np.testing.assert_allclose(seen["q2"], truth["q2"], atol=1e-8)


def test_candidate_outside_the_window_goes_on_as_a_ground_state() -> None:
    changes = PERFECT | {"selection": {"delta_m": {"min": 0.15}}}
    _, seen = recorded(channel("B+", "D*", "mu", soft="neutral_pion"), bench(**changes), 1000)
    assert set(seen["category"]) == {category_code("D0", "mu")}
    assert np.all(seen["e_res"] > 0.0)  # the pion that was found is left over


def test_charges_must_balance() -> None:
    """A D*- whose slow pion is lost is a D0 beside a neutral tag: no candidate, but for tags of the wrong charge."""
    changes = PERFECT | {"detector__soft_pion": PERFECT["detector__soft_pion"] | {"charged": 0.0}}
    chain = channel("B0", "D*", "mu", soft="charged_pion")
    assert len(recorded(chain, bench(**changes), 2000)[1]["mm2"]) == 0
    wrong = changes | {"detector__tag__wrong_fraction": 0.4, "detector__tag__wrong_charge_fraction": 0.5}
    _, seen = recorded(chain, bench(**wrong), 20_000)
    assert set(seen["category"]) == {category_code("D0", "mu")}
    assert abs(len(seen["mm2"]) - 0.2 * 20_000) < SIGMAS * np.sqrt(20_000 * 0.2 * 0.8)
    # A slow pion that is found, but does not fit the tag, is a charged particle too many.
    _, seen = recorded(chain, bench(**(wrong | {"detector__soft_pion": PERFECT["detector__soft_pion"]})), 20_000)
    assert set(seen["category"]) == {category_code("D*+", "mu")}
    assert abs(len(seen["mm2"]) - 0.8 * 20_000) < SIGMAS * np.sqrt(20_000 * 0.2 * 0.8)


def test_a_charged_pion_left_over_vetoes() -> None:
    """B+ → D** with a charged pion and a D*+ that loses its own: the charges balance, so only the seen track tells."""
    seen_share = 0.3
    changes = PERFECT | {
        "detector__soft_pion": PERFECT["detector__soft_pion"] | {"charged": 0.0},
        "detector__tracks": PERFECT["detector__tracks"] | {"efficiency": {"momentum": [0.0], "value": [1.0]}},
    }
    chain = channel("B+", "D1(2420)", "mu", soft="charged_pion", bachelor="charged")
    assert len(recorded(chain, bench(**changes), 2000)[1]["mm2"]) == 0
    changes["detector__tracks"] = changes["detector__tracks"] | {"efficiency": 1.0 - seen_share}
    _, seen = recorded(chain, bench(**changes), 40_000)
    chance = (1.0 - seen_share) ** 3 * seen_share  # kaon, pion and lepton seen, the other pion not
    assert abs(len(seen["mm2"]) - 40_000 * chance) < SIGMAS * np.sqrt(40_000 * chance)


def test_leptons_change_their_names() -> None:
    """1% of the muons called electrons end in the electron category, with the electron's mass."""
    changes = PERFECT | {"detector__lepton_id": {"e": 1.0, "mu": 0.5, "e_as_mu": 0.0, "mu_as_e": 0.01}}
    truth, seen = recorded(channel("B+", "D", "mu"), bench(**changes), 40_000)
    electrons = seen["category"] == category_code("D0", "e")
    assert abs(electrons.sum() - 400) < SIGMAS * np.sqrt(400)
    assert abs(len(electrons) - 0.51 * 40_000) < SIGMAS * np.sqrt(40_000 * 0.51 * 0.49)
    assert np.all(seen["el"][electrons] < truth["lepton_E"][electrons])
