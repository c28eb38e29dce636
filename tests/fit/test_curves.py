"""Likelihood curves and regions against MINOS, conditional fits by iminuit, and the ellipse of the Gaussian limit."""

from __future__ import annotations

import numpy as np
import pytest
from iminuit import Minuit
from scipy.stats import chi2
from semitau.core.errors import InputError, RunError
from semitau.fit import Model, maximise, profile, region
from semitau.fit.uncertainty.curves import REGION_LEVELS

from . import problems
from .reference import Array, Plain
from .test_newton import by_minuit, counts, twins


@pytest.fixture(scope="module")
def case() -> tuple[Model, Plain, Array, Minuit]:
    model, plain = Model(problems.small()), Plain(problems.small())
    n = counts(model, 5)
    errors = maximise(model, n).errors
    return model, plain, n, by_minuit(plain, n, model.start, errors)


@pytest.mark.parametrize("name", ["R_D", "R_Dst", "slow_pion"])
def test_intervals_against_minos(case: tuple[Model, Plain, Array, Minuit], name: str) -> None:
    """MINOS of iminuit on the plain implementation, to 1% of the error (its own tolerance)."""
    model, _, n, minuit = case
    curve = profile(model, n, name)
    minuit.minos(name)
    error = minuit.errors[name]
    assert curve.low - curve.value == pytest.approx(minuit.merrors[name].lower, abs=0.01 * error)
    assert curve.high - curve.value == pytest.approx(minuit.merrors[name].upper, abs=0.01 * error)
    assert curve.failures == 0


def test_heights_against_conditional_fits(case: tuple[Model, Plain, Array, Minuit]) -> None:
    model, plain, n, minuit = case
    points = np.array([0.1, 0.3, 0.55])
    curve = profile(model, n, "R_D", points)
    np.testing.assert_array_equal(curve.points, points)
    for point, height in zip(points, curve.heights, strict=True):
        held = Minuit(lambda x: plain.value(x, n).real, np.array(minuit.values), name=plain.names)
        held.errordef, held.strategy, held.tol = Minuit.LIKELIHOOD, 2, 1e-4
        held.errors = np.array(minuit.errors)
        held.values["R_D"], held.fixed["R_D"] = point, True
        held.migrad(ncall=20000)
        assert height == pytest.approx(2 * (held.fval - minuit.fval), abs=1e-5)


def test_one_bin_in_closed_form() -> None:
    """-2 ln L = 2[μ - n + n ln(n/μ)] with μ = b + s R/R0: its crossings of 1 solved by scipy."""
    from scipy.optimize import brentq

    n = 117.0
    curve = profile(Model(problems.one_bin()), np.array([n]), "R_D")

    def height(mu: float) -> float:
        return 2 * (mu - n + n * np.log(n / mu)) - 1

    low, high = (0.3 * (brentq(height, *ends) - 60) / 40 for ends in ((60, n), (n, 200)))
    assert (curve.low, curve.high) == pytest.approx((low, high), rel=1e-7)


def test_region_is_an_ellipse_in_the_gaussian_limit() -> None:
    """Heights (x - x̂)ᵀ C⁻¹ (x - x̂) with the covariance from linear algebra (weighted least squares)."""
    templates = problems.linear(1e10)
    model = Model(templates)
    n = model.expected_counts()
    found = region(model, n, ("yield_a", "yield_c"), 7)
    design = np.stack([templates.templates["wide", name].nominal for name in "abc"], axis=1)
    covariance = np.linalg.inv(design.T @ (design / n[:, None]))[np.ix_([0, 2], [0, 2])]
    precision = np.linalg.inv(covariance)
    for i, a in enumerate(found.first):
        for j, c in enumerate(found.second):
            off = np.array([a - 1, c - 1])
            assert found.heights[i, j] == pytest.approx(off @ precision @ off, rel=1e-3, abs=1e-4)
    assert found.failures == 0


def test_region_agrees_with_curve(case: tuple[Model, Plain, Array, Minuit]) -> None:
    """The lowest height of a row is the height of the curve there, up to the grid's spacing."""
    model, _, n, _ = case
    result = maximise(model, n)
    found = region(model, n, points=31, result=result)
    curve = profile(model, n, "R_D", found.first, result=result)
    lowest = found.heights.min(axis=1)
    assert np.all(lowest >= curve.heights - 1e-9)
    np.testing.assert_allclose(lowest, curve.heights, atol=0.05)


def test_levels() -> None:
    """1, 2.30, 6.18, 11.83: χ² of two parameters (Review of Particle Physics, table on ΔlnL)."""
    assert [round(level, 2) for level in REGION_LEVELS.values()] == [1.0, 2.30, 6.18, 11.83]
    assert chi2.cdf(REGION_LEVELS["39.3%"], 2) == pytest.approx(0.393, abs=1e-3)
    assert chi2.cdf(REGION_LEVELS["68.3%"], 2) == pytest.approx(0.6827, abs=1e-4)


def test_arguments(case: tuple[Model, Plain, Array, Minuit]) -> None:
    model, _, n, _ = case
    with pytest.raises(InputError, match="no such parameter"):
        profile(model, n, "R_K")
    with pytest.raises(InputError, match="finite"):
        profile(model, n, "R_D", [0.1, float("nan")])
    with pytest.raises(InputError, match="two different"):
        region(model, n, ("R_D", "R_D"))
    with pytest.raises(InputError, match="grid needs points"):
        region(model, n, points=1)
    with pytest.raises(InputError, match="fixed parameter"):
        profile(Model(problems.small(), fixed={"R_D": 0.3}), n, "R_D")
    with pytest.raises(RunError, match="cannot tell these parameters apart"):
        profile(Model(twins()), n, "R_D")
