"""Fits of coefficients: expectations against plain sums, derivatives against differences, points that come back.

Statistical tests fail by chance with the probability named at each; SEMITAU_TEST_SEED changes the seed.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize
from semitau.core.errors import InputError
from semitau.core.quadratic import templates_at
from semitau.core.templates import Coefficient, Template, TemplateSet
from semitau.fit.fitting.coefficients import deepest, doubts
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.likelihood.interpolation import bend
from semitau.fit.likelihood.likelihood import EXACT, VALUE, evaluate, workspace
from semitau.fit.toys.toys import run_toys
from semitau.fit.uncertainty.curves import profile
from semitau.fit.uncertainty.decomposition import budget
from semitau.fit.uncertainty.nuisances import held_in_turn

from ..core.weighted_events import World
from . import problems

NAMES = ("SR", "T", "Im_T")
POINT = {"SR": 0.35, "T": -0.12, "Im_T": 0.3}
rng = np.random.default_rng(problems.SEED)


def plain_expectation(templates: TemplateSet, values: dict[str, float]) -> dict[str, np.ndarray]:
    """Sum over components of scale × T(c) × (1 + relative shifts), written out."""
    injected = {parameter.name: parameter.injected for parameter in templates.parameters}
    following = {parameter.name for parameter in templates.parameters if parameter.rate}
    point = {"one": 1.0, **{known.name: values.get(known.name, known.value) for known in templates.coefficients}}
    out = {}
    for category in templates.categories:
        total = np.zeros(category.shape)
        for component in templates.components:
            t = templates.templates[category.name, component.name]
            scale = 1.0
            for name in component.scales_with:
                scale *= 1.0 if name in following else values[name] / injected[name]
            contents = t.nominal
            if t.quadratic:
                contents = np.zeros(category.shape)
                for (a, b), piece in t.quadratic.items():
                    contents += point[a] * point[b] * piece
            shifts = np.ones(category.shape)
            for name, plus in t.plus.items():
                even = 0.5 * (plus + t.minus[name]) - t.nominal
                shifts += (0.5 * (plus - t.minus[name]) * values[name] + even * bend(values[name])[0]) / t.nominal
            total += scale * contents * shifts
        out[category.name] = total
    return out


@pytest.mark.parametrize("names", [("SR",), ("SR", "T"), NAMES])
def test_expectation(names: tuple[str, ...]) -> None:
    templates = problems.following(at=(0.1, 0.05, 0.0))
    model = Model(templates, coefficients=names)
    x = model.injected + 0.2 * rng.normal(size=len(model.names))
    values = dict(zip(model.names, x.tolist(), strict=True))
    wanted = plain_expectation(templates, values)
    for name, counts in model.expected(x).items():
        np.testing.assert_allclose(counts, wanted[name], rtol=1e-12)
    stacked = model.contributions(x)
    for category in templates.categories:
        total = sum(stacked[category.name, component.name] for component in templates.components)
        np.testing.assert_allclose(total, wanted[category.name], rtol=1e-12)


@pytest.mark.parametrize("likelihood", ["light", "approximate"])
@pytest.mark.parametrize("names", [("T",), NAMES])
def test_derivatives(names: tuple[str, ...], likelihood: str) -> None:
    """Gradient against central differences of the value, Hessian against those of the gradient."""
    model = Model(problems.following(at=(0.1, 0.05, 0.2)), coefficients=names, likelihood=likelihood)
    arrays, size = model.layout.arrays, len(model.names)
    counts = model.lanes(rng.poisson(model.expected_counts()).astype(float), 0.0)
    gammas = np.ones_like(counts)
    x = model.injected + 0.1 * rng.normal(size=size)

    def at(values: np.ndarray, mode: int) -> tuple[float, np.ndarray, np.ndarray]:
        gradient, hessian = np.zeros(size), np.zeros((size, size))
        value = evaluate(arrays, values, counts, gammas, model.injected, mode, gradient, hessian, workspace(arrays))
        return value, gradient, hessian

    _, gradient, hessian = at(x, EXACT)
    step = 1e-5
    for i in range(size):
        up, down = x + step * np.eye(size)[i], x - step * np.eye(size)[i]
        slope = (at(up, VALUE)[0] - at(down, VALUE)[0]) / (2 * step)
        assert gradient[i] == pytest.approx(slope, rel=1e-6, abs=1e-5 * np.abs(gradient).max())
        bent = (at(up, EXACT)[1] - at(down, EXACT)[1]) / (2 * step)
        np.testing.assert_allclose(hessian[i], bent, rtol=1e-5, atol=1e-6 * np.abs(hessian).max())


def test_expected_set_at_another_point_returns_it() -> None:
    """Expected events of a point far from where the templates are made, and the ratios of that point."""
    templates = problems.following(events=3.0)
    model = Model(templates, coefficients=NAMES)
    result = maximise(model, model.expected_data(POINT))
    assert result.valid, result.reasons
    for name, value in POINT.items():
        assert abs(result.value(name)) == pytest.approx(abs(value), abs=1e-5)  # Im_T has no sign
    there = templates_at(templates, POINT)
    for parameter in there.parameters:
        if parameter.kind == "ratio":
            assert result.value(parameter.name) == pytest.approx(parameter.injected, rel=1e-5)
            assert result.error(parameter.name) > 0
    assert -1 < result.correlation("R_D", "R_Dst") < 1


def test_errors_of_ratios_are_those_of_the_coefficients() -> None:
    """σ²(R) = g V g with the gradient g of R(c) by differences."""
    templates = problems.following(events=20.0)
    model = Model(templates, coefficients=("SR", "T"))
    result = maximise(model, model.expected_data({"SR": 0.3, "T": -0.15}))
    places = [model.index("SR"), model.index("T")]
    covariance = result.covariance[np.ix_(places, places)]
    for row, name in enumerate(("R_D", "R_Dst")):
        slopes = []
        for coefficient in ("SR", "T"):
            ends = []
            for step in (1e-5, -1e-5):
                point = {"SR": 0.3, "T": -0.15}
                point[coefficient] += step
                ends.append(templates_at(templates, point).parameters[row].injected)
            slopes.append((ends[0] - ends[1]) / 2e-5)
        assert result.error(name) == pytest.approx(np.sqrt(np.array(slopes) @ covariance @ np.array(slopes)), rel=1e-4)


def test_a_point_held_is_the_templates_of_that_point() -> None:
    """Coefficients at a point and ratios free: the same as a model of `templates_at`; and the plain fit at home."""
    templates = problems.following()
    counts = rng.poisson(Model(templates).expected_counts()).astype(float)
    moved = maximise(Model(templates_at(templates, {"SR": 0.3})), counts)
    assert moved.valid
    by_hand, point = {}, {"one": 1.0, "SR": 0.3}
    for key, t in templates.templates.items():
        contents = np.zeros_like(t.nominal)
        for (a, b), piece in t.quadratic.items():
            contents += point.get(a, 0.0) * point.get(b, 0.0) * piece
        grown = contents / t.nominal if t.quadratic else np.ones_like(t.nominal)
        sides = [{name: side * grown for name, side in both.items()} for both in (t.plus, t.minus)]
        by_hand[key] = Template(t.nominal * grown, t.variance * grown**2, sides[0], sides[1])
    injected = {p.name: p.injected for p in templates_at(templates, {"SR": 0.3}).parameters}
    parameters = tuple(replace(p, injected=injected[p.name], rate=()) for p in templates.parameters)
    plain = replace(templates, templates=by_hand, parameters=parameters, coefficients=())
    wanted = maximise(Model(plain), counts)
    np.testing.assert_allclose(moved.values, wanted.values, rtol=1e-8, atol=1e-8)
    np.testing.assert_allclose(moved.errors, wanted.errors, rtol=1e-8)
    home = maximise(Model(templates), counts)
    assert home.names == moved.names
    assert home.value("R_D") != pytest.approx(moved.value("R_D"), rel=1e-3)


def test_against_a_general_minimiser() -> None:
    """scipy's BFGS with numerical derivatives finds no deeper minimum, and the same place."""
    model = Model(problems.following(events=3.0), coefficients=("SR", "T"))
    data = model.data(rng.poisson(model.expected_counts(model.values({"SR": 0.3, "T": 0.1}))).astype(float))
    result = maximise(model, data)
    assert result.valid, result.reasons
    arrays = model.layout.arrays
    counts, gammas = model.lanes(data.counts, 0.0), model.lanes(data.gamma_centres, 1.0)
    work, free = workspace(arrays), model.free

    def value(free_values: np.ndarray) -> float:
        x = model.start.copy()
        x[free] = free_values
        x = model.values(x)
        none = np.zeros(0), np.zeros((0, 0))
        return float(evaluate(arrays, x, counts, gammas, data.centres, VALUE, *none, work))

    found = minimize(value, model.start[free], method="BFGS", options={"gtol": 1e-6})
    assert result.minus_log_likelihood <= found.fun + 1e-9
    np.testing.assert_allclose(result.values[free], found.x, atol=0.01 * result.errors[free].min())


