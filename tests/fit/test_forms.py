"""The forms of the likelihood for finite templates, against nested minimisation and against published properties."""

from __future__ import annotations

import numpy as np
import pytest
from iminuit import cost
from semitau.core.errors import InputError
from semitau.core.templates import Category, Component, Observable, ScaleParameter, Template, TemplateSet
from semitau.fit import Model, maximise, run_toys
from semitau.fit.likelihood.bin_statistics import bin_terms, effective_terms
from semitau.fit.likelihood.exact_statistics import balance, solve_bin
from semitau.fit.likelihood.likelihood import EXACT, FISHER, VALUE, evaluate, workspace

from . import finite, problems
from .reference import Array

rng = np.random.default_rng(problems.SEED)
FORMS = ("light", "approximate", "exact")
TEMPLATES = {
    "one bin": problems.one_bin(variance=30.0),
    "poor": problems.small(variance=4.0),
    "sparse": problems.small(sparse=True),
}


def ours(model: Model, x: Array, n: Array, mode: int) -> tuple[float, Array, Array]:
    arrays, size = model.layout.arrays, x.size
    gradient, hessian = np.full(size, np.nan), np.full((size, size), np.nan)
    lanes = model.lanes(n, 0.0), model.lanes(np.ones(model.bins), 1.0)
    value = evaluate(arrays, x.copy(), *lanes, model.injected, mode, gradient, hessian, workspace(arrays))
    return value, gradient, hessian


def away(model: Model, far: float) -> Array:
    nuisance = np.array([p.kind == "nuisance" for p in model.parameters])
    shift = rng.normal(size=model.injected.size) * np.where(nuisance, 1.0, 0.2 * model.injected)
    return model.injected + far * np.clip(shift, -1.5, 1.5)


@pytest.mark.parametrize("far", [0.0, 1.0])
@pytest.mark.parametrize("name", TEMPLATES)
@pytest.mark.parametrize("form", ["approximate", "exact"])
def test_value_is_the_nested_minimum(form: str, name: str, far: float) -> None:
    """scipy minimises over every factor of every bin (finite.py), for the exact form one for each component."""
    model = Model(TEMPLATES[name], likelihood=form)
    n = rng.poisson(model.expected_counts()).astype(float)
    x = away(model, far)
    assert model.protected_bins(x) == 0
    assert ours(model, x, n, VALUE)[0] == pytest.approx(finite.value(TEMPLATES[name], x, n, form), rel=1e-7, abs=1e-8)


@pytest.mark.parametrize("far", [0.0, 1.0, 4.0])
@pytest.mark.parametrize("name", TEMPLATES)
@pytest.mark.parametrize("form", FORMS)
def test_derivatives(form: str, name: str, far: float) -> None:
    """Central differences of the value and of the gradient; far out some bins are under the protection."""
    model = Model(TEMPLATES[name], likelihood=form)
    n = rng.poisson(model.expected_counts()).astype(float)
    nuisance = np.array([p.kind == "nuisance" for p in model.parameters])
    x = model.injected + far * rng.normal(size=nuisance.size) * np.where(nuisance, 1.0, 0.3 * model.injected)
    _, gradient, hessian = ours(model, x, n, EXACT)
    step = 1e-5
    for i in range(x.size):
        shift = np.eye(x.size)[i] * step
        up, down = ours(model, x + shift, n, EXACT), ours(model, x - shift, n, EXACT)
        assert (up[0] - down[0]) / (2 * step) == pytest.approx(gradient[i], rel=1e-5, abs=2e-6)
        np.testing.assert_allclose(
            (up[1] - down[1]) / (2 * step), hessian[i], rtol=1e-4, atol=1e-6 * np.abs(hessian).max()
        )
    np.testing.assert_array_equal(ours(model, x, n, FISHER)[1], gradient)


@pytest.mark.parametrize("form", FORMS)
def test_all_negative_yields_are_finite(form: str) -> None:
    model = Model(problems.small(), likelihood=form)
    x = np.where([p.kind == "yield" for p in model.parameters], -model.injected, model.injected)
    for n in (model.expected_counts(), np.zeros(model.bins)):
        value, gradient, hessian = ours(model, x, n, EXACT)
        assert np.isfinite(value)
        assert np.isfinite(gradient).all()
        assert np.isfinite(hessian).all()


@pytest.mark.parametrize("form", FORMS)
def test_expected_hessian_is_the_exact_one_at_the_expected_set(form: str) -> None:
    model = Model(problems.small(), likelihood=form)
    n = model.expected_counts()
    expected, exact = (ours(model, model.injected, n, mode)[2] for mode in (FISHER, EXACT))
    np.testing.assert_allclose(expected, exact, rtol=1e-9, atol=1e-9 * np.abs(exact).max())


