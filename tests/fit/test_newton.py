"""The fit against iminuit and scipy on the same likelihood, and against closed forms."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from iminuit import Minuit
from scipy.optimize import minimize
from semitau.core.errors import InputError
from semitau.core.templates import Component, ScaleParameter, TemplateSet
from semitau.fit import Model, maximise
from semitau.fit.fitting.result import FitResult

from . import problems
from .reference import Array, Plain, complex_step

PROBLEMS = {
    "one bin": problems.one_bin(variance=30.0),
    "linear": problems.linear(100.0),
    "small": problems.small(),
    "exact templates": problems.small(variance=0.0),
    "sparse": problems.small(sparse=True),
}


def counts(model: Model, toy: int = 0) -> Array:
    return np.random.default_rng([problems.SEED, toy]).poisson(model.expected_counts()).astype(float)


def by_minuit(plain: Plain, n: Array, start: Array, errors: Array) -> Minuit:
    """MIGRAD and HESSE with numerical derivatives of the plain implementation."""
    minuit = Minuit(lambda x: plain.value(x, n).real, start, name=plain.names)
    minuit.errordef, minuit.strategy, minuit.tol = Minuit.LIKELIHOOD, 2, 1e-4
    minuit.errors = errors
    minuit.migrad(ncall=20000)
    minuit.hesse()
    return minuit


@pytest.mark.parametrize("toy", range(2))
@pytest.mark.parametrize("name", PROBLEMS)
def test_against_iminuit(name: str, toy: int) -> None:
    """Same likelihood: 1e-6 in -ln L, 1e-4 of the error in the values, errors to the accuracy of HESSE (1e-2)."""
    model, plain = Model(PROBLEMS[name]), Plain(PROBLEMS[name])
    n = counts(model, toy)
    ours = maximise(model, n)
    assert ours.valid, ours.reasons
    minuit = by_minuit(plain, n, model.start, ours.errors)
    assert ours.minus_log_likelihood == pytest.approx(minuit.fval, abs=1e-6)
    assert ours.minus_log_likelihood <= minuit.fval + 1e-9
    np.testing.assert_allclose(np.array(minuit.errors), ours.errors, rtol=1e-2)
    distance = np.abs(np.array(minuit.values) - ours.values) / ours.errors
    assert distance.max() < 2e-3  # √(2 × 1e-6): what 1e-6 in -ln L allows


@pytest.mark.parametrize("name", PROBLEMS)
def test_against_scipy(name: str) -> None:
    """BFGS with the complex-step gradient of the plain implementation: 1e-6 in -ln L and 1e-4 of the error."""
    model, plain = Model(PROBLEMS[name]), Plain(PROBLEMS[name])
    n = counts(model, 7)
    ours = maximise(model, n)
    scale = ours.errors

    def value(y: Array) -> float:
        return float(plain.value(plain.start + scale * y, n).real)

    def gradient(y: Array) -> Array:
        return scale * complex_step(lambda x: plain.value(x, n), plain.start + scale * y)

    found = minimize(value, np.zeros(scale.size), jac=gradient, method="BFGS", options={"gtol": 1e-7, "maxiter": 2000})
    assert ours.minus_log_likelihood == pytest.approx(found.fun, abs=1e-6)
    assert (np.abs(plain.start + scale * found.x - ours.values) / scale).max() < 1e-4


def test_template_factors_as_parameters_of_their_own() -> None:
    """The joint minimum over all parameters and one γ per bin, by scipy: profiling must not change it."""
    model, plain = Model(problems.small()), Plain(problems.small())
    n = counts(model, 3)
    ours = maximise(model, n)
    size = len(model.names)

    def value(y: Array) -> complex:
        return plain.full(y[:size], y[size:], n)

    start = np.concatenate([plain.start, np.ones(model.bins)])
    found = minimize(
        lambda y: float(value(y).real), start, jac=lambda y: complex_step(value, y), method="BFGS",
        options={"gtol": 1e-6, "maxiter": 5000},
    )  # fmt: skip
    assert ours.minus_log_likelihood == pytest.approx(found.fun, abs=1e-6)
    np.testing.assert_allclose((found.x[:size] - ours.values) / ours.errors, 0.0, atol=1e-4)


def test_one_bin_in_closed_form() -> None:
    """n = s R/R0 + b, so R = R0 (n - b)/s with error R0 √n/s; with template variance V at the same place √(n + V)."""
    for variance, n in ((0.0, 117.0), (0.0, 31.0), (25.0, 100.0)):
        result = maximise(Model(problems.one_bin(variance=variance)), np.array([n]))
        assert result.value("R_D") == pytest.approx(0.3 * (n - 60.0) / 40.0, rel=1e-9)
        assert result.error("R_D") == pytest.approx(0.3 * np.sqrt(n + variance) / 40.0, rel=1e-9)
        assert result.minus_log_likelihood == pytest.approx(0.0, abs=1e-12)


def test_gaussian_limit_is_weighted_least_squares() -> None:
    """With 1e10 events per bin the likelihood is a parabola: (AᵀWA)⁻¹AᵀWn of linear algebra, W = 1/n."""
    templates = problems.linear(1e10)
    model = Model(templates)
    n = np.random.default_rng(problems.SEED).poisson(model.expected_counts()).astype(float)
    result = maximise(model, n)
    design = np.stack([templates.templates["wide", name].nominal for name in "abc"], axis=1)
    covariance = np.linalg.inv(design.T @ (design / n[:, None]))
    values = covariance @ design.T @ np.ones(n.size)
    np.testing.assert_allclose((result.values - values) / result.errors, 0.0, atol=1e-3)
    np.testing.assert_allclose(result.covariance, covariance, rtol=1e-4)
    assert result.goodness.statistic == pytest.approx(np.sum((n - design @ values) ** 2 / n), rel=1e-4)


def test_expected_set_returns_what_went_in() -> None:
    model = Model(problems.real_size())
    truth = model.values({"R_D": 0.41, "R_Dst": 0.2, "n3": 0.7})
    result = maximise(model, model.expected_data(truth))
    assert result.valid
    np.testing.assert_allclose((result.values - truth) / result.errors, 0.0, atol=1e-5)
    assert result.goodness.statistic == pytest.approx(0.0, abs=1e-9)


def test_far_start() -> None:
    """The same minimum from starts several errors away in every parameter, ratios on both sides of zero."""
    model = Model(problems.small())
    n = counts(model, 1)
    near = maximise(model, n)
    rng = np.random.default_rng(problems.SEED)
    for _ in range(20):
        far = maximise(model, n, model.injected + 3.0 * near.errors * rng.normal(size=near.errors.size))
        assert far.valid, far.reasons
        np.testing.assert_allclose((far.values - near.values) / near.errors, 0.0, atol=1e-5)


def test_certificate() -> None:
    model = Model(problems.small())
    result = maximise(model, counts(model, 2))
    certificate = result.certificate
    assert certificate.distance < 1e-12
    assert certificate.gradient_norm < 2e-6
    assert min(certificate.eigenvalues) > 0
    assert sum(certificate.eigenvalues) == pytest.approx(len(model.names))  # trace of a matrix with unit diagonal
    assert certificate.flat_directions == ()
    assert certificate.protected_bins == 0
    assert certificate.steps < 12


def twins() -> TemplateSet:
    """`problems.small` with a second background of the same shape: only their sum can be fitted."""
    base = problems.small()
    other = next(parameter for parameter in base.parameters if parameter.name == "yield_other")
    free = replace(other, constraint=None)
    parameters = [p for p in base.parameters if p.name != "yield_other"]
    twin = ScaleParameter("yield_twin", "twin", "yield", 1.0)
    templates = dict(base.templates)
    templates |= {(c, "twin"): template for (c, name), template in base.templates.items() if name == "other"}
    return TemplateSet(
        base.categories,
        (*base.components, Component("twin", "twin", "background", ("yield_twin",))),
        (*parameters, free, twin),
        base.nuisances,
        templates,
    )


def test_degenerate_components_are_named() -> None:
    model = Model(twins())
    result = maximise(model, counts(model))
    assert not result.valid
    (direction,) = result.certificate.flat_directions
    assert set(direction) == {"yield_other", "yield_twin"}
    assert direction["yield_other"] == pytest.approx(-direction["yield_twin"], rel=1e-3)
    (reason,) = result.reasons
    assert "yield_other" in reason.where
    assert "yield_twin" in reason.where
    assert reason.remedy
    assert np.isnan(result.error("R_D"))
    # Constraining one of them, as the advice says, mends it.
    mended = Model(twins(), yields={"yield_twin": 0.1})
    assert maximise(mended, counts(mended)).valid


def test_runaway_is_a_reason_not_a_traceback() -> None:
    """No events at all: the yields want to go to minus infinity, or stop where nothing changes any more."""
    model = Model(problems.linear(10.0))
    result = maximise(model, np.zeros(12))
    assert not result.valid
    (reason,) = result.reasons
    assert "run to where all its bins expect nothing" in reason.what
    assert reason.remedy


def test_fixed_parameters() -> None:
    """Held by the model or by the call; then the others' errors are those of the smaller problem."""
    templates = problems.small()
    n = counts(Model(templates))
    by_model = maximise(Model(templates, fixed={"R_D": 0.35, "R0": 0.5}), n)
    by_call = maximise(Model(templates), n, {"R_D": 0.35, "R0": 0.5}, fixed=("R_D", "R0"))
    for result in (by_model, by_call):
        assert result.value("R_D") == 0.35
        assert result.error("R0") == 0.0
        assert result.correlation("R_D", "R_Dst") == 0.0
    np.testing.assert_array_equal(by_model.values, by_call.values)