def test_toys_cover() -> None:
    """Pulls at a point beyond the Standard Model: mean within 5 of its errors of zero for two coefficients, width
    within 15% of one. Chance of failing below 1e-4 for the statistics; curvature adds a bias of a few per cent."""
    model = Model(problems.following(events=20.0), coefficients=("SR", "T"))
    toys = run_toys(model, 400, problems.SEED, injected={"SR": 0.3, "T": -0.15})
    assert toys.ratios == ("R_D", "R_Dst", "SR", "T")
    assert toys.valid.mean() > 0.99
    for name in toys.ratios:
        pulls = toys.pulls(name)
        assert abs(pulls.mean()) < 5.0 / np.sqrt(pulls.size) + 0.05
        assert pulls.std() == pytest.approx(1.0, abs=0.15)


def test_curves_and_budget_of_coefficients() -> None:
    model = Model(problems.following(events=20.0), coefficients=("SR", "T"))
    data = model.expected_data({"SR": 0.3, "T": -0.15})
    result = maximise(model, data)
    curve = profile(model, data, "T", result=result)
    error = result.error("T")
    assert curve.value == pytest.approx(-0.15, abs=1e-6)
    assert curve.low == pytest.approx(-0.15 - error, abs=0.3 * error)
    assert curve.high == pytest.approx(-0.15 + error, abs=0.3 * error)
    parts = budget(model, result)
    assert set(parts) == {"R_D", "R_Dst", "SR", "T"}
    assert sum(row**2 for row in parts["T"].rows.values()) == pytest.approx(error**2, rel=1e-9)


