"""Expected errors from bin contents: closed forms of counting experiments and groupings, and the fit itself.

The statistical test fails by chance below 1e-4; SEMITAU_TEST_SEED changes its seed.
"""

from __future__ import annotations

import os
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import optimize, stats
from semitau.core.templates import Component, Nuisance, ScaleParameter, Template, TemplateSet
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.likelihood.constraints import Correlated, LogNormal
from semitau.fit.uncertainty.working_points import (
    Sensitivity,
    add_cross_information,
    scale_columns,
    side_columns,
)

from tests.fit.problems import axes, one_bin, small

Floats = NDArray[np.float64]
SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))


def contents_of(model: Model, templates: TemplateSet, mirrored: dict[str, str] | None = None) -> Floats:
    """(bins, 3 + names) of a template set, by its definition: sums over components, one event for each bin."""
    sensitivity = Sensitivity.of(model)
    scales, sides = scale_columns(model), side_columns(model, mirrored or {})
    parts = []
    for category in templates.categories:
        bins = np.zeros((int(np.prod(category.shape)), 3 + len(sensitivity.names)))
        bins[:, 2] = 1.0
        for (name, component), template in templates.templates.items():
            if name != category.name:
                continue
            bins[:, 0] += template.nominal.ravel()
            bins[:, 1] += template.variance.ravel()
            for parameter, factor in scales[component]:
                bins[:, 3 + sensitivity.names.index(parameter)] += factor * template.nominal.ravel()
            for nuisance in template.plus:
                for sign, side in ((1, template.plus), (-1, template.minus)):
                    if (nuisance, sign) in sides:
                        parameter, factor = sides[nuisance, sign]
                        change = (side[nuisance] - template.nominal).ravel()
                        bins[:, 3 + sensitivity.names.index(parameter)] += factor * change
        parts.append(bins)
    return np.concatenate(parts)


OPTIONS: list[dict[str, Any]] = [
    {},
    {"template_statistics": False},
    {"fixed": {"R_Dst": 0.254}},
    {"fixed": {"lepton_id": 0.0}},
    {"functions": {"R_Dst": f"{0.254 / 0.299!r} * R_D"}},
    {"constraints": {"yield_other": LogNormal(0.2)}},
    {"correlated": [Correlated(("R0", "lepton_id"), [[1.0, 0.5], [0.5, 2.0]])]},
]


@pytest.mark.parametrize("options", OPTIONS)
def test_errors_are_those_of_the_fit_to_the_expected_set(options: dict[str, Any]) -> None:
    """Reference: Newton's minimum of the whole likelihood, exact Hessian."""
    templates = small()
    model = Model(templates, **options)
    fitted = maximise(model, model.expected_data())
    sensitivity = Sensitivity.of(model)
    covariance = sensitivity.covariance(sensitivity.information(contents_of(model, templates)))
    assert covariance is not None
    places = [model.index(name) for name in sensitivity.ratios]
    np.testing.assert_allclose(covariance, fitted.covariance[np.ix_(places, places)], rtol=1e-6)


def test_counting_experiment() -> None:
    """s = 40, b = 60, templates with a variance of 21: σ(s)/s = √(s + b + V)/s."""
    templates = one_bin(variance=21.0)
    model = Model(templates)
    sensitivity = Sensitivity.of(model)
    covariance = sensitivity.covariance(sensitivity.information(contents_of(model, templates)))
    assert covariance is not None
    assert np.sqrt(covariance[0, 0]) / 0.3 == pytest.approx(np.sqrt(100.0 + 21.0) / 40.0, rel=1e-12)


def test_best_cut_of_exponentials() -> None:
    """Signal e^(-x), background e^(-x/2)/2 over x < c: the maximum of s/√(s + b), by scipy."""
    signal, background = 50.0, 400.0

    def merit(c: float) -> float:
        s, b = signal * -np.expm1(-c), background * -np.expm1(-c / 2.0)
        return float(np.sqrt(s + b) / s)

    best = optimize.minimize_scalar(merit, (0.2, 6.0), method="bounded", bounds=(0.1, 8.0), options={"xatol": 1e-9})
    cuts = np.linspace(0.1, 8.0, 400)
    found = []
    for c in cuts:
        templates = one_bin(signal * -np.expm1(-c), background * -np.expm1(-c / 2.0))
        model = Model(templates)
        sensitivity = Sensitivity.of(model)
        covariance = sensitivity.covariance(sensitivity.information(contents_of(model, templates)))
        assert covariance is not None
        found.append(np.sqrt(covariance[0, 0]) / 0.3)
    assert found == pytest.approx([merit(c) for c in cuts], rel=1e-9)
    assert abs(cuts[int(np.argmin(found))] - best.x) <= cuts[1] - cuts[0]


