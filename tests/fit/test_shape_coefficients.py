"""Coefficients that change shapes alone: against plain sums over weighted events, derivatives against differences.

Nothing fluctuates: data are expected sets, or numbers of a fixed seed that only say where derivatives are taken.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from semitau.core.errors import InputError
from semitau.core.quadratic import templates_at
from semitau.core.template_file import read_templates, write_templates
from semitau.core.template_meta import describe
from semitau.core.templates import Coefficient, Component, ScaleParameter
from semitau.fit.fitting.coefficients import deepest, doubts
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.likelihood.functions import read_function
from semitau.fit.likelihood.interpolation import bend
from semitau.fit.likelihood.likelihood import EXACT, VALUE, evaluate, workspace
from semitau.fit.toys.straightness import linearity
from semitau.fit.uncertainty.decomposition import budget
from semitau.fit.uncertainty.nuisances import held_in_turn, nuisance_shifts

from ..core.shaped_events import RATIO, Shaped
from . import problems

POINT = (1.3, -0.4)


def moved(model: Model, **changes: float) -> np.ndarray:
    return model.values({"a": POINT[0], "b": POINT[1], **changes})


def test_expectation_is_the_shape_at_the_point() -> None:
    """Sizes are those of the scale parameters whatever the coefficients: R/R_0 and the yield times weighted events."""
    made = Shaped(base=(0.2, 0.1))
    model = Model(made.template_set(), coefficients=("a", "b"))
    x = moved(model, R_D=0.42, yield_light=1.1, tag=0.6)
    heavy, light = made.seen_shape("heavy", POINT), made.seen_shape("light", POINT)
    parts = {"heavy": 1.1 * 0.42 / RATIO * heavy, "light": 1.1 * light}
    for name, tilt in (("heavy", 0.05), ("light", 0.02)):
        assert bend(0.6)[0] != 0.0
        parts[name] = parts[name] * (1.0 + 0.6 * tilt * np.array([-1.0, -0.5, 0.5, 1.0]))
    rest = model.templates.templates["only", "rest"].nominal
    np.testing.assert_allclose(model.expected(x)["only"], parts["heavy"] + parts["light"] + rest, rtol=1e-12)
    stacked = model.contributions(x)
    for name, counts in parts.items():
        np.testing.assert_allclose(stacked["only", name], counts, rtol=1e-12)


def test_parameters() -> None:
    """A direction with a constraint is a nuisance, a free shift a parameter of interest; ratios stay free."""
    model = Model(Shaped().template_set(), coefficients=("b", "a"))
    known = {parameter.name: parameter for parameter in model.parameters}
    assert (known["a"].kind, known["a"].group, known["a"].constraint) == ("nuisance", "form factors", 1.0)
    assert (known["b"].kind, known["b"].group, known["b"].constraint) == ("coefficient", "coefficients", None)
    assert known["R_D"].function is None
    assert model.ratios == ("R_D", "b")
    assert model.following == ()
    assert [p.name for p in model.parameters if p.kind == "size"] == ["_size_heavy", "_size_light"]
    one = Model(Shaped().template_set(), coefficients=("a",))
    assert one.ratios == ("R_D",)
    assert np.isfinite(linearity(one, (0.8, 1.2), 4, problems.SEED, 1).lines["R_D"].slope)


@pytest.mark.parametrize("likelihood", ["light", "approximate"])
def test_derivatives(likelihood: str) -> None:
    """Gradient against central differences of the value, Hessian against those of the gradient."""
    made = Shaped(base=(0.2, 0.1))
    model = Model(made.template_set(), coefficients=("a", "b"), likelihood=likelihood)
    arrays, size = model.layout.arrays, len(model.names)
    rng = np.random.default_rng(problems.SEED)
    counts = model.lanes(rng.poisson(model.expected_counts()).astype(float), 0.0)
    gammas, x = np.ones_like(counts), moved(model, R_D=0.35, yield_light=0.9, tag=-0.3)

    def at(values: np.ndarray, mode: int) -> tuple[float, np.ndarray, np.ndarray]:
        gradient, hessian = np.zeros(size), np.zeros((size, size))
        value = evaluate(
            arrays, values.copy(), counts, gammas, model.injected, mode, gradient, hessian, workspace(arrays)
        )
        return value, gradient, hessian

    _, gradient, hessian = at(x, EXACT)
    step = 1e-5
    for i in model.free.tolist():
        up, down = x + step * np.eye(size)[i], x - step * np.eye(size)[i]
        slope = (at(up, VALUE)[0] - at(down, VALUE)[0]) / (2 * step)
        assert gradient[i] == pytest.approx(slope, rel=1e-6, abs=1e-5 * np.abs(gradient).max())
        bent = (at(up, EXACT)[1] - at(down, EXACT)[1]) / (2 * step)
        np.testing.assert_allclose(hessian[i], bent, rtol=1e-5, atol=1e-6 * np.abs(hessian).max())


def test_expected_set_at_another_point_returns_it() -> None:
    """The free shift comes back with the ratio; sources of the error are those of a nuisance; no doubts."""
    made = Shaped()
    model = Model(made.template_set(), coefficients=("a", "b"))
    result, others = deepest(model, model.expected_data(moved(model, R_D=0.37)))
    assert result.valid, result.reasons
    assert others == ()
    found = {name: result.value(name) for name in ("a", "b", "R_D", "yield_light")}
    assert found == pytest.approx({"a": 1.3, "b": -0.4, "R_D": 0.37, "yield_light": 1.0}, abs=1e-5)
    assert doubts(model, result) == ()
    assert result.value("_size_light") == pytest.approx(1.0 / made.rate("light", POINT), rel=1e-5)
    split = budget(model, result)["R_D"]
    assert split.rows["form factors"] > 0
    assert held_in_turn(model, result, "R_D")["form factors"] > 0
    shifts = {shift.name: shift for shift in nuisance_shifts(model, model.expected_data(), result)}
    assert set(shifts) == {"a", "tag"}


def test_error_with_and_without_a_direction() -> None:
    """Held, the direction costs the ratio nothing; free, its error is that of a general inverse of the information."""
    templates = Shaped().template_set()
    held = Model(templates, template_statistics=False)
    free = Model(templates, coefficients=("a",), template_statistics=False)
    fixed, floated = (maximise(model, model.expected_data()) for model in (held, free))
    assert floated.error("R_D") > fixed.error("R_D")
    step, names = 1e-5, ["R_D", "yield_light", "a", "tag"]
    x, slopes = free.values(), []
    for name in names:
        ends = [free.expected_counts({name: x[free.index(name)] + sign * step}) for sign in (1.0, -1.0)]
        slopes.append((ends[0] - ends[1]) / (2.0 * step))
    information = (np.array(slopes) / free.expected_counts()) @ np.array(slopes).T + np.diag([0.0, 0.0, 1.0, 1.0])
    assert floated.error("R_D") == pytest.approx(np.sqrt(np.linalg.inv(information)[0, 0]), rel=1e-4)


@pytest.mark.parametrize("base", [(0.0, 0.0), (0.2, 0.1)])
def test_at_a_point(base: tuple[float, float]) -> None:
    """Light decays keep their number, heavy ones follow the ratio, twice moved is moved at once, back is home."""
    made = Shaped(base)
    there = templates_at(made.template_set(), {"a": POINT[0], "b": POINT[1]})
    assert there.parameters[0].injected == pytest.approx(made.ratio(POINT) / made.ratio(base) * RATIO, rel=1e-12)
    heavy = made.seen_shape("heavy", POINT) * made.ratio(POINT) / RATIO
    np.testing.assert_allclose(there.templates["only", "heavy"].nominal, heavy, rtol=1e-12)
    np.testing.assert_allclose(there.templates["only", "light"].nominal, made.seen_shape("light", POINT), rtol=1e-12)
    weights = made.weights("light", POINT) / made.rate("light", POINT) * made.seen["light"]
    assert there.templates["only", "light"].variance.sum() == pytest.approx((weights**2).sum(), rel=1e-12)
    twice = templates_at(templates_at(made.template_set(), {"a": 0.7, "b": 0.3}), {"a": POINT[0], "b": POINT[1]})
    home = templates_at(there, {"a": base[0], "b": base[1]})
    for one, other in ((twice, there), (home, made.template_set())):
        assert one.parameters[0].injected == pytest.approx(other.parameters[0].injected, rel=1e-12)
        for key, template in one.templates.items():
            np.testing.assert_allclose(template.nominal, other.templates[key].nominal, rtol=1e-12)
            if template.moments is not None:
                np.testing.assert_allclose(template.moments, other.templates[key].moments, rtol=1e-9)
    # floated from there the model is the same function of ratio, yield and coefficients
    first, second = (Model(one, coefficients=("a", "b")) for one in (made.template_set(), there))
    values = {"a": -0.5, "b": 0.2, "R_D": 0.4, "yield_light": 1.2}
    np.testing.assert_allclose(first.expected_counts(values), second.expected_counts(values), rtol=1e-11)


def test_the_file_keeps_them(tmp_path: Path) -> None:
    made = Shaped().template_set()
    path = tmp_path / "t.root"
    write_templates(made, path)
    again = read_templates(path)
    assert again.coefficients == made.coefficients
    assert again.components == made.components
    assert again.parameters == made.parameters
    assert '"version": "1.2"' in describe(made)


def test_one_over_a_sum() -> None:
    """Users may write it too; the terms are those of the sum over the number."""
    assert read_function("x", "2 / (1 + a * b)").terms == {(): 0.5, (("a", 1.0), ("b", 1.0)): 0.5}
    assert read_function("x", "2 / (1 + a * b)").inverse
    assert not read_function("x", "2 / a").inverse
    with pytest.raises(InputError, match="only a product can be divided by"):
        read_function("x", "c / (1 + a)")


NAN = (("one", "one", float("nan")),)


@pytest.mark.parametrize(
    ("make", "message"),
    [
        (lambda: Coefficient("a", "a", 0.0, 1.0, "form"), "unknown kind"),
        (lambda: Coefficient("a", "a", 0.0, 1.0, "shape", -1.0), "constraint must be positive and finite"),
        (lambda: Component("a", "a", "signal", (), NAN), "a piece of the rate is not finite"),
        (lambda: ScaleParameter("R_D", "R", "ratio", 0.3, over=(("one", "one", 1.0),)), "something to divide by"),
    ],
)
def test_senseless_parts(make: Callable[[], object], message: str) -> None:
    with pytest.raises(InputError, match=message):
        make()


def test_forms_are_one_where_the_templates_are_made() -> None:
    made = Shaped().template_set()
    heavy = replace(made.components[0], rate=(("one", "one", 1.1),))
    with pytest.raises(InputError, match="the pieces do not add up to what is injected"):
        replace(made, components=(heavy, *made.components[1:]))
    ratio = replace(made.parameters[0], over=(("one", "one", 0.9),))
    with pytest.raises(InputError, match="the pieces do not add up to what is injected"):
        replace(made, parameters=(ratio, *made.parameters[1:]))


def test_not_together_with_couplings() -> None:
    made = Shaped().template_set()
    mixed = replace(made, coefficients=(made.coefficients[0], Coefficient("b", "b", 0.0, 2.0)))
    with pytest.raises(InputError, match="ratios cannot follow some fitted coefficients and be free of others"):
        Model(mixed, coefficients=("a", "b"))
