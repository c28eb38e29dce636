"""-ln L and its derivatives against a second, plain implementation, and γ against a numerical minimum."""

from __future__ import annotations

import mpmath
import numpy as np
import pytest
from scipy.optimize import minimize_scalar
from semitau.core.templates import TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.likelihood.likelihood import EXACT, FISHER, VALUE, bin_terms, deviance, evaluate, workspace
from semitau.fit.likelihood.vectors import WIDTH, dot

from . import problems
from .reference import Array, Plain, complex_step

MODELS = {
    "one bin": problems.one_bin(variance=30.0),
    "linear": problems.linear(100.0),
    "small": problems.small(),
    "sparse": problems.small(sparse=True),
}
rng = np.random.default_rng(problems.SEED)


class Case:
    """A model with data, auxiliary measurements off their places and parameters off the injected values."""

    def __init__(self, templates: TemplateSet, far: float = 1.0) -> None:
        self.model, self.plain = Model(templates), Plain(templates)
        self.n = rng.poisson(self.model.expected_counts()).astype(float)
        size = len(self.model.names)
        self.centres = self.model.injected + 0.3 * rng.normal(size=size)
        self.gammas = 1 + np.sqrt(self.plain.relative) * rng.normal(size=self.model.bins)
        nuisance = np.array([p.kind == "nuisance" for p in self.model.parameters])
        shift = rng.normal(size=size) * np.where(nuisance, 1.5, 0.3 * self.model.injected)
        self.x = self.model.injected + far * shift

    def ours(self, x: Array, mode: int) -> tuple[float, Array, Array]:
        arrays, size = self.model.layout.arrays, x.size
        gradient, hessian = np.full(size, np.nan), np.full((size, size), np.nan)
        counts, gammas = self.model.lanes(self.n, 0.0), self.model.lanes(self.gammas, 1.0)
        value = evaluate(arrays, x, counts, gammas, self.centres, mode, gradient, hessian, workspace(arrays))
        return value, gradient, hessian

    def theirs(self, x: Array) -> complex:
        return self.plain.value(x, self.n, self.gammas, self.centres)


@pytest.mark.parametrize("far", [0.0, 1.0, 4.0])
@pytest.mark.parametrize("name", MODELS)
def test_value_and_gradient(name: str, far: float) -> None:
    """Against reference.py, its gradient by the complex step."""
    case = Case(MODELS[name], far)
    value, gradient, _ = case.ours(case.x, EXACT)
    assert value == pytest.approx(case.theirs(case.x).real, rel=1e-12)
    assert value == pytest.approx(case.ours(case.x, VALUE)[0], rel=1e-15)
    wanted = complex_step(case.theirs, case.x)
    np.testing.assert_allclose(gradient, wanted, rtol=1e-10, atol=1e-10 * np.abs(wanted).max())


@pytest.mark.parametrize("far", [0.0, 1.0, 4.0])
@pytest.mark.parametrize("name", MODELS)
def test_hessian(name: str, far: float) -> None:
    """Central differences of the plain implementation's complex-step gradient."""
    case = Case(MODELS[name], far)
    hessian = case.ours(case.x, EXACT)[2]
    size, step = case.x.size, 1e-7  # gradients are good to rounding, so a small step is best
    wanted = np.empty((size, size))
    for i in range(size):
        shift = np.eye(size)[i] * step
        up, down = complex_step(case.theirs, case.x + shift), complex_step(case.theirs, case.x - shift)
        wanted[i] = (up - down) / (2 * step)
    np.testing.assert_allclose(hessian, wanted, rtol=1e-5, atol=1e-6 * np.abs(wanted).max())
    np.testing.assert_array_equal(hessian, hessian.T)


@pytest.mark.parametrize("name", ["one bin", "small"])
def test_expected_hessian_is_the_mean_of_the_exact_one(name: str) -> None:
    """At the expected set the exact Hessian is the Fisher information, for which 1/(μ + μ²v) per bin is the formula."""
    case = Case(MODELS[name], 0.0)
    case.n, case.gammas, case.centres = case.model.expected_counts(), np.ones(case.model.bins), case.model.injected
    np.testing.assert_allclose(case.ours(case.x, FISHER)[2], case.ours(case.x, EXACT)[2], rtol=1e-9, atol=1e-9)


