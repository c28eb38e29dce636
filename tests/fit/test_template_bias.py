"""Bias and understated errors from poor templates: errors in variables in closed form, and toys with new templates.

Differences of toys with the same random numbers are asked to be within five and a half of their errors, and what the
next order may add; twelve comparisons: a fresh seed fails with a chance below 1e-5.
"""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from semitau.core.errors import InputError
from semitau.core.templates import Template, TemplateSet
from semitau.fit import Model, event_numbers, toys_with_new_templates
from semitau.fit.uncertainty.template_bias import template_bias

from . import problems
from .poor_models import poor


def signal_on(background: float) -> tuple[TemplateSet, np.ndarray, np.ndarray]:
    """A signal with a noisy template on an exact background; its contents and their variances."""
    x = (np.arange(20) + 0.5) / 20
    contents = 30.0 + 60.0 * np.exp(-0.5 * ((x - 0.5) / 0.15) ** 2)
    variance = contents * (0.5 + x)
    templates = replace(
        problems.one_bin(),
        categories=(problems.axes("only", 20),),
        templates={
            ("only", "signal"): Template(contents, variance),
            ("only", "rest"): Template(np.full(20, background), np.zeros(20)),
        },
    )
    return templates, contents, variance


def test_attenuation_of_a_noisy_regressor() -> None:
    """Where the background dominates, the fit is a regression of the counts on the template with weights 1/μ, and noise
    of variance V in the regressor takes the part Σ(V/μ)/Σ(T²/μ) off the slope, and adds it to the information (W. A.
    Fuller, Measurement Error Models, 1987, section 1.1; from memory). The factor of the bin gives back V T/μ² of it."""
    for background, close in ((3e7, 1e-4), (300.0, 1e-10)):
        templates, contents, variance = signal_on(background)
        found = template_bias(Model(templates))
        mu = contents + background
        information = np.sum(contents**2 / mu)
        part = np.sum(variance / mu) / information
        exact = np.sum(variance / mu * (1.0 - contents / mu)) / information
        assert found.bias[0] == pytest.approx([-0.3 * exact, 0.0], rel=1e-10)
        inside = np.sum(variance / mu * (1.0 - (contents / mu) ** 2)) / information
        assert found.understated[0] == pytest.approx([inside, 0.0], rel=1e-10)
        if close == 1e-4:
            assert found.bias[0, 0] == pytest.approx(-0.3 * part, rel=close)


def test_attenuation_where_the_fit_takes_its_templates_as_exact() -> None:
    """Plain least squares with weights 1/μ: the whole part Σ(V/μ)/Σ(T²/μ) is lost (as above), and the error leaves out
    what the noise of the signal adds to the counts, Σ (T/μ)² V/(Σ T²/μ)², by propagation of errors."""
    templates, contents, variance = signal_on(300.0)
    found = template_bias(Model(templates, template_statistics=False))
    mu = contents + 300.0
    information = np.sum(contents**2 / mu)
    part = np.sum(variance / mu) / information
    assert found.bias[0] == pytest.approx([-0.3 * part, 0.0], rel=1e-10)
    added = np.sum((contents / mu) ** 2 * variance) / information
    assert found.understated[0] == pytest.approx([part + added, 0.0], rel=1e-10)
    assert template_bias(Model(templates, template_statistics=False), {}).bias.shape == (1, 0)


def test_error_of_the_bias_is_that_of_its_events() -> None:
    """With one bin the bias is proportional to V: n events of one weight know it to 1/√n."""
    templates = replace(
        problems.one_bin(),
        templates={
            ("only", "signal"): Template(np.array([40.0]), np.array([16.0])),  # 100 events of weight 0.4
            ("only", "rest"): Template(np.array([60.0]), np.array([0.0])),
        },
    )
    found = template_bias(Model(templates))
    assert abs(found.bias_error[0, 0] / found.bias[0, 0]) == pytest.approx(0.1, rel=1e-12)
    assert abs(found.understated_error[0, 0] / found.understated[0, 0]) == pytest.approx(0.1, rel=1e-12)