def test_held_coefficients() -> None:
    model = Model(problems.following(), coefficients=NAMES, fixed={"T": 0.0, "Im_T": 0.0})
    result = maximise(model, model.expected_data({"SR": 0.2}))
    assert result.valid
    assert result.value("SR") == pytest.approx(0.2, abs=1e-6)
    assert result.error("T") == 0.0


def test_poor_weights_are_told() -> None:
    """Moments of a template half of whose squared weight at large T is one event's."""
    templates = problems.following(events=20.0)
    pairs = 10  # of one, SR, T, Im_T
    moments = np.zeros((pairs, pairs))
    moments[0, 0] = templates.templates["Dst", "Dst_tau"].variance.sum()
    moments[7, 7] = 1e9  # T² T²
    poor = replace(templates.templates["Dst", "Dst_tau"], moments=moments)
    model = Model(replace(templates, templates={**templates.templates, ("Dst", "Dst_tau"): poor}), coefficients=("T",))
    result = maximise(model, model.expected_data({"T": 0.4}))
    assert any("few effective events behind Dst_tau in Dst" in problem.what for problem in doubts(model, result))
    home = maximise(model, model.expected_data())
    assert doubts(model, home) == ()
    far = maximise(model, model.expected_data({"T": 1.4}), {"T": 1.3})
    assert "beyond the range" in str(doubts(model, far)[0])


