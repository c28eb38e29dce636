"""Expected errors against the number of generated events: closed forms, the budget of real fits, scatter of fits.

The one statistical test asks each of eight ratios of variances for a p-value above 1e-6: a fresh seed fails with a
chance below 2e-5.
"""

from __future__ import annotations

import re
from dataclasses import replace

import numpy as np
import pytest
from scipy import stats
from semitau.core.errors import InputError, RunError
from semitau.core.templates import Component, ScaleParameter, Template, TemplateSet
from semitau.fit import Data, Model, budget, event_numbers, maximise
from semitau.fit.uncertainty.template_costs import EventNumbers

from . import problems

UNLIKELY = 1e-6


def thinned(templates: TemplateSet, factors: dict[str, float]) -> TemplateSet:
    """The same expectations from other numbers of events: every variance over the factor."""
    return replace(
        templates,
        templates={
            key: Template(t.nominal, t.variance / factors[key[1]], t.plus, t.minus)
            for key, t in templates.templates.items()
        },
    )


def counting(signal: float, background: float, of_signal: float, of_background: float) -> EventNumbers:
    """One bin with signal R/R₀ s + b, with these variances of the templates."""
    templates = replace(
        problems.one_bin(),
        templates={
            ("only", "signal"): Template(np.array([signal]), np.array([of_signal])),
            ("only", "rest"): Template(np.array([background]), np.array([of_background])),
        },
    )
    return event_numbers(Model(templates))


# --- closed forms ---------------------------------------------------------------------------------------------------


def test_counting_experiment() -> None:
    """n = R/R₀ s + b: error² of R is (R₀/s)² (n + V_s + V_b), by propagation of errors; the expansion is exact."""
    numbers = counting(40.0, 60.0, 25.0, 9.0)
    scale = 0.3 / 40.0
    assert numbers.errors(np.inf) == pytest.approx([scale * 10.0], rel=1e-12)
    assert numbers.errors(1.0) == pytest.approx([scale * np.sqrt(100.0 + 25.0 + 9.0)], rel=1e-12)
    assert numbers.errors([0.5, 2.0]) == pytest.approx([scale * np.sqrt(100.0 + 50.0 + 4.5)], rel=1e-12)
    assert numbers.parts([0.5, 2.0]) == pytest.approx(scale * np.sqrt([[50.0, 4.5]]), rel=1e-12)
    assert numbers.first_order() == pytest.approx(scale**2 * np.array([[25.0, 9.0]]), rel=1e-12)
    # A share q of the error: V/f = q² n.
    for found in (numbers.needed(0.1), numbers.needed_first_order(0.1)):
        assert found == pytest.approx(np.array([[25.0, 9.0]]) / (0.01 * 100.0), rel=1e-6)
    assert numbers.needed([0.1, 0.2])[0] == pytest.approx([25.0, 9.0 / 4.0], rel=1e-6)
    assert numbers.costs([0.5, 2.0]) == pytest.approx(np.sqrt([[0.5, 0.045]]), rel=1e-9)


def test_number_of_simulated_background_events() -> None:
    """n = s + b with b from m simulated events of weight w = b/m: σ² = n + b²/m, so a share q takes m = b²/(q² n)
    (propagation of errors). The variance of the template is known as well as m: relative error 1/√m."""
    b, m = 60.0, 240.0
    numbers = counting(40.0, b, 0.0, b**2 / m)
    assert m * numbers.needed(0.1)[0, 1] == pytest.approx(b**2 / (0.01 * 100.0), rel=1e-6)
    assert numbers.first_order_errors()[0, 1] / numbers.first_order()[0, 1] == pytest.approx(m**-0.5, rel=1e-12)
    assert numbers.part_errors(1.0)[0, 1] / numbers.parts(1.0)[0, 1] == pytest.approx(0.5 * m**-0.5, rel=1e-12)
    assert numbers.needed(0.1)[0, 0] == 0.0  # the exact one needs nothing