@pytest.mark.parametrize(("groups", "kept"), [(2, 0.6366), (3, 0.8098), (4, 0.8825), (6, 0.9420)])
def test_information_left_by_grouping_a_gaussian(groups: int, kept: float) -> None:
    """Location of a Gaussian from its best groups: D. R. Cox, J. Amer. Statist. Assoc. 52 (1957) 543 (values from
    memory; the first is 2/π). The location is a nuisance without constraint of its own; many events."""
    events = 1e8

    def left(cuts: Floats) -> float:
        edges = np.concatenate([[-np.inf], np.sort(cuts), [np.inf]])
        step = 1e-4
        nominal, plus, minus = (events * np.diff(stats.norm.cdf(edges, loc)) for loc in (0.0, step, -step))
        templates = TemplateSet(
            categories=(axes("only", groups),),
            components=(Component("signal", "s", "signal", ("R_D",)),),
            parameters=(ScaleParameter("R_D", "R(D)", "ratio", 0.3),),
            nuisances=(Nuisance("location", "location", "shape"),),
            templates={
                ("only", "signal"): Template(nominal, np.zeros(groups), {"location": plus}, {"location": minus})
            },
        )
        model = Model(templates)
        information = Sensitivity.of(model).information(contents_of(model, templates))
        place = Sensitivity.of(model).names.index("location")
        return float(information[place, place] / step**2 / events)

    start = stats.norm.ppf(np.arange(1, groups) / groups)
    best = optimize.minimize(lambda cuts: -left(cuts), start, method="Nelder-Mead", options={"xatol": 1e-4})
    assert -best.fun == pytest.approx(kept, abs=1e-4)


def test_known_exactly_is_held() -> None:
    """Without a nuisance the errors are those of the fit that holds it."""
    templates = small()
    model = Model(templates)
    name = templates.nuisances[0].name
    held = Model(templates, fixed={name: 0.0})
    fitted = maximise(held, held.expected_data())
    information = Sensitivity.of(model).information(contents_of(model, templates))
    exact = Sensitivity.of(model).without(name)
    covariance = exact.covariance(information)
    assert covariance is not None
    for k, ratio in enumerate(exact.ratios):
        assert np.sqrt(covariance[k, k]) == pytest.approx(fitted.error(ratio), rel=1e-6)


def test_nothing_to_tell_the_ratios() -> None:
    model = Model(small())
    sensitivity = Sensitivity.of(model)
    assert sensitivity.covariance(np.zeros((len(sensitivity.names),) * 2)) is None


def test_mirrored_side() -> None:
    """Only the kept side counts: its change, once."""
    model = Model(small())
    name = model.templates.nuisances[0].name
    assert side_columns(model, {name: "plus"})[name, 1] == (name, 1.0)
    assert (name, -1) not in side_columns(model, {name: "plus"})
    assert side_columns(model, {name: "minus"})[name, -1] == (name, -1.0)
    assert side_columns(model, {})[name, -1] == (name, -0.5)


def test_products_of_batches_hold_no_noise() -> None:
    """Derivatives that are nothing but noise: the plain information is positive, that of different batches is zero on
    average. Chance of failing: below 1e-4 (four standard errors of the mean over 400 samples)."""
    rng = np.random.default_rng(SEED)
    batches, bins = 8, 50
    plain, clean = [], []
    for _ in range(400):
        parts = np.zeros((batches, bins, 4))
        parts[:, :, 0], parts[:, :, 2] = 10.0, 5.0
        parts[:, :, 3] = rng.normal(size=(batches, bins))
        whole = parts.mean(axis=0)
        out = np.zeros((1, 1))
        add_cross_information(parts, whole, False, out)
        clean.append(out[0, 0])
        plain.append(float((whole[:, 3] ** 2 / whole[:, 0]).sum()))
    assert np.mean(plain) == pytest.approx(bins / batches / 10.0, rel=0.1)
    assert abs(np.mean(clean)) < 4.0 * np.std(clean) / np.sqrt(len(clean))


def test_products_of_batches_without_noise_are_the_whole() -> None:
    parts = np.broadcast_to(np.array([10.0, 2.0, 5.0, 3.0, -1.0]), (4, 6, 5)).copy()
    clean = np.zeros((2, 2))
    add_cross_information(parts, parts[0].copy(), True, clean)
    assert np.tril(clean) == pytest.approx(6.0 / 12.0 * np.tril(np.outer([3.0, -1.0], [3.0, -1.0])))
