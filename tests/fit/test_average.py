"""Averages against a published one, closed forms, explicit nuisance parameters, a grid, and toys."""

from __future__ import annotations

import os

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy import stats
from semitau.core.errors import InputError
from semitau.fit.averages.combination import Average, Form, average, chi2_at
from semitau.fit.averages.compatibility import Prediction, Tension, contour, ellipse, standard_deviations, tension
from semitau.fit.averages.input_vector import inputs
from semitau.fit.averages.measurements import Measured, Measurement, Spread

SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))

# Inputs of the average in EPJC 81 (2021) 226, Table 92; numbers from memory.
PUBLISHED_INPUTS = (
    Measurement(
        "measurement 1", {"R_D": Measured(0.440, 0.058, 0.042), "R_Dst": Measured(0.332, 0.024, 0.018)}, -0.45, -0.07
    ),
    Measurement(
        "measurement 2", {"R_D": Measured(0.375, 0.064, 0.026), "R_Dst": Measured(0.293, 0.038, 0.015)}, -0.56, -0.11
    ),
    Measurement("measurement 3", {"R_Dst": Measured(0.336, 0.027, 0.030)}),
    Measurement("measurement 4", {"R_Dst": Measured(0.270, 0.035, (0.028, 0.025))}),
    Measurement("measurement 5", {"R_Dst": Measured(0.280, 0.018, 0.029)}),
    Measurement(
        "measurement 6", {"R_D": Measured(0.307, 0.037, 0.016), "R_Dst": Measured(0.283, 0.018, 0.014)}, -0.53, -0.51
    ),
)
PREDICTION = Prediction({"R_D": (0.299, 0.003), "R_Dst": (0.258, 0.005)})
FORMS: tuple[Form, ...] = ("linear", "likelihood")


def one(value: float, error: Spread, name: str = "one", systematic: Spread = 0.0) -> Measurement:
    return Measurement(name, {"R_D": Measured(value, error, systematic)})


def compared(found: Average, prediction: Prediction) -> Tension:
    result = tension(found, prediction)
    assert result is not None
    return result


# ── Published ───────────────────────────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("form", FORMS)
def test_published_average(form: Form) -> None:
    """EPJC 81 (2021) 226, Table 92 (from memory): 0.340(27)(13), 0.295(11)(8), correlation -0.38.

    The published one also correlates sources across measurements, which the table does not list: the values may move
    by a sixth of their error, the systematic error by a tenth, the correlation by 0.02.
    """
    found = average(PUBLISHED_INPUTS, form=form)
    assert found.ratios == ("R_D", "R_Dst")
    assert found.value("R_D") == pytest.approx(0.340, abs=0.030 / 6)
    assert found.value("R_Dst") == pytest.approx(0.295, abs=0.014 / 6)
    assert np.sqrt(np.diag(found.statistical)) == pytest.approx([0.027, 0.011], abs=0.001)
    assert np.sqrt(np.diag(found.systematic)) == pytest.approx([0.013, 0.008], abs=0.001)
    assert found.correlation[0, 1] == pytest.approx(-0.38, abs=0.02)
    assert found.degrees_of_freedom == 9 - 2


def test_published_tension() -> None:
    """From the published average itself: 3.08, 1.4 and 2.5 sigma; its digits allow 0.03 and 0.06."""
    published = Measurement(
        "published", {"R_D": Measured(0.340, 0.027, 0.013), "R_Dst": Measured(0.295, 0.011, 0.008)}, -0.38, -0.38
    )
    found = compared(average([published]), PREDICTION)
    assert found.sigmas == pytest.approx(3.08, abs=0.03)
    assert found.each["R_D"] == pytest.approx(1.4, abs=0.06)
    assert found.each["R_Dst"] == pytest.approx(2.5, abs=0.06)
    assert found.degrees_of_freedom == 2


@pytest.mark.parametrize(("sigmas", "height"), [(1, 2.30), (2, 6.18), (3, 11.83)])
def test_standard_deviations_of_two_ratios(sigmas: int, height: float) -> None:
    """Heights for joint regions of two parameters: Particle Data Group, review "Statistics", table of Delta chi^2."""
    assert standard_deviations(height, 2) == pytest.approx(sigmas, abs=0.003)


