"""One model fitted to what another expects: closed forms, another minimiser, brute force over the templates."""

from __future__ import annotations

from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from scipy.optimize import brentq
from scipy.stats import binomtest, norm
from semitau.core.errors import InputError
from semitau.core.templates import (
    Component,
    Floats,
    Nuisance,
    ScaleParameter,
    Template,
    TemplateSet,
)
from semitau.fit import Model, budget, maximise, run_toys
from semitau.fit.toys.toys import Expectation
from semitau.fit.uncertainty.covering import covering_error, judge_shift, known_coverings
from semitau.fit.uncertainty.fit_quality import quality
from semitau.fit.uncertainty.foreign_fit import foreign_fit, median_p_value, shift_errors

from . import problems
from .reference import Plain
from .test_newton import by_minuit

X = (np.arange(12) + 0.5) / 12


def ratio_problem(scale: float, *, tilt: float = 0.0, variance: float = 0.0, ratio: float = 0.3) -> TemplateSet:
    """A ratio, a free and a constrained background and a nuisance in twelve bins.

    tilt : of the shape of the signal, the change that an alternative makes. variance : relative, of each template.
    """
    signal = scale * ratio / 0.3 * np.exp(-0.5 * ((X - 0.5) / 0.15) ** 2) * (1 + tilt * (X - 0.2))
    shapes = {"signal": signal, "wide": scale * np.exp(-2 * X), "flat": scale * (0.3 + 0.2 * X)}
    scales = {"signal": ("R_D",), "wide": ("yield_wide",), "flat": ("yield_flat",)}
    bent = 0.05 * (X - 0.5)
    return TemplateSet(
        categories=(problems.axes("only", 12),),
        components=tuple(Component(name, name, "background", scales[name]) for name in shapes),
        parameters=(
            ScaleParameter("R_D", "R(D)", "ratio", ratio),
            ScaleParameter("yield_wide", "wide", "yield", 1.0),
            ScaleParameter("yield_flat", "flat", "yield", 1.0, 0.1),
        ),
        nuisances=(Nuisance("slope", "slope", "shapes"),),
        templates={
            ("only", name): Template(
                shape,
                variance * shape**2,
                {"slope": shape * (1 + bent)} if name == "wide" else {},
                {"slope": shape * (1 - bent)} if name == "wide" else {},
            )
            for name, shape in shapes.items()
        },
    )


def changed(templates: TemplateSet, size: float = 0.1) -> TemplateSet:
    """The same with the templates of one component bent."""

    def bent(values: Floats) -> Floats:
        x = (np.arange(values.size) + 0.5).reshape(values.shape) / values.size
        return values * (1 + size * (x - 0.3))

    new = {
        place: replace(t, nominal=bent(t.nominal), plus={k: bent(v) for k, v in t.plus.items()},
                       minus={k: bent(v) for k, v in t.minus.items()})
        if place[1] == "Dst_light" else t
        for place, t in templates.templates.items()
    }  # fmt: skip
    return replace(templates, templates=new)


@pytest.mark.parametrize("variance", [0.0, 1e-9])
def test_linear_shift_is_weighted_least_squares(variance: float) -> None:
    """(JᵀV⁻¹J)⁻¹JᵀV⁻¹(μ' - μ), with a row of its own for each auxiliary measurement, to second order in the change."""
    ours, theirs = (ratio_problem(1e9, tilt=tilt, variance=variance) for tilt in (0.0, 1e-4))
    model, other = Model(ours), Model(theirs)
    part = {name: template.nominal for (_, name), template in ours.templates.items()}
    jacobian = np.stack([part["signal"] / 0.3, part["wide"], part["flat"], part["wide"] * 0.05 * (X - 0.5)], axis=1)
    mu, new = model.expected_counts(), other.expected_counts()
    weight = 1.0 / (mu + sum(variance * nominal**2 for nominal in part.values()))
    information = jacobian.T @ (jacobian * weight[:, None]) + np.diag([0.0, 0.0, 1 / 0.1**2, 1.0])
    expected = np.linalg.solve(information, jacobian.T @ (weight * (new - mu)))
    fit = foreign_fit(model, Expectation.of(other))
    assert fit.result.valid
    assert abs(expected[0]) > 1e-6
    assert fit.shifts["R_D"] == pytest.approx(expected[0], rel=2e-3)
    assert fit.errors["R_D"] == pytest.approx(np.sqrt(np.linalg.inv(information)[0, 0]), rel=1e-3)
    left = new - mu - jacobian @ expected
    pulls = expected[2:] * [1 / 0.1, 1.0]
    assert fit.result.goodness.statistic == pytest.approx(weight @ left**2 + pulls @ pulls, rel=5e-3)