def test_protected_bins() -> None:
    """With all yields negative every bin is below its floor; derivatives must hold there too."""
    case = Case(MODELS["small"])
    case.x = np.where([p.kind == "yield" for p in case.model.parameters], -np.abs(case.x), np.abs(case.x))
    assert case.model.protected_bins(case.x) == case.model.bins
    value, gradient, _ = case.ours(case.x, EXACT)
    assert value == pytest.approx(case.theirs(case.x).real, rel=1e-12)
    np.testing.assert_allclose(gradient, complex_step(case.theirs, case.x), rtol=1e-9, atol=1e-6)


POINTS = [
    (mu, n, centre, v)
    for mu in (0.3, 4.0, 250.0)
    for n in (0.0, 1.0, 7.0, 260.0)
    for centre, v in ((1.0, 0.0), (1.0, 1e-4), (1.0, 0.04), (0.8, 0.04), (1.0, 1.5), (-0.2, 0.5))
]


def joint(gamma: float, mu: float, n: float, centre: float, v: float) -> float:
    expected = gamma * mu
    return expected - n + (n * np.log(n / expected) if n > 0 else 0.0) + (gamma - centre) ** 2 / (2 * v)


@pytest.mark.parametrize(("mu", "n", "centre", "v"), POINTS)
def test_gamma_is_the_numerical_minimum(mu: float, n: float, centre: float, v: float) -> None:
    """Nested minimisation by scipy in place of the closed form."""
    value, _, _, gamma = bin_terms(mu, n, centre, v)
    if v == 0.0:
        assert gamma == centre
        return
    top = max(1.0, centre) + 10 * np.sqrt(v) + n / mu
    found = minimize_scalar(joint, bounds=(0, top), args=(mu, n, centre, v), method="bounded", options={"xatol": 1e-12})
    assert value <= found.fun + 1e-12 * max(1, abs(found.fun))
    assert value == pytest.approx(found.fun, abs=2e-6 * max(1, abs(found.fun)))  # the bound 0 is approached, not met
    assert gamma == pytest.approx(found.x, abs=1e-5 * max(1, top))


@pytest.mark.parametrize(("mu", "n", "centre", "v"), POINTS)
def test_derivatives_in_mu(mu: float, n: float, centre: float, v: float) -> None:
    """mpmath at 40 digits, with γ as the root found numerically there."""

    def profiled(m: mpmath.mpf) -> mpmath.mpf:
        b = m * mpmath.mpf(v) - mpmath.mpf(centre)
        if v == 0.0:
            gamma = mpmath.mpf(centre)
        elif n == 0.0:
            gamma = max(mpmath.mpf(0), -b)
        else:
            gamma = max(mpmath.polyroots([-mpmath.mpf(n) * mpmath.mpf(v), b, 1], maxsteps=200, extraprec=100, asc=True))
        out = gamma * m - n + (n * mpmath.log(n / (gamma * m)) if n else 0)
        return out + ((gamma - mpmath.mpf(centre)) ** 2 / (2 * mpmath.mpf(v)) if v else 0)

    with mpmath.workdps(40):
        wanted = [float(mpmath.diff(profiled, mpmath.mpf(mu), order)) for order in (0, 1, 2)]
    assert bin_terms(mu, n, centre, v)[:3] == pytest.approx(wanted, rel=1e-9, abs=1e-10)


@pytest.mark.parametrize("n", [0.0, 1.0, 30.0, 1e6, 1e12])
@pytest.mark.parametrize("ratio", [1e-3, 0.8, 0.95, 1 - 1e-9, 1.0, 1 + 1e-6, 1.2, 1.3, 40.0])
def test_deviance_keeps_its_digits(n: float, ratio: float) -> None:
    """mpmath at 50 digits; n and μ agree to nine digits in places, where the plain formula has none left."""
    mu = max(n, 0.5) * ratio
    with mpmath.workdps(50):
        wanted = mpmath.mpf(mu) - n + (n * mpmath.log(n / mpmath.mpf(mu)) if n else 0)
    assert deviance(n, mu) == pytest.approx(float(wanted), rel=1e-13)


def test_dot_product() -> None:
    from numba import njit

    compiled = njit(lambda a, b, length: dot(a, 3, b, 1, length))
    a, b = rng.normal(size=103), rng.normal(size=(4, 40))
    for length in (0, WIDTH, 5 * WIDTH):
        assert compiled(a, b, length) == pytest.approx(a[3 : 3 + length] @ b.ravel()[1 : 1 + length], abs=1e-13)


def test_breaking_a_formula_is_seen() -> None:
    """The comparison has teeth: a reference with a slightly other variance disagrees."""
    case = Case(MODELS["small"])
    case.plain.relative = case.plain.relative * 1.001
    assert case.ours(case.x, VALUE)[0] != pytest.approx(case.theirs(case.x).real, rel=1e-9)