def test_standard_deviations_far_out() -> None:
    """Against the Gaussian itself where p does not underflow, and against its tail series where it does.

    Q(z) = exp(-z^2/2) / (z sqrt(2 pi)) (1 - 1/z^2 + ...): Abramowitz and Stegun 26.2.12.
    """
    for z in (0.5, 3.0, 8.0):
        assert standard_deviations(z**2, 1) == pytest.approx(z)
        assert standard_deviations(float(-2 * np.log(2 * stats.norm.sf(z))), 2) == pytest.approx(z)
    z = standard_deviations(4000.0, 2)
    tail = np.log(2.0) - z**2 / 2 - np.log(z * np.sqrt(2 * np.pi)) + np.log1p(-1 / z**2)
    assert tail == pytest.approx(-2000.0, abs=1e-5)
    assert standard_deviations(0.0, 2) == standard_deviations(1e-300, 2) == 0.0
    # three degrees of freedom: p = erfc(sqrt(x/2)) + sqrt(2x/pi) exp(-x/2), Abramowitz and Stegun 26.4.4 (from memory)
    x = 3000.0
    z = standard_deviations(x, 3)
    tail = np.log(2.0) - z**2 / 2 - np.log(z * np.sqrt(2 * np.pi)) + np.log1p(-1 / z**2)
    assert tail == pytest.approx(-x / 2 + np.log(np.sqrt(2 * x / np.pi)), abs=1e-3)


# ── Closed forms ────────────────────────────────────────────────────────────────────────────────────────────────────


@pytest.mark.parametrize("rho", [-0.9, -0.3, 0.0, 0.3, 0.5, 0.8, 0.95])
def test_two_correlated_measurements(rho: float) -> None:
    """L. Lyons, D. Gibaut, P. Clifford, NIM A 270 (1988) 110: with correlation beyond s1/s2 a weight is negative."""
    s1, s2, x1, x2 = 0.02, 0.04, 0.30, 0.35
    common = {"shared": rho}
    pair = [
        Measurement(name, {"R_D": Measured(x, 0.0, s)}, sources={"shared": {"R_D": s}})
        for name, x, s in (("a", x1, s1), ("b", x2, s2))
    ]
    found = average(pair, common)
    whole = s1**2 + s2**2 - 2 * rho * s1 * s2
    weight = (s2**2 - rho * s1 * s2) / whole
    assert found.weights[0] == pytest.approx([weight, 1 - weight])
    assert (found.weights.min() < 0.0) == (rho > s1 / s2)
    assert found.value("R_D") == pytest.approx(weight * x1 + (1 - weight) * x2)
    assert (found.value("R_D") < x1) == (rho > s1 / s2), "a negative weight puts the average outside of both"
    assert found.error("R_D") ** 2 == pytest.approx(s1**2 * s2**2 * (1 - rho**2) / whole)
    assert found.chi2 == pytest.approx((x1 - x2) ** 2 / whole)


def test_independent_measurements() -> None:
    """The weighted mean of any textbook, its chi^2, and pulls of unit width: (x - mean) / sqrt(s^2 - s_mean^2)."""
    x, s = np.array([0.30, 0.36, 0.28, 0.41]), np.array([0.02, 0.03, 0.05, 0.04])
    found = average([one(value, error, f"m{i}") for i, (value, error) in enumerate(zip(x, s, strict=True))])
    w = 1 / s**2
    mean = (w * x).sum() / w.sum()
    assert found.value("R_D") == pytest.approx(mean)
    assert found.error("R_D") == pytest.approx(w.sum() ** -0.5)
    assert found.weights[0] == pytest.approx(w / w.sum())
    assert found.chi2 == pytest.approx((w * (x - mean) ** 2).sum())
    assert found.p_value == pytest.approx(stats.chi2.sf(found.chi2, 3))
    assert found.pulls == pytest.approx((x - mean) / np.sqrt(s**2 - 1 / w.sum()))