def test_two_free_components_in_two_bins() -> None:
    """As many bins as free parameters: the fit solves μ = n, so the covariance is M⁻¹ C M⁻ᵀ with M the contents and
    C = diag(n + V) (linear algebra); no weights enter, so the expansion is exact."""
    contents = np.array([[50.0, 20.0], [30.0, 80.0]])  # bin, component
    spread = np.array([[8.0, 3.0], [2.0, 12.0]])
    templates = TemplateSet(
        (problems.axes("two", 2),),
        tuple(Component(name, name, "background", (name,)) for name in ("R_D", "R_Dst")),
        tuple(ScaleParameter(name, name, "ratio", 0.3) for name in ("R_D", "R_Dst")),
        (),
        {("two", name): Template(contents[:, k], spread[:, k]) for k, name in enumerate(("R_D", "R_Dst"))},
    )
    numbers = event_numbers(Model(templates))
    inverse = np.linalg.inv(contents / 0.3)
    for factors in ([1.0, 1.0], [0.2, 3.0]):
        counts = contents.sum(axis=1) + spread @ (1.0 / np.array(factors))
        assert numbers.errors(factors) ** 2 == pytest.approx(np.diag(inverse @ np.diag(counts) @ inverse.T), rel=1e-10)
    assert numbers.first_order() == pytest.approx((inverse**2) @ spread, rel=1e-10)


# --- against fits ---------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("make", [problems.small, problems.real_size])
def test_errors_are_those_of_fits_to_templates_of_that_size(make) -> None:  # type: ignore[no-untyped-def]
    """The fit to the expected set with all variances over the factors, its error from the Hessian, and its budget."""
    rng = np.random.default_rng(problems.SEED)
    templates = make()
    numbers = event_numbers(Model(templates))
    names = [component.name for component in templates.components]
    factors = np.exp(rng.uniform(-2.0, 2.0, len(names)))
    model = Model(thinned(templates, dict(zip(names, factors.tolist(), strict=True))))
    result = maximise(model, model.expected_data())
    split = budget(model, result)
    parts = np.sqrt((numbers.parts(factors) ** 2).sum(axis=1))
    for place, name in enumerate(numbers.ratios):
        assert numbers.errors(factors)[place] == pytest.approx(result.error(name), rel=1e-8)
        assert parts[place] == pytest.approx(split[name].rows["template statistics"], rel=1e-8)


def test_fits_with_functions_and_held_parameters() -> None:
    templates = problems.small()
    model = Model(templates, functions={"yield_Dst_light": "yield_D_light"}, fixed={"R_Dst": 0.27, "R0": 0.5})
    numbers = event_numbers(model)
    assert numbers.ratios == ("R_D",)
    result = maximise(model, model.expected_data({"R_Dst": 0.27, "R0": 0.5}))
    assert numbers.errors(1.0)[0] == pytest.approx(result.error("R_D"), rel=1e-7)


def test_fits_with_coefficients() -> None:
    model = Model(problems.following(events=20.0), coefficients=("SR",))
    numbers = event_numbers(model)
    assert numbers.ratios == ("R_D", "R_Dst", "SR")
    result = maximise(model, model.expected_data())
    assert numbers.errors(1.0) == pytest.approx([result.error(name) for name in numbers.ratios], rel=1e-6)


def test_needed_events_cost_their_share() -> None:
    """By fits: one template poor as needed, all others exact."""
    templates = problems.small()
    numbers = event_numbers(Model(templates))
    names = [component.name for component in templates.components]
    needed = numbers.needed(0.15)

    def error(ratio: str, factors: dict[str, float]) -> float:
        model = Model(thinned(templates, dict.fromkeys(names, 1e12) | factors))
        return maximise(model, model.expected_data()).error(ratio)

    for r, ratio in enumerate(numbers.ratios):
        for s, name in enumerate(names):
            grown = error(ratio, {name: float(needed[r, s])}) / error(ratio, {})
            assert grown == pytest.approx(np.sqrt(1.0 + 0.15**2), rel=1e-6), (ratio, name)


def test_the_formula_is_an_upper_bound_and_becomes_exact() -> None:
    """Gauss and Markov: weights that know of the noise do at least as well as those of exact templates."""
    for make in (problems.small, problems.real_size):
        numbers = event_numbers(Model(make()))
        for share in (0.5, 0.1, 0.01):
            full, formula = numbers.needed(share), numbers.needed_first_order(share)
            assert np.all(full <= formula * (1.0 + 1e-6))
        assert full == pytest.approx(formula, rel=2e-3)  # the smallest of the shares
        exact, parts = numbers.errors(np.inf) ** 2, numbers.first_order()
        for factor in (0.1, 1.0, 10.0):
            assert np.all(numbers.errors(factor) ** 2 <= (exact + (parts / factor).sum(axis=1)) * (1.0 + 1e-9))