def test_against_another_minimiser() -> None:
    """MIGRAD of iminuit on the likelihood written down a second time; both to 2e-3 of the error."""
    ours, theirs = problems.small(), changed(problems.small())
    model, other = Model(ours), Model(theirs)
    plain, truth = Plain(ours), Plain(theirs)
    counts = truth.expected(truth.start).real
    fit = foreign_fit(model, Expectation.of(other))
    minuit = by_minuit(plain, counts, plain.start, fit.result.errors)
    for name in ("R_D", "R_Dst"):
        theirs_shift = minuit.values[name] - truth.injected[name]
        assert fit.shifts[name] == pytest.approx(theirs_shift, abs=2e-3 * fit.errors[name])
        assert abs(fit.shifts[name]) > 0.02 * fit.errors[name]


def test_right_model_has_no_shift() -> None:
    model = Model(problems.small())
    fit = foreign_fit(model, Expectation.of(model))
    assert fit.shifts == pytest.approx({"R_D": 0.0, "R_Dst": 0.0}, abs=1e-8)
    assert fit.p_value == pytest.approx(0.5, abs=1e-9)
    assert fit.outside == 0.0
    assert shift_errors(model, Expectation.of(model), fit, np.zeros((4, model.bins))) == {"R_D": 0.0, "R_Dst": 0.0}


def test_another_injected_ratio_is_no_shift() -> None:
    """The model is linear in the ratio, so it finds any other value of it, however large the step."""
    ours, theirs = ratio_problem(200.0), ratio_problem(200.0, ratio=0.42)
    fit = foreign_fit(Model(ours), Expectation.of(Model(theirs)))
    assert fit.result.value("R_D") == pytest.approx(0.42, abs=1e-7)
    assert fit.shifts["R_D"] == pytest.approx(0.0, abs=1e-7)


def test_exchange_changes_the_sign() -> None:
    """Made with i, fitted with j is the opposite of made with j, fitted with i, up to the second order."""
    left = []
    for size in (0.08, 0.04, 0.02):
        model, other = Model(problems.small()), Model(changed(problems.small(), size))
        there, back = foreign_fit(model, Expectation.of(other)), foreign_fit(other, Expectation.of(model))
        left.append(abs(there.shifts["R_Dst"] + back.shifts["R_Dst"]))
        assert left[-1] < 0.3 * abs(there.shifts["R_Dst"])
    for before, after in pairwise(left):
        assert after == pytest.approx(before / 4, rel=0.2)


def test_toys_of_the_model_itself_are_the_same_toys() -> None:
    model = Model(problems.small())
    plain, foreign = run_toys(model, 40, 5), run_toys(model, 40, 5, expectation=Expectation.of(model))
    np.testing.assert_array_equal(plain.values, foreign.values)
    assert foreign.foreign
    assert not plain.foreign
    with pytest.raises(InputError, match="drawn from another model"):
        quality(model, model.expected_data(), maximise(model, model.expected_data()), foreign)