def test_one_measurement_stays_as_it_is() -> None:
    for form in FORMS:
        found = average(PUBLISHED_INPUTS[:1], form=form)
        assert found.values == pytest.approx([0.440, 0.332])
        assert found.errors == pytest.approx([np.hypot(0.058, 0.042), np.hypot(0.024, 0.018)])
        assert found.p_value is None
        assert np.isnan(found.pulls).all()


@pytest.mark.parametrize("number", [1, 2, 5])
def test_equal_asymmetric_measurements(number: int) -> None:
    """n equal measurements, Gaussian of linear width M + S x: n x^2 = (M + S x)^2 gives the errors M / (sqrt(n) -+ S).

    With n = 1 these are the errors that went in (R. Barlow, arXiv:physics/0406120).
    """
    up, down = 0.05, 0.03
    middle, slope = 2 * up * down / (up + down), (up - down) / (up + down)
    found = average([one(0.3, (up, down), f"m{i}") for i in range(number)], form="likelihood")
    assert found.value("R_D") == pytest.approx(0.3)
    assert found.up[0] == pytest.approx(middle / (np.sqrt(number) - slope), rel=1e-5)
    assert found.down[0] == pytest.approx(middle / (np.sqrt(number) + slope), rel=1e-5)
    if number == 1:
        assert (found.up[0], found.down[0]) == pytest.approx((up, down), rel=1e-5)


def test_two_kinds_of_asymmetric_errors_add_in_quadrature() -> None:
    found = average([one(0.27, (0.04, 0.03), systematic=(0.028, 0.025))], form="likelihood")
    assert found.up[0] == pytest.approx(np.hypot(0.04, 0.028), rel=1e-5)
    assert found.down[0] == pytest.approx(np.hypot(0.03, 0.025), rel=1e-5)


# ── Brute force ─────────────────────────────────────────────────────────────────────────────────────────────────────

SHARED = (
    Measurement(
        "a", {"R_D": Measured(0.36, 0.05, 0.04), "R_Dst": Measured(0.29, 0.02, 0.02)}, -0.4, 0.1,
        {"x": {"R_D": 0.02, "R_Dst": -0.01}, "y": {"R_D": 0.02, "R_Dst": 0.015}},
    ),
    Measurement("b", {"R_Dst": Measured(0.32, 0.03, 0.02)}, sources={"x": {"R_Dst": 0.01}}),
    Measurement(
        "c", {"R_D": Measured(0.31, 0.04, 0.03), "R_Dst": Measured(0.27, 0.02, 0.01)}, -0.5, -0.2,
        {"x": {"R_D": 0.015}, "y": {"R_D": 0.01, "R_Dst": 0.005}},
    ),
)  # fmt: skip


def test_common_sources_are_nuisance_parameters() -> None:
    """Fully common sources: the same as one parameter a source with a unit constraint, fitted with the ratios.

    Done by plain least squares here; the errors come from the normal equations of all parameters.
    """
    found = average(SHARED, {"x": 1.0, "y": 1.0})
    rows, right = [], []
    for m in SHARED:
        names = list(m.ratios)
        stat = np.array([m.ratios[r].statistical for r in names], float)
        syst = np.array([m.ratios[r].systematic for r in names], float)
        shift = np.array([[m.sources.get(s, {}).get(r, 0.0) for s in ("x", "y")] for r in names])
        off = 1 - np.eye(len(names))
        rest = np.outer(stat, stat) * (np.eye(len(names)) + off * m.statistical_correlation)
        rest += np.outer(syst, syst) * (np.eye(len(names)) + off * m.systematic_correlation) - shift @ shift.T
        white = np.linalg.inv(np.linalg.cholesky(rest))
        design = np.hstack([[[float(r == "R_D"), float(r == "R_Dst")] for r in names], shift])
        rows.append(white @ design)
        right.append(white @ [m.ratios[r].value for r in names])
    rows.append(np.hstack([np.zeros((2, 2)), np.eye(2)]))
    right.append(np.zeros(2))
    matrix, vector = np.vstack(rows), np.concatenate(right)
    solution, left, *_ = np.linalg.lstsq(matrix, vector)
    assert found.values == pytest.approx(solution[:2])
    assert found.covariance == pytest.approx(np.linalg.inv(matrix.T @ matrix)[:2, :2])
    assert found.chi2 == pytest.approx(left[0])
    # A source that is fixed takes its part of the error away: the same weights, on what is left.
    shift = np.array([m.sources.get("x", {}).get(r, 0.0) for m in SHARED for r in m.ratios])
    assert found.source_errors("x") == pytest.approx(np.abs(found.weights @ shift))
    alone = average(SHARED, {"x": 0.0, "y": 0.0})
    assert abs(found.value("R_D") - alone.value("R_D")) > 1e-4, "the sources should matter here"


