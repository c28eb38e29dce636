"""Quadratic templates: bilinear pieces of events against the weights of `variation_weights` (which are checked against
products of Dirac matrices), templates against direct generation at other couplings, mean weights against rates.

Statistical tests fail by chance with the probability named at each; SEMITAU_TEST_SEED changes the seed.
"""

from __future__ import annotations

import os
from dataclasses import replace
from functools import cache
from typing import Any

import numpy as np
import pytest
from scipy.stats import chi2
from semitau import gen
from semitau.core.quadratic import contents_at, monomials, reweightings, templates_at
from semitau.core.streams import stream_key
from semitau.core.templates import TemplateSet
from semitau.gen.block import LANES, new_block
from semitau.gen.decays.chains import Channel, chains_of
from semitau.gen.decays.coefficients import with_values
from semitau.gen.study_file.study import StudyConfig
from semitau.gen.templates.build import build_templates
from semitau.gen.templates.component_plan import predicted_ratio
from semitau.gen.truth.bilinear_pieces import bilinear_pieces, piece_table
from semitau.gen.truth.channel_table import channel_table
from semitau.gen.truth.drawing import draw_decays
from semitau.gen.truth.variation_weights import variation_table, variation_weights

from .marlow_study import TEXT, study

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))
ALL = ("VL", "VR", "SL", "SR", "T", "Im_VL", "Im_VR", "Im_SL", "Im_SR", "Im_T")
DRAWN: tuple[dict[str, complex], ...] = ({}, {"SR": 0.3 + 0.1j, "T": 0.05j, "VL": 0.1})


def channel(charm: str, tau_to: str, soft: str, wilson: dict[str, complex]) -> Channel:
    decay = gen.Decay("B0", charm, "tau", wilson=wilson)
    return next(chain for chain in chains_of(decay, (tau_to,)) if chain.soft == soft)


CHAINS = [
    ("D-", "mu", "none"),
    ("D-", "pi", "none"),
    ("D*-", "e", "charged_pion"),
    ("D*-", "pi", "neutral_pion"),
    ("D*-", "mu", "photon"),
    ("D2*(2460)-", "mu", "none"),
    ("D2*(2460)-", "mu", "charged_pion"),
    ("D2*(2460)-", "pi", "neutral_pion"),
    ("D0*(2300)-", "mu", "none"),
    ("D1'(2430)-", "mu", "charged_pion"),
    ("D1(2420)-", "mu", "charged_pion"),
]


@pytest.mark.parametrize("drawn", DRAWN, ids=["SM", "beyond"])
@pytest.mark.parametrize("chain", CHAINS, ids=" ".join)
def test_pieces_give_the_weight_at_any_point(chain: tuple[str, str, str], drawn: dict[str, complex]) -> None:
    """All ten parts free. Exact but for rounding where the density that events are drawn from nearly vanishes."""
    at_work = channel(*chain, drawn)
    table, taken = piece_table(at_work, ALL)
    assert (table.operators, table.pieces) == ((3, 9) if chain[0] in ("D-", "D0*(2300)-") else (4, 16))
    x = new_block()
    draw_decays(x, channel_table(at_work), stream_key(SEED, "pieces"), np.uint64(0))
    pieces, weights = np.zeros((LANES, table.pieces)), np.zeros((LANES, 1))
    bilinear_pieces(x.copy(), table, pieces, LANES)
    rng = np.random.default_rng(SEED)
    for point in rng.uniform(-1.0, 1.0, (4, len(ALL))):
        couplings = with_values(at_work.decay.couplings, dict(zip(ALL, point.tolist(), strict=True)))
        target = replace(at_work.decay, wilson=couplings)
        variation_weights(x.copy(), variation_table(at_work, [target], shape_only=False), weights, LANES)
        found = pieces @ taken.contraction.T @ monomials(point)
        np.testing.assert_allclose(found, weights[:, 0], rtol=1e-9)


def test_only_what_is_asked_for_is_made() -> None:
    """Real coefficients need no imaginary parts, and one scalar goes with two operators: three pieces."""
    table, taken = piece_table(channel("D*-", "mu", "photon", {}), ("SR", "SL"))
    assert (table.operators, table.imaginary, table.pieces) == (2, 0, 3)
    assert taken.contraction.shape == (6, 3)
    table, _ = piece_table(channel("D*-", "mu", "photon", {}), ("SR", "T", "VL"))
    assert (table.operators, table.imaginary, table.pieces) == (3, 0, 6)