def test_pulls_and_coverage_of_a_shifted_gaussian() -> None:
    """Pulls with mean δ and width 1 cover Φ(1 - δ) - Φ(-1 - δ). Each of five checks fails once in 1e5 seeds.

    The counts are large: 4e5 events in each bin, so that the Gaussian is one to 1e-3.
    """
    model, other = Model(ratio_problem(4e5)), Model(ratio_problem(4e5, tilt=0.008))
    expectation = Expectation.of(other)
    fit = foreign_fit(model, expectation)
    delta = fit.shifts["R_D"] / fit.errors["R_D"]
    assert 0.5 < abs(delta) < 2.0
    toys = run_toys(model, 3000, problems.SEED, expectation=expectation)
    summary = toys.summary("R_D")
    assert abs(summary.pull_mean - delta) < 4.4 * summary.pull_mean_error + 2e-3
    assert abs(summary.pull_width - 1.0) < 4.4 * summary.pull_width_error + 2e-3
    for part in summary.coverage:
        exact = norm.cdf(part.half_width - delta) - norm.cdf(-part.half_width - delta)
        assert binomtest(part.inside, part.number, exact).pvalue > 1e-5
    # The median of these toys is as far out among toys of the model itself as the p-value says.
    own = run_toys(model, 3000, problems.SEED + 1)
    share = own.share_above(float(np.median(toys.statistics[toys.valid])))
    assert fit.p_value is not None
    assert abs(share - fit.p_value) < 4.4 * np.sqrt(2 * 0.25 / 3000)


def test_true_values_are_those_of_the_maker() -> None:
    model, other = Model(ratio_problem(500.0)), Model(ratio_problem(500.0, ratio=0.36))
    toys = run_toys(model, 200, 3, expectation=Expectation.of(other))
    summary = toys.summary("R_D")
    assert summary.injected == 0.36
    assert abs(summary.bias) < 5 * summary.bias_error + 0.1 * summary.mean_error  # once in 1e6


@pytest.mark.parametrize("deviance", [0.3, 4.0, 25.0])
def test_median_p_value(deviance: float) -> None:
    """One degree of freedom: noncentral χ² is (z + √λ)² with normal z, so its median follows from the normal alone."""
    shift = np.sqrt(deviance)
    root = brentq(lambda r: norm.cdf(r - shift) - norm.cdf(-r - shift) - 0.5, 0.0, 20.0)
    assert median_p_value(deviance, 1) == pytest.approx(2 * norm.sf(root), rel=1e-6)
    assert median_p_value(0.0, 7) == pytest.approx(0.5)


def test_shift_error_is_the_spread_over_templates() -> None:
    """Brute force: 300 pairs of template sets from independent events, some of them shared by both.

    The spread of 300 is known to 4.1%, the error from 100 replicas to 7.1%: together 8.2%; off by 4.4 of that once in
    1e5 seeds.
    """
    rng = np.random.default_rng(problems.SEED)
    ours, theirs = changed(problems.small(), 0.0), changed(problems.small(), 0.25)
    counts = {place: template.nominal for place, template in ours.templates.items()}
    bends = {place: theirs.templates[place].nominal / nominal for place, nominal in counts.items()}

    def drawn() -> tuple[TemplateSet, TemplateSet]:
        """12.5 generated events for each expected one: relative variances as `small` has; the bend is a weight."""
        sides: tuple[dict[tuple[str, str], Template], ...] = ({}, {})
        for place, template in ours.templates.items():
            generated = rng.poisson(12.5 * counts[place]) / (12.5 * counts[place])
            moved = rng.poisson(40.0 * counts[place]) / (40.0 * counts[place])  # events that only the other has
            for side, factor in zip(sides, (1.0, bends[place] * moved), strict=True):
                side[place] = replace(
                    template,
                    nominal=template.nominal * generated * factor,
                    plus={k: v * generated * factor for k, v in template.plus.items()},
                    minus={k: v * generated * factor for k, v in template.minus.items()},
                )
        return replace(ours, templates=sides[0]), replace(ours, templates=sides[1])

    shifts = []
    for _ in range(300):
        mine, other = drawn()
        shifts.append(foreign_fit(Model(mine), Expectation.of(Model(other))).shifts)
    model, other = Model(ours), Expectation.of(Model(theirs))
    fit = foreign_fit(model, other)
    grown = model.expected_counts(fit.result.values) / model.expected_counts()
    noise = []
    for _ in range(100):
        mine, others = (Model(found).expected_counts() for found in drawn())
        noise.append(others - other.counts - grown * (mine - model.expected_counts()))
    errors = shift_errors(model, other, fit, np.array(noise))
    for name, error in errors.items():
        spread = np.std([found[name] for found in shifts], ddof=1)
        assert error == pytest.approx(spread, rel=4.4 * 0.082)


