"""The ten model problems: other minimisers find the same minimum, and so do a thousand starts."""

from __future__ import annotations

from collections import Counter

import numpy as np
import pytest
from scipy.optimize import minimize
from semitau.fit import Model, maximise
from semitau.fit.fitting.ending import CONVERGED
from semitau.fit.fitting.newton import run

from . import problems
from .reference import Array, Plain, complex_step
from .ten_problems import PROBLEMS
from .test_newton import PROBLEMS as TRIED_THERE
from .test_newton import by_minuit

MORE = [name for name in PROBLEMS if name not in TRIED_THERE]
STARTS = 1000


def counts(model: Model) -> Array:
    return np.random.default_rng([problems.SEED, 10]).poisson(model.expected_counts()).astype(float)


def test_there_are_ten() -> None:
    assert len(PROBLEMS) == 10
    assert set(TRIED_THERE) <= set(PROBLEMS)


@pytest.mark.parametrize("name", MORE)
def test_against_iminuit_and_scipy(name: str) -> None:
    """1e-6 in -ln L; values to what that allows, errors to the accuracy of HESSE. The other five: test_newton.py."""
    model, plain = Model(PROBLEMS[name]), Plain(PROBLEMS[name])
    n = counts(model)
    ours = maximise(model, n)
    assert ours.valid, ours.reasons
    minuit = by_minuit(plain, n, model.start, ours.errors)
    assert ours.minus_log_likelihood <= minuit.fval + 1e-9
    assert ours.minus_log_likelihood == pytest.approx(minuit.fval, abs=1e-6)
    np.testing.assert_allclose(np.array(minuit.errors), ours.errors, rtol=2e-2)
    assert (np.abs(np.array(minuit.values) - ours.values) / ours.errors).max() < 2e-3

    def value(y: Array) -> float:
        return float(plain.value(plain.start + ours.errors * y, n).real)

    def gradient(y: Array) -> Array:
        return ours.errors * complex_step(lambda x: plain.value(x, n), plain.start + ours.errors * y)

    found = minimize(value, np.zeros(plain.start.size), jac=gradient, method="BFGS", options={"gtol": 1e-7})
    assert ours.minus_log_likelihood == pytest.approx(found.fun, abs=1e-6)


def starts(model: Model) -> Array:
    """Ratios and yields between -1 and 3 times the injected values, nuisances normal with a width of two."""
    rng = np.random.default_rng([problems.SEED, 11])
    nuisance = np.array([p.kind == "nuisance" for p in model.parameters])
    shape = (STARTS, nuisance.size)
    return np.where(nuisance, 2 * rng.normal(size=shape), model.injected * rng.uniform(-1, 3, size=shape))


@pytest.mark.parametrize("name", ["one bin", "linear", "small", "peak", "strong nuisances"])
def test_a_thousand_starts(name: str) -> None:
    """All end at one minimum. Without the comparison with the injected start most do; the others find no minimum and
    say so, or one with a negative ratio or yield, so that bins expect next to nothing."""
    model = Model(PROBLEMS[name])
    n = counts(model)
    best, data = maximise(model, n), model.data(n)
    alone: Counter[str] = Counter()
    for x in starts(model):
        result = maximise(model, data, x)
        assert result.valid
        assert result.minus_log_likelihood == pytest.approx(best.minus_log_likelihood, abs=1e-8)
        assert (np.abs(result.values - best.values) / best.errors).max() < 1e-4
        moved = x.copy()
        ending, _ = run(model, data, model.free, moved)
        if ending.status != CONVERGED:
            alone["no minimum"] += 1
        elif abs(ending.value - best.minus_log_likelihood) < 1e-8:
            alone["same"] += 1
        else:
            alone["elsewhere"] += 1
            scales = np.array([p.kind != "nuisance" for p in model.parameters])
            assert (moved[scales] < 0).any() or model.protected_bins(moved) > 0
    assert alone["same"] > 0.75 * STARTS, alone


def test_yields_near_zero() -> None:
    """Ratio times yield is singular where the yield is zero; starts there, and fits that end near there, are fine."""
    model = Model(problems.small())
    n = counts(model)
    best = maximise(model, n)
    for yield_ in (1e-9, 1e-4, -1e-3, 0.0):
        x = model.injected.copy()
        x[[model.index("yield_D_light"), model.index("yield_Dst_light")]] = yield_
        ending, _ = run(model, model.data(n), model.free, x)
        assert ending.status == CONVERGED
        assert ending.value == pytest.approx(best.minus_log_likelihood, abs=1e-8)
    # Data with a hundredth of the light mode: the ratio is a hundred times as large, the product stays.
    few = model.expected_counts({"yield_D_light": 0.01, "R_D": 29.9})
    result = maximise(model, few)
    assert result.valid
    assert result.value("R_D") * result.value("yield_D_light") == pytest.approx(0.299, rel=1e-4)