def test_likelihood_against_a_grid() -> None:
    """Best point and errors of asymmetric measurements against the plain minimum over a fine grid."""
    measurements = [
        Measurement(
            "a", {"R_D": Measured(0.36, (0.06, 0.04), 0.02), "R_Dst": Measured(0.29, (0.02, 0.03), 0.01)}, -0.4, 0.2
        ),
        Measurement("b", {"R_Dst": Measured(0.32, 0.02, (0.02, 0.01))}),
        Measurement("c", {"R_D": Measured(0.30, (0.03, 0.05), 0.01)}),
    ]
    found = average(measurements, form="likelihood")
    given = inputs(measurements)
    step = 0.001
    first, second = np.arange(0.25, 0.42, step), np.arange(0.24, 0.36, step)
    heights = np.array([[chi2_at(given, np.array([a, b])) for b in second] for a in first])
    at = np.unravel_index(heights.argmin(), heights.shape)
    assert found.values == pytest.approx([first[at[0]], second[at[1]]], abs=step)
    assert found.chi2 == pytest.approx(heights.min(), abs=1e-3)
    for k, axis in enumerate((first, second)):
        inside = axis[heights.min(axis=1 - k) <= heights.min() + 1.0]
        assert found.values[k] - found.down[k] == pytest.approx(inside[0], abs=1.5 * step)
        assert found.values[k] + found.up[k] == pytest.approx(inside[-1], abs=1.5 * step)
    assert found.up[0] != pytest.approx(found.down[0], rel=0.02)


def test_forms_agree_for_symmetric_errors() -> None:
    common = {"x": 0.7, "y": 1.0}
    linear, curved = (average(SHARED, common, form) for form in FORMS)
    for attribute in ("values", "up", "down", "covariance", "weights", "pulls", "chi2", "p_value"):
        assert getattr(curved, attribute) == pytest.approx(getattr(linear, attribute), rel=1e-4, abs=1e-7), attribute
    for prediction in (
        PREDICTION,
        Prediction({"R_D": (0.299, 0.0), "R_Dst": (0.258, 0.0)}),
        Prediction({"R_D": (0.299, 0.02), "R_Dst": (0.258, 0.01)}, 0.8),
        Prediction({"R_Dst": (0.258, 0.005)}),
    ):
        a, b = compared(linear, prediction), compared(curved, prediction)
        assert b.chi2 == pytest.approx(a.chi2, rel=1e-5)
        assert b.each == pytest.approx(a.each, rel=1e-4)
    assert contour(curved, 0.683) == pytest.approx(contour(linear, 0.683), abs=1e-5)


# ── Toys ────────────────────────────────────────────────────────────────────────────────────────────────────────────


def test_errors_cover() -> None:
    """2000 sets of measurements drawn with all correlations: coverage, width of pulls, chi^2.

    Chance of failing: each of 5 numbers must be within 4 of its standard errors, 3e-4 together.
    """
    common, number = {"x": 0.6, "y": 1.0}, 2000
    truth = {"R_D": 0.30, "R_Dst": 0.26}
    given = inputs(SHARED, common)
    shape = np.linalg.cholesky(given.covariances().sum(axis=0))
    noise = np.random.default_rng(SEED).normal(size=(number, len(given.values))) @ shape.T
    pulls = np.empty((number, 2))
    chi2 = np.empty(number)
    for i, shifts in enumerate(noise):
        drawn = iter(shifts)
        toys = [m.moved_to({r: truth[r] + next(drawn) for r in m.ratios}) for m in SHARED]
        found = average(toys, common)
        pulls[i] = (found.values - list(truth.values())) / found.errors
        chi2[i] = found.chi2
    covered = (np.abs(pulls) < 1.0).mean(axis=0)
    assert covered == pytest.approx([0.6827] * 2, abs=4 * np.sqrt(0.6827 * 0.3173 / number))
    assert pulls.std(axis=0) == pytest.approx([1.0] * 2, abs=4 / np.sqrt(2 * number))
    assert chi2.mean() == pytest.approx(3.0, abs=4 * np.sqrt(6.0 / number))