@pytest.mark.parametrize("charm", ["D-", "D*-", "D0*(2300)-"])
def test_mean_weight_is_the_rate_ratio(charm: str) -> None:
    """Over unweighted events of all of phase space. 5 standard deviations: 6e-7 for each of fifteen comparisons."""
    names = ("VR", "SR", "SL", "T", "Im_T")
    at_work = channel(charm, "mu", "charged_pion" if charm == "D*-" else "none", {})
    table, taken = piece_table(at_work, names)
    truth, blocks = channel_table(at_work), 200
    pieces = np.zeros((blocks * LANES, table.pieces))
    for b in range(blocks):
        x = new_block()
        draw_decays(x, truth, stream_key(SEED, "mean", charm), np.uint64(b * LANES))
        bilinear_pieces(x, table, pieces[b * LANES : (b + 1) * LANES], LANES)
    plain = gen.observables(at_work.decay).rate
    for point in np.vstack([np.zeros(5), np.random.default_rng(SEED).uniform(-0.5, 0.5, (4, 5))]):
        weights = pieces @ taken.contraction.T @ monomials(point)
        couplings = with_values(at_work.decay.couplings, dict(zip(names, point.tolist(), strict=True)))
        expected = gen.observables(replace(at_work.decay, wilson=couplings)).rate / plain
        assert abs(weights.mean() - expected) <= 5.0 * weights.std() / np.sqrt(weights.size) + 1e-9


FLOATED = ("SR", "SL", "T", "Im_T", "VR")
POINTS: dict[str, dict[str, float]] = {
    "SR": {"SR": 0.4},
    "SL": {"SL": -0.9},
    "T": {"T": 0.15},
    "VR": {"VR": 0.25},
    "all": {"SR": 0.2, "SL": 0.3, "T": -0.08, "Im_T": 0.12, "VR": -0.1},
}


def tau_study(seed: int, **changes: Any) -> StudyConfig:
    """Many decays with a tau, few of the rest, no variations."""
    import tomllib

    modes = tomllib.loads(TEXT)["mode"]
    events = {"D_tau": 150_000, "Dst_tau": 250_000}
    modes = [
        mode | {"events": events.get(mode["component"], 3_000)} for mode in modes if mode["component"] != "Dss_light"
    ]
    modes.append({"component": "Dss_tau", "charm": ["D1(2420)", "D2*(2460)"], "leptons": ["tau"], "events": 100_000})
    return study(study__seed=seed, mode=modes, variation=[], **changes)


@cache
def quadratic_set() -> TemplateSet:
    return build_templates(tau_study(SEED, quadratic={"coefficients": list(FLOATED)})).templates


@pytest.mark.parametrize("name", POINTS)
def test_direct_generation_at_five_points(name: str) -> None:
    """Other events with these couplings from the start. Each of the three components gives a χ² over its bins with more
    than 30 events on both sides, and one for the category sums; each fails by chance with 1e-5 (3e-4 in all)."""
    point = POINTS[name]
    couplings = {"SR": point.get("SR", 0.0), "SL": point.get("SL", 0.0), "VR": point.get("VR", 0.0)}
    tensor = [point.get("T", 0.0), point.get("Im_T", 0.0)]
    direct = build_templates(tau_study(SEED + 1, wilson={**couplings, "T": tensor})).templates
    moved = templates_at(quadratic_set(), point)
    for old, new in zip(moved.parameters, direct.parameters, strict=True):
        assert old.injected == pytest.approx(new.injected, rel=1e-9)
    share = {(r.category, r.component): r for r in reweightings(quadratic_set(), point)}
    for component in ("D_tau", "Dst_tau", "Dss_tau"):
        bins, sums = [], []
        for category in moved.categories:
            key = category.name, component
            if key not in moved.templates or key not in direct.templates:
                continue
            a, b = moved.templates[key], direct.templates[key]
            plain = quadratic_set().templates[key]
            events = np.where(plain.variance > 0, plain.nominal**2 / np.where(plain.variance > 0, plain.variance, 1), 0)
            enough = (events > 30) & (b.nominal > 0) & (b.nominal**2 > 30 * b.variance)
            bins.append(((a.nominal - b.nominal) ** 2 / (a.variance + b.variance + 1e-300))[enough])
            of_sum = a.nominal.sum() ** 2 / share[key].effective + b.variance.sum()
            sums.append((a.nominal.sum() - b.nominal.sum()) ** 2 / of_sum)
        for terms in (np.concatenate(bins), np.array(sums)):
            assert terms.size >= 4
            assert chi2.sf(terms.sum(), terms.size) > 1e-5, (component, terms.sum(), terms.size)