def test_errors_with_fixed_parameters() -> None:
    """Held at their fitted values, they leave the conditional covariance of a Gaussian (Schur complement)."""
    model = Model(problems.small())
    free = maximise(model, model.expected_data())
    held = maximise(model, model.expected_data(), fixed=("R_D", "R0"))
    index = [i for i, name in enumerate(free.names) if name not in ("R_D", "R0")]
    precision = np.linalg.inv(free.covariance)[np.ix_(index, index)]
    np.testing.assert_allclose(held.covariance[np.ix_(index, index)], np.linalg.inv(precision), rtol=1e-6, atol=1e-12)


def test_constraint_can_be_replaced() -> None:
    n = counts(Model(problems.small()))
    errors = [
        maximise(Model(problems.small(), yields={"yield_other": sigma}), n).error("yield_other")
        for sigma in (0.01, 0.2, None)
    ]
    assert errors[0] < 0.0101
    assert errors == sorted(errors)


def test_same_bits_every_time() -> None:
    model = Model(problems.real_size())
    n = counts(model)
    first, second = maximise(model, n), maximise(model, n)
    np.testing.assert_array_equal(first.values, second.values)
    np.testing.assert_array_equal(first.covariance, second.covariance)


def test_result_by_name() -> None:
    model = Model(problems.small())
    result: FitResult = maximise(model, counts(model))
    i, j = model.index("R_D"), model.index("R_Dst")
    assert result.value("R_D") == result.values[i]
    assert result.correlation("R_D", "R_Dst") == pytest.approx(
        result.covariance[i, j] / (result.error("R_D") * result.error("R_Dst"))
    )
    with pytest.raises(InputError, match="no such parameter"):
        result.value("R_K")
    with pytest.raises(ValueError, match="read-only"):
        result.values[0] = 1.0