@pytest.mark.parametrize("multiple", [1.0, 1.2])
@pytest.mark.parametrize("generated", [(4e5, 4e5), (3e5, 3e6)])
@pytest.mark.parametrize("counted", [True, False])
def test_bias_of_toys_with_new_templates(multiple: float, generated: tuple[float, float], counted: bool) -> None:
    toys = 3000
    model = Model(poor(None, generated=generated), template_statistics=counted)
    true = {"R_D": 0.3 * multiple}
    found = template_bias(model, injected=true)
    exact, same = (
        toys_with_new_templates(model, factor, toys, problems.SEED, 2, injected=true) for factor in (np.inf, 1.0)
    )
    shifts = same.fitted("R_D") - exact.fitted("R_D")
    predicted, noise = float(found.bias.sum()), float(shifts.std()) / toys**0.5
    numbers = event_numbers(model)
    growth = (numbers.errors(1.0) / numbers.errors(np.inf))[0] ** 2
    # What a fit that takes its templates as exact leaves out is missing in its error, but is no false information.
    left_out = 0.0 if counted else float(numbers.first_order().sum() / numbers.errors(np.inf)[0] ** 2)
    false = float(found.understated.sum()) - left_out
    # The next order is smaller by the part of the information that is noise.
    beyond = 1.5 * abs(predicted) * (float(np.abs(found.understated).sum()) - left_out)
    assert abs(shifts.mean() - predicted) < 5.5 * noise + beyond
    reported = (same.fit_errors("R_D") / exact.fit_errors("R_D")) ** 2
    whole = (growth if counted else 1.0) * (1.0 - false)
    spread = float(reported.std()) / toys**0.5
    assert abs(reported.mean() - whole) < 5.5 * spread + 1.5 * false**2 + 0.01


@pytest.mark.parametrize("form", ["approximate", "exact"])
def test_other_forms_are_not_pulled_and_not_judged(form: str) -> None:
    """Their factors take the bias away, but not the understated error (arXiv:2401.10542): toys against toys."""
    toys, true = 600, {"R_D": 0.36}
    pulled = template_bias(Model(poor(None)), injected=true).bias.sum()
    model = Model(poor(None), likelihood=form)
    exact, same = (toys_with_new_templates(model, f, toys, problems.SEED, 2, injected=true) for f in (np.inf, 1.0))
    shifts = same.fitted("R_D") - exact.fitted("R_D")
    noise = float(shifts.std()) / toys**0.5
    assert abs(shifts.mean()) < 5.5 * noise < 0.5 * abs(pulled)
    with pytest.raises(InputError, match=rf"not known for this form of the likelihood \(got {form}, allowed light"):
        template_bias(model)


def test_samples_add_up() -> None:
    model = Model(problems.small())
    one, two = (
        template_bias(model),
        template_bias(model, {"taus": ("D_tau", "Dst_tau"), "rest": ("D_light", "Dst_light", "other")}),
    )
    assert two.bias[:, 0] == pytest.approx(one.bias[:, :2].sum(axis=1), rel=1e-10)
    assert two.understated[:, 0] == pytest.approx(one.understated[:, :2].sum(axis=1), rel=1e-10)


def test_equal_weights_of_all_components_pull_nowhere() -> None:
    """If every generated event of a bin has the same weight, the factor of the bin knows all there is to know."""
    model = Model(problems.real_size())  # variance 0.05 times the contents, everywhere
    found, numbers = template_bias(model), event_numbers(model)
    assert np.all(np.abs(found.bias.sum(axis=1)) < 1e-9 * numbers.errors(1.0))
    assert np.all(np.abs(found.bias).max(axis=1) > 1e-3 * numbers.errors(1.0))


def test_not_with_fitted_coefficients() -> None:
    with pytest.raises(InputError, match="is not known while coefficients are fitted"):
        template_bias(Model(problems.following(), coefficients=("SR",)))