def test_scatter_of_fits_with_redrawn_templates() -> None:
    """Templates of one component drawn anew, event by event in numpy, fitted to the expected set of the true ones: the
    variance of the fitted ratio is the part of that component. (n - 1) s²/σ² follows χ² with n - 1 degrees."""
    rng = np.random.default_rng(problems.SEED)
    true, sets, each = problems.small(factor=4.0), 300, {"Dst_light": 0.25, "other": 0.3, "D_tau": 0.2, "Dst_tau": 0.2}
    unit = {key: Template(t.nominal, each.get(key[1], 0.0) * t.nominal, t.plus, t.minus) for key, t in
            true.templates.items()}  # fmt: skip
    templates = replace(true, templates=unit)
    model = Model(templates)
    numbers = event_numbers(model)
    counts = model.expected_counts()
    parts = numbers.parts(1.0)
    for name, weight in each.items():
        values = []
        for _ in range(sets):
            drawn = {}
            for key, t in templates.templates.items():
                if key[1] == name:
                    share = weight * rng.poisson(t.nominal / weight) / t.nominal
                    plus, minus = ({k: side * share for k, side in sides.items()} for sides in (t.plus, t.minus))
                    drawn[key] = Template(share * t.nominal, share * t.variance, plus, minus)
            other = Model(replace(templates, templates={**templates.templates, **drawn}))
            result = maximise(other, Data(counts, other.injected, np.ones(other.bins)))
            values.append([result.value(ratio) for ratio in numbers.ratios])
        scatter = np.var(np.array(values), axis=0, ddof=1)
        for place, ratio in enumerate(numbers.ratios):
            statistic = (sets - 1) * scatter[place] / parts[place, numbers.samples.index(name)] ** 2
            tail = min(stats.chi2.cdf(statistic, sets - 1), stats.chi2.sf(statistic, sets - 1))
            assert tail > UNLIKELY, (name, ratio, statistic / (sets - 1))


# --- samples and mistakes -------------------------------------------------------------------------------------------


def test_samples_gather_components_and_leave_others_as_they_are() -> None:
    templates = problems.small()
    model = Model(templates)
    one = event_numbers(model)
    two = event_numbers(model, {"taus": ("D_tau", "Dst_tau"), "light": ("D_light", "Dst_light")})
    assert two.samples == ("taus", "light")
    assert two.errors(1.0) == pytest.approx(one.errors(1.0), rel=1e-12)
    # "other" belongs to no sample: it stays as poor as it is when all samples are exact.
    assert two.errors(np.inf) == pytest.approx(one.errors([np.inf, np.inf, np.inf, np.inf, 1.0]), rel=1e-12)
    assert two.errors([2.0, 0.5]) == pytest.approx(one.errors([2.0, 2.0, 0.5, 0.5, 1.0]), rel=1e-12)
    assert (two.parts(1.0) ** 2)[:, 0] == pytest.approx((one.parts(1.0) ** 2)[:, :2].sum(axis=1), rel=1e-12)


def test_template_statistics_count_even_if_the_fit_leaves_them_out() -> None:
    templates = problems.small()
    counted, left_out = Model(templates), Model(templates, template_statistics=False)
    assert event_numbers(left_out).errors(0.5) == pytest.approx(event_numbers(counted).errors(0.5), rel=1e-12)


@pytest.mark.parametrize(
    ("samples", "what"),
    [
        ({"a": ("D_tau", "none")}, "there is no such component"),
        ({"a": ("D_tau",), "b": ("D_tau",)}, "component D_tau is in two samples"),
    ],
)
def test_wrong_samples(samples: dict[str, tuple[str, ...]], what: str) -> None:
    with pytest.raises(InputError, match=what):
        event_numbers(Model(problems.small()), samples)


def test_wrong_numbers() -> None:
    numbers = event_numbers(Model(problems.small()))
    for wrong in (0.0, -1.0, np.nan):
        with pytest.raises(InputError, match="multiples of the generated events"):
            numbers.errors(wrong)
        with pytest.raises(InputError, match="share of the error"):
            numbers.needed(wrong)


def test_nothing_to_judge_by() -> None:
    with pytest.raises(InputError, match="no ratio is fitted"):
        event_numbers(Model(problems.small(), fixed={"R_D": 0.3, "R_Dst": 0.25}))


def test_ratios_that_are_not_determined() -> None:
    """A ratio and a free yield that multiply the same component alone."""
    templates = replace(
        problems.one_bin(),
        components=(Component("signal", "signal", "signal", ("R_D", "yield_b")), problems.one_bin().components[1]),
        parameters=(*problems.one_bin().parameters, ScaleParameter("yield_b", "b", "yield", 1.0)),
    )
    with pytest.raises(RunError, match=re.escape("the expected set does not determine the ratios")):
        event_numbers(Model(templates))