def test_bins_that_the_model_does_not_know() -> None:
    ours, theirs = ratio_problem(100.0), ratio_problem(100.0)
    hollow = {
        place: replace(
            t,
            nominal=np.where(X > 0.9, 0.0, t.nominal),
            plus={k: np.where(X > 0.9, 0.0, v) for k, v in t.plus.items()},
            minus={k: np.where(X > 0.9, 0.0, v) for k, v in t.minus.items()},
        )
        for place, t in ours.templates.items()
    }
    model = Model(replace(ours, templates=hollow))
    expectation = Expectation.of(Model(theirs))
    fit = foreign_fit(model, expectation)
    assert fit.outside == pytest.approx(expectation.counts[X > 0.9].sum())
    assert fit.shifts["R_D"] == pytest.approx(0.0, abs=1e-8)
    assert run_toys(model, 5, 1, expectation=expectation).valid.all()
    with pytest.raises(InputError, match=r"different bins \(got \(12,\), allowed \(21,\)\)"):
        foreign_fit(Model(problems.small()), expectation)
    with pytest.raises(InputError, match="different bins"):
        run_toys(Model(problems.small()), 5, 1, expectation=expectation)


def test_covering_error() -> None:
    """Parts chosen by group or by name add up in quadrature, each once."""
    model = Model(problems.small())
    split = budget(model, maximise(model, model.expected_data()))["R_Dst"]
    assert covering_error(model, split) == split.systematic
    assert covering_error(model, split, ["efficiency"]) == pytest.approx(split.rows["efficiency"])
    both = covering_error(model, split, ["efficiency", "slow_pion", "R0"])
    assert both == pytest.approx(np.hypot(split.rows["efficiency"], split.sources["R0"]))
    assert covering_error(model, split, ["nothing"]) == 0.0
    everything = list(known_coverings(model))
    assert everything == ["yields", "efficiency", "form factors", "yield_other", "slow_pion", "lepton_id", "R0"]
    assert covering_error(model, split, everything) == pytest.approx(split.systematic)


@pytest.mark.parametrize(
    ("shift", "shift_error", "covering", "word"),
    [
        (0.05, 0.0, 0.0, "negligible"),
        (-0.05, 0.02, 0.0, "negligible"),
        (0.05, 0.03, 0.0, "undecided"),  # 0.11 may not be negligible
        (0.05, 0.03, 0.2, "covered"),
        (-0.3, 0.04, 0.4, "covered"),
        (-0.3, 0.06, 0.4, "undecided"),
        (-0.5, 0.04, 0.4, "not covered"),
        (0.15, 0.02, 0.0, "not covered"),
        (0.15, 0.03, 0.0, "undecided"),  # 0.09 would be negligible
        (0.5, float("nan"), 0.4, "undecided"),
    ],
)
def test_words(shift: float, shift_error: float, covering: float, word: str) -> None:
    """Limits by hand for a whole error of 1 of which a tenth is negligible."""
    assert judge_shift(shift, shift_error, covering, 1.0, 0.1) == word
    assert judge_shift(2 * shift, 2 * shift_error, 2 * covering, 2.0, 0.1) == word