@pytest.mark.parametrize("n", [0.0, 1.0, 9.0, 40.0])
@pytest.mark.parametrize(("mu", "variance"), [(5.0, 1.0), (20.0, 60.0), (12.0, 1e-4), (3.0, 9.0)])
def test_against_iminuit(mu: float, variance: float, n: float) -> None:
    """The published forms as iminuit has them: EPJC 82 (2022) 1043 ("da") and arXiv:1103.0354 ("jsc"); -2 ln L."""
    approximate = effective_terms(mu, n, 1.0, variance)[0]
    light = bin_terms(mu, n, 1.0, variance / mu**2)[0]
    one = [np.array([number]) for number in (n, mu, variance)]
    assert 2 * approximate == pytest.approx(cost.template_chi2_da(*one), rel=1e-7, abs=1e-12)
    if n > 0:  # iminuit's root loses its digits without counts
        assert 2 * light == pytest.approx(cost.template_chi2_jsc(*one), rel=1e-7, abs=1e-12)


def test_forms_agree_with_many_generated_events() -> None:
    """With little variance all three tend to the Poisson likelihood (closed form)."""
    templates = problems.small(variance=1e-7)
    plain = Model(templates, template_statistics=False)
    n = rng.poisson(plain.expected_counts()).astype(float)
    wanted = maximise(plain, n)
    for form in FORMS:
        result = maximise(Model(templates, likelihood=form), n)
        np.testing.assert_allclose((result.values - wanted.values) / wanted.errors, 0.0, atol=1e-4)
        np.testing.assert_allclose(result.errors, wanted.errors, rtol=1e-4)


def on_off(signal: float = 10.0, rest: float = 5.0, generated: float = 8.0) -> TemplateSet:
    """One bin, an exact signal, and a background known from `generated` events of weight rest/generated."""
    axis = Observable("x", "x", "", (0.0, 1.0))
    return TemplateSet(
        (Category("on", "on", (axis,)),),
        (Component("s", "s", "signal", ("R_D",)), Component("b", "b", "background", ())),
        (ScaleParameter("R_D", "R", "ratio", 1.0),),
        (),
        {
            ("on", "s"): Template(np.array([signal]), np.array([0.0])),
            ("on", "b"): Template(np.array([rest]), np.array([rest**2 / generated])),
        },
    )


@pytest.mark.parametrize("n", [3.0, 10.0, 22.0])
def test_on_off_problem(n: float) -> None:
    """n_on events with τ = n_off/b: ŝ = n - n_off/τ, σ² = n + n_off/τ² (Li and Ma, Ap. J. 272 (1983) 317).

    The likelihood ratio at s = 0 is their formula 17, with α = 1/τ. The exact form with one uncertain component is it.
    """
    off, tau = 8.0, 8.0 / 5.0
    model = Model(on_off(), likelihood="exact")
    result = maximise(model, np.array([n]))
    assert result.value("R_D") == pytest.approx((n - off / tau) / 10.0, abs=1e-6)
    assert result.error("R_D") == pytest.approx(np.sqrt(n + off / tau**2) / 10.0, rel=1e-5)
    alpha = 1 / tau
    li_ma = n * np.log((1 + alpha) / alpha * n / (n + off)) + off * np.log((1 + alpha) * off / (n + off))
    assert ours(model, np.array([0.0]), np.array([n]), VALUE)[0] == pytest.approx(li_ma, rel=1e-9)


@pytest.mark.parametrize("n", [0.0, 1.0, 6.0, 300.0])
def test_root_is_one(n: float) -> None:
    """The equation of CPC 77 (1993) 219 holds at t, with negative contents and exact templates among the components."""
    for _ in range(200):
        m = rng.normal(2.0, 3.0, size=4)
        m[0] = abs(m[0]) + 12.0
        inverse = rng.choice([0.0, 0.01, 0.2, 1.5], size=4)
        t, _ = solve_bin(n, m, inverse, np.ones(4), 0.3)
        assert t <= 1.0
        assert (1.0 + m * inverse * t > 0).all()
        if t < 1.0:
            value, slope = balance(t, n, m, inverse, np.ones(4), 0.3)
            assert abs(value) <= 1e-8 * max(1.0, slope)


@pytest.mark.parametrize("form", FORMS)
def test_toys_cover(form: str) -> None:
    """Toys of each form's own model: coverage within 4.4 standard deviations of 68.3% (once in 1e5), same bits."""
    model = Model(problems.small(factor=5.0), likelihood=form)
    toys = run_toys(model, 800, problems.SEED)
    for summary in toys.summaries().values():
        (one, _) = summary.coverage
        assert abs(one.fraction - one.nominal) < 4.4 * np.sqrt(0.683 * 0.317 / 800) + 0.01
        assert summary.failures == 0
    np.testing.assert_array_equal(run_toys(model, 40, problems.SEED, workers=2).values, toys.values[:40])


def test_unknown_form() -> None:
    with pytest.raises(InputError, match="no such form of the likelihood"):
        Model(problems.small(), likelihood="heavy")