# ── Tension, regions, what if ───────────────────────────────────────────────────────────────────────────────────────


def test_tension_with_correlated_prediction() -> None:
    """Two independent ratios, the closed form of a 2 x 2 inverse."""
    found = average([one(0.35, 0.03), Measurement("two", {"R_Dst": Measured(0.28, 0.01)})])
    rho = 0.5
    result = compared(found, Prediction({"R_D": (0.30, 0.02), "R_Dst": (0.25, 0.02)}, rho))
    a, b, c = 0.03**2 + 0.02**2, 0.01**2 + 0.02**2, rho * 0.02**2
    assert result.chi2 == pytest.approx((0.05**2 * b - 2 * 0.05 * 0.03 * c + 0.03**2 * a) / (a * b - c * c))
    assert result.each == pytest.approx({"R_D": 0.05 / a**0.5, "R_Dst": 0.03 / b**0.5})
    assert result.p_value == pytest.approx(np.exp(-result.chi2 / 2))  # two degrees of freedom


def test_tension_of_one_ratio_or_none() -> None:
    found = average([one(0.35, 0.03)])
    result = compared(found, PREDICTION)
    assert result.degrees_of_freedom == 1
    assert result.sigmas == pytest.approx(0.051 / np.hypot(0.03, 0.003))
    assert tension(found, Prediction({"R_Dst": (0.258, 0.005)})) is None


def test_the_error_towards_the_prediction_counts() -> None:
    found = average([one(0.35, (0.05, 0.02))], form="likelihood")
    sharp = Prediction({"R_D": (0.33, 0.0)})
    assert compared(found, sharp).each["R_D"] == pytest.approx(1.0, rel=1e-4)
    assert compared(found, sharp).sigmas == pytest.approx(1.0, rel=1e-4)


def test_regions_hold_their_share() -> None:
    """Gaussian pairs inside the contour, counted. Chance of failing: 6e-5 (4 sigma)."""
    found = average(PUBLISHED_INPUTS)
    line = contour(found, 0.90, 721) - found.values
    points = np.random.default_rng(SEED).multivariate_normal([0, 0], found.covariance, 20_000)
    angles = np.arctan2(line[:-1, 1], line[:-1, 0])
    order = np.argsort(angles)
    radius = np.interp(
        np.arctan2(points[:, 1], points[:, 0]), angles[order], np.hypot(*line[:-1].T)[order], period=2 * np.pi
    )
    share = (np.hypot(*points.T) < radius).mean()
    assert share == pytest.approx(0.90, abs=4 * np.sqrt(0.09 / len(points)))


def test_shadows_of_an_ellipse_are_the_errors() -> None:
    covariance = np.array([[4.0, -1.0], [-1.0, 1.0]])
    line = ellipse(np.array([1.0, 2.0]), covariance, 1.0, 3601)
    assert line.max(axis=0) == pytest.approx([1.0 + 2.0, 2.0 + 1.0], abs=1e-5)


def test_one_more_measurement() -> None:
    """Uncorrelated information adds: 1/V = 1/V1 + 1/V2; at the average the value stays and the tension grows."""
    found = average(PUBLISHED_INPUTS)
    planned = Measurement(
        "planned", {"R_D": Measured(0.0, 0.02, 0.01), "R_Dst": Measured(0.0, 0.01, 0.005)}, -0.3, -0.3
    )
    here = dict(zip(found.ratios, found.values, strict=True))
    joined = found.joined_by(planned, here)
    total = np.array([np.hypot(0.02, 0.01), np.hypot(0.01, 0.005)])
    own = np.outer(total, total) * np.array([[1.0, -0.3], [-0.3, 1.0]])
    assert joined.covariance == pytest.approx(np.linalg.inv(np.linalg.inv(found.covariance) + np.linalg.inv(own)))
    assert joined.values == pytest.approx(found.values)
    assert joined.chi2 == pytest.approx(found.chi2)
    predicted = found.joined_by(planned, {ratio: value for ratio, (value, _) in PREDICTION.ratios.items()})
    assert (
        compared(joined, PREDICTION).sigmas
        > compared(found, PREDICTION).sigmas
        > compared(predicted, PREDICTION).sigmas
    )