def test_the_deepest_of_several_minima() -> None:
    """From the injected point the fit ends in the wrong minimum; from many starts it does not, and tells the other."""
    model = Model(problems.following(events=20.0), coefficients=("T",))
    data = model.expected_data({"T": 1.0})
    assert abs(maximise(model, data).value("T") - 1.0) > 0.1
    best, others = deepest(model, data)
    assert best.value("T") == pytest.approx(1.0, abs=1e-6)
    assert best.minus_log_likelihood == pytest.approx(0.0, abs=1e-9)
    assert all(other.minus_log_likelihood > best.minus_log_likelihood for other in others)
    poor = Model(problems.following(events=0.5), coefficients=("T",))
    (other,) = deepest(poor, poor.expected_data({"T": 1.0}))[1]
    assert other.value("T") == pytest.approx(0.24, abs=0.05)
    mirrored = Model(problems.following(events=20.0), coefficients=("Im_T",))
    best, others = deepest(mirrored, mirrored.expected_data({"Im_T": 0.4}))
    assert abs(best.value("Im_T")) == pytest.approx(0.4, abs=1e-6)
    assert others == ()


@pytest.mark.parametrize(
    ("arguments", "message"),
    [
        ({"coefficients": ("SL",)}, "no functions of this coefficient .allowed SR, T, Im_T"),
        ({"coefficients": ("T",), "likelihood": "exact"}, "likelihood: no coefficients can be fitted with a factor"),
        ({"coefficients": ("T",), "fixed": {"R_D": 0.3}}, "function for R_D: the parameter is held fixed as well"),
        ({"coefficients": ("T",), "functions": {"R_D": "0.5"}}, "function for R_D: the ratio follows the fitted"),
        ({"fixed": {"T": 0.3}}, "there is no such parameter .got 'T'"),
    ],
)
def test_what_cannot_be_fitted(arguments: dict[str, object], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Model(problems.following(), **arguments)  # type: ignore[arg-type]


def test_plain_sets_have_no_coefficients() -> None:
    with pytest.raises(InputError, match=r"allowed none.*\[quadratic\]"):
        Model(problems.small(), coefficients=("SR",))
    assert Model(problems.small()).coefficients == ()


def test_nothing_to_fit_them_with() -> None:
    """A coefficient that no template follows is named."""
    templates = problems.following()
    extra = (*templates.coefficients, Coefficient("VR", "VR", 0.0, 2.0))
    with pytest.raises(InputError, match="VR: no template depends on this free parameter"):
        Model(replace(templates, coefficients=extra), coefficients=("VR",))


def test_sources_of_a_ratio_that_follows() -> None:
    """R_D is a function of SR alone: every row of both budgets is |dR/dSR| times that of SR (chain rule)."""
    made = World()
    model = Model(made.template_set(), coefficients=("SR",))
    result = maximise(model, model.expected_data())
    step = 1e-5
    ends = [made.rate((result.value("SR") + sign * step, made.base[1])) for sign in (1.0, -1.0)]
    slope = abs(ends[0] - ends[1]) / (2.0 * step)
    rows, of_coefficient = (held_in_turn(model, result, name) for name in ("R_D", "SR"))
    assert set(rows) == set(of_coefficient) == {"statistical", "template statistics", "detector"}
    for source, part in rows.items():
        assert part == pytest.approx(slope * of_coefficient[source], rel=1e-6), source
    split = budget(model, result)
    assert split["R_D"].total == pytest.approx(slope * split["SR"].total, rel=1e-6)