def test_pieces_stand_where_they_belong() -> None:
    """Modes with a tau follow the coefficients, others do not; at home the pieces are the nominal templates."""
    for (_, component), template in quadratic_set().templates.items():
        assert bool(template.quadratic) == (component in ("D_tau", "Dst_tau", "Dss_tau"))
        home = contents_at(template, dict.fromkeys(FLOATED, 0.0))
        np.testing.assert_allclose(home, template.nominal, rtol=1e-12, atol=1e-12 * template.nominal.max())
    for found in reweightings(quadratic_set()):
        assert found.share == pytest.approx(1.0, abs=1e-9)


def test_ratios_follow_the_rates() -> None:
    """Injected by hand, R(c) keeps the theory's dependence on c."""
    made = study(quadratic={"coefficients": ["SR", "T"]}, fit={"injected": {"R_D": 0.4}})
    from semitau.gen.templates.fit_components import components_and_parameters

    _, parameters = components_and_parameters(made)
    ratio = next(parameter for parameter in parameters if parameter.name == "R_D")
    values = monomials([0.3, -0.1])
    there = sum(piece * value for (_, _, piece), value in zip(ratio.rate, values.tolist(), strict=True))
    couplings = with_values(made.wilson.couplings, {"SR": 0.3, "T": -0.1})
    growth = predicted_ratio(made, "R_D", ("B+", "B0"), couplings) / predicted_ratio(made, "R_D", ("B+", "B0"))
    assert ratio.injected == 0.4
    assert there == pytest.approx(0.4 * growth, rel=1e-10)


@pytest.mark.parametrize("workers", [1, 2])
def test_the_same_bits_for_any_number_of_workers(workers: int) -> None:
    again = build_templates(tau_study(SEED, quadratic={"coefficients": list(FLOATED)}), workers=workers).templates
    for key, template in quadratic_set().templates.items():
        other = again.templates[key]
        assert template.quadratic.keys() == other.quadratic.keys()
        assert all(piece.tobytes() == other.quadratic[pair].tobytes() for pair, piece in template.quadratic.items())
        if template.moments is not None:
            assert other.moments is not None
            assert template.moments.tobytes() == other.moments.tobytes()


def test_effective_events_of_variations() -> None:
    """Against Σw and Σw² of a variation by hand: a constant factor in half of the categories."""
    made = study(
        variation=[
            {"name": "muon_id", "kind": "lepton_identification", "lepton": "mu", "relative": 0.5},
            {"name": "Dst_R0", "kind": "form_factor", "set": "Dst", "parameter": "R0(1)", "shift": 3.0},
        ],
        detector__lepton_id={"e": 0.6, "mu": 0.6, "e_as_mu": 0.0, "mu_as_e": 0.0},
    )
    build = build_templates(made)
    found = {(r.component, r.what): r for r in build.reweightings}
    nominal, squares = [], []
    for (category, component), template in build.templates.templates.items():
        if component == "D_tau":
            nominal.append(template.nominal.sum() * (1.5 if category.endswith("mu") else 1.0))
            squares.append(template.variance.sum() * (2.25 if category.endswith("mu") else 1.0))
    there = found["D_tau", "muon_id +"]
    assert there.effective == pytest.approx(sum(nominal) ** 2 / sum(squares), rel=1e-9)
    assert there.effective < there.events
    # a shift of R0 by many errors moves the tau decays and hardly the light ones (A0 goes with the lepton mass)
    assert found["Dst_tau", "Dst_R0 +"].share < 0.95
    assert found["Dst_light", "Dst_R0 +"].share > 0.999