# ── Bad input ───────────────────────────────────────────────────────────────────────────────────────────────────────

PAIR = {"R_D": Measured(0.3, 0.05, 0.02), "R_Dst": Measured(0.3, 0.02, 0.02)}


def source_only(name: str, shift: float) -> Measurement:
    return Measurement(name, {"R_D": Measured(0.3, 0.0, 0.02)}, sources={"x": {"R_D": shift}})


BAD = {
    "nothing": ([], {}, "no measurement"),
    "no ratio": ([Measurement("a", {})], {}, "measurement a: measures no ratio"),
    "no error": ([one(0.3, 0.0, "a")], {}, "measurement a: R_D: has no error"),
    "one side without error": ([one(0.3, (0.1, 0.0), "a")], {}, "measurement a: R_D: has no error"),
    "negative error": ([one(0.3, (0.1, -0.1), "a")], {}, "is no error.*without a sign"),
    "infinite": ([one(float("nan"), 0.1, "a")], {}, "R_D: value: must be finite"),
    "same name": ([one(0.3, 0.1, "a"), one(0.3, 0.1, "a")], {}, "name of another measurement"),
    "no correlation": ([Measurement("a", PAIR, 1.2)], {}, "statistical_correlation: is no correlation.*1.2"),
    "source not listed": ([Measurement("a", PAIR, sources={"x": {"R_D": 0.01}})], {}, "no listed source"),
    "source of another ratio": (
        [Measurement("a", {"R_D": Measured(0.3, 0.1, 0.1)}, sources={"x": {"R_Dst": 0.01}})], {"x": 1.0}, "not meas",
    ),
    "source too large": ([source_only("a", 0.03)], {"x": 1.0}, "exceed the systematic error of R_D.*0.03"),
    "source beyond 1": ([source_only("a", 0.01)], {"x": 1.5}, "source x: correlation: is no correlation"),
    "sources with wrong signs": (
        [Measurement("a", PAIR, 0.0, -0.9, {"x": {"R_D": 0.015, "R_Dst": 0.015}})], {"x": 1.0}, "impossible corr",
    ),
    "fully correlated pair": (
        [Measurement("a", {"R_D": Measured(0.3, 0.05), "R_Dst": Measured(0.3, 0.02)}, 1.0)],
        {}, "not positive definite, foremost those of R_D of a and R_Dst of a.*correlation 1.000",
    ),
    "same systematic error twice": (
        [source_only("a", 0.02), one(0.3, 0.1, "b"), source_only("c", 0.02)],
        {"x": 1.0}, "not positive definite, foremost those of R_D of a and R_D of c",
    ),
    "three cannot all be opposite": (
        [source_only(name, 0.02) for name in "abc"], {"x": -0.9}, "cannot hold together, foremost those of R_D of",
    ),
}  # fmt: skip


@pytest.mark.parametrize("case", BAD)
def test_bad_input(case: str) -> None:
    measurements, common, words = BAD[case]
    with pytest.raises(InputError, match=words):
        average(measurements, common)


def test_bad_predictions() -> None:
    with pytest.raises(InputError, match="prediction: R_D: is no error"):
        Prediction({"R_D": (0.3, -0.1)})
    with pytest.raises(InputError, match="is no correlation"):
        Prediction({"R_D": (0.3, 0.1)}, 2.0)


def test_nothing_that_was_given_is_changed() -> None:
    found = average(PUBLISHED_INPUTS)
    assert found.inputs.measurements == PUBLISHED_INPUTS
    values: NDArray[np.float64] = found.weights @ found.inputs.values
    assert found.values == pytest.approx(values)
    # each row of weights: 1 over its own ratio, 0 over the other
    assert found.weights @ found.inputs.design == pytest.approx(np.eye(2), abs=1e-12)
