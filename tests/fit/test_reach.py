"""Prospects against counting experiments, whose errors and significance have closed forms."""

from __future__ import annotations

import numpy as np
import pytest
from scipy import stats
from semitau.core.errors import InputError
from semitau.core.templates import Category, Component, Nuisance, Observable, ScaleParameter, Template, TemplateSet
from semitau.fit.fitting.data import Data
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.uncertainty.curves import Conditional
from semitau.fit.uncertainty.enlarged import enlarged
from semitau.fit.uncertainty.prospects import Deviation, reach

from .problems import SEED, one_bin, small

S, B = 40.0, 100.0
TRUE = 0.3


def counting(
    *, width: float | None = None, ratio: float | None = None, variance: float = 0.0, signal: float = S
) -> TemplateSet:
    """A bin with a signal that scales with R_D (0.3) on a background.

    width : relative systematic error of the background, a nuisance. ratio : a second bin holds this multiple of the
    background, which then is free.
    """
    categories = [Category("on", "on", (Observable("x", "x", "", (0.0, 1.0)),))]
    rest = Template(
        np.array([B]), np.array([variance]),
        {} if width is None else {"level": np.array([B * (1 + width)])},
        {} if width is None else {"level": np.array([B * (1 - width)])},
    )  # fmt: skip
    templates = {("on", "signal"): Template(np.array([signal]), np.zeros(1)), ("on", "rest"): rest}
    if ratio is not None:
        categories.append(Category("off", "off", (Observable("x", "x", "", (0.0, 1.0)),)))
        templates["off", "rest"] = Template(np.array([B * ratio]), np.zeros(1))
    free = ("yield_rest",) if ratio is not None else ()
    return TemplateSet(
        categories=tuple(categories),
        components=(Component("signal", "s", "signal", ("R_D",)), Component("rest", "b", "background", free)),
        parameters=(
            ScaleParameter("R_D", "R(D)", "ratio", TRUE),
            *(ScaleParameter(name, name, "yield", 1.0) for name in free),
        ),
        nuisances=() if width is None else (Nuisance("level", "level", "background level"),),
        templates=templates,
    )


def known_background(s: float, b: float) -> float:
    """EPJC 71 (2011) 1554, eq. 97: median significance of s events over a known background b."""
    return float(np.sqrt(2 * ((s + b) * np.log1p(s / b) - s)))


def measured_background(s: float, b: float, ratio: float) -> float:
    """The same with b from a second bin that holds `ratio` times as many events: both likelihoods maximised by hand.

    With n = s + b and m = ratio b observed, the background without signal is (n + m)/(1 + ratio).
    """
    n, m = s + b, ratio * b
    alone = (n + m) / (1 + ratio)

    def log_likelihood(first: float, second: float) -> float:
        return float(n * np.log(first) - first + m * np.log(second) - second)

    return float(np.sqrt(2 * (log_likelihood(n, m) - log_likelihood(alone, ratio * alone))))


@pytest.mark.parametrize("factor", [0.25, 1.0, 16.0])
def test_known_background(factor: float) -> None:
    found = reach(counting(), [factor, 2 * factor], against={"R_D": (0.0, 0.0)}).amounts[0]
    assert found.deviations["R_D"].sigmas == pytest.approx(known_background(factor * S, factor * B), rel=1e-6)
    assert found.budgets["R_D"].total == pytest.approx(TRUE * np.sqrt(factor * (S + B)) / (factor * S), rel=1e-6)


@pytest.mark.parametrize("ratio", [0.5, 3.0])
def test_background_from_a_second_bin(ratio: float) -> None:
    found = reach(counting(ratio=ratio), [0.5, 2.0], against={"R_D": (0.0, 0.0)})
    for amount in found.amounts:
        expected = measured_background(amount.factor * S, amount.factor * B, ratio)
        assert amount.deviations["R_D"].sigmas == pytest.approx(expected, rel=1e-5)


def test_amount_that_is_needed() -> None:
    """Without systematics significance grows with the root of the data: 3 and 5 sigma at (3/Z)² and (5/Z)²."""
    z = known_background(S, B)
    found = reach(counting(), np.geomspace(0.1, 100, 7), against={"R_D": (0.0, 0.0)})
    assert found.needed["R_D"][3.0] == pytest.approx((3 / z) ** 2, rel=2e-3)
    assert found.needed["R_D"][5.0] == pytest.approx((5 / z) ** 2, rel=2e-3)
    beyond = reach(counting(), [0.01, 0.1], against={"R_D": (0.0, 0.0)})
    assert beyond.needed["R_D"] == {3.0: None, 5.0: None}


@pytest.mark.parametrize("width", [0.05, 0.2])
def test_wall_of_a_systematic_error(width: float) -> None:
    """Error² of the signal is n + (width b)²: statistics lose to the background where n = (width b)²."""
    found = reach(counting(width=width), np.geomspace(0.1, 100, 31))
    for amount in found.amounts:
        n, level = amount.factor * (S + B), amount.factor * width * B
        split = amount.budgets["R_D"]
        assert split.rows["statistical"] == pytest.approx(TRUE * np.sqrt(n) / (amount.factor * S), rel=1e-5)
        assert split.systematic == pytest.approx(TRUE * level / (amount.factor * S), rel=1e-5)
    factor, source = found.walls["R_D"]
    assert factor == pytest.approx((S + B) / (width * B) ** 2, rel=1e-3)
    assert source == "background level"


def test_generated_events_are_a_wall_too() -> None:
    """With the same generated events the template error is a fixed share: n = v at the wall."""
    found = reach(counting(variance=35.0), np.geomspace(0.1, 100, 31))
    factor, source = found.walls["R_D"]
    assert factor == pytest.approx((S + B) / 35.0, rel=0.02)
    assert source == "template statistics"
    exact = reach(counting(variance=35.0), [0.1, 100], make=lambda t: Model(t, template_statistics=False))
    assert exact.walls["R_D"][0] is None


def test_generated_events_that_grow_are_no_wall() -> None:
    """Variance 35 of 100 events with factor f of data and of generated events: error² of the signal is f (n + 35)."""
    found = reach(counting(variance=35.0), np.geomspace(0.1, 100, 7), grows=True)
    assert found.walls["R_D"][0] is None
    for amount in found.amounts:
        rows = amount.budgets["R_D"].rows
        assert rows["statistical"] == pytest.approx(TRUE * np.sqrt((S + B) / amount.factor) / S, rel=0.02)
        assert rows["template statistics"] == pytest.approx(TRUE * np.sqrt(35.0 / amount.factor) / S, rel=0.02)


def test_error_of_the_comparison() -> None:
    """At many events all is Gaussian: (true - compared)² over the sum of both variances."""
    many = counting(signal=S)
    found = reach(many, [1e4, 2e4], true={"R_D": 0.32}, against={"R_D": (0.30, 0.004)}).amounts[0]
    total = np.hypot(found.budgets["R_D"].total, 0.004)
    assert found.deviations["R_D"].sigmas == pytest.approx(0.02 / total, rel=0.01)


def test_two_ratios_together() -> None:
    """The joint growth against the quadratic form of the fit's covariance, at many events; p for two degrees."""
    true, against = {"R_D": 0.310, "R_Dst": 0.262}, {"R_D": (0.299, 0.002), "R_Dst": (0.254, 0.001)}
    amount = reach(small(), [300.0, 400.0], true=true, against=against).amounts[0]
    model = Model(enlarged(small(), 300.0))
    fitted = maximise(model, model.expected_data(true))
    rows = [model.index(name) for name in true]
    covariance = fitted.covariance[np.ix_(rows, rows)] + np.diag([0.002**2, 0.001**2])
    difference = np.array([0.011, 0.008])
    growth = difference @ np.linalg.solve(covariance, difference)
    joint = amount.deviations["together"]
    assert joint.growth == pytest.approx(growth, rel=0.03)
    assert 2 * stats.norm.sf(joint.sigmas) == pytest.approx(np.exp(-joint.growth / 2))
    exact = Conditional(model, model.expected_data(true), ["R_D"], fitted).height(0.299)
    sharp = reach(small(), [300.0, 400.0], true=true, against={"R_D": (0.299, 0.0)}).amounts[0]
    assert sharp.deviations["R_D"].growth == pytest.approx(exact)


@pytest.mark.parametrize("level", [3.0, 5.0])
def test_chance_to_see_it(level: float) -> None:
    """One ratio: a Gaussian of unit width about the median; and the sum over all Poisson counts of a counting bin."""
    seen = Deviation(16.0, 1, 4.0)
    assert seen.chance(level) == pytest.approx(stats.norm.sf(level - 4.0) + stats.norm.sf(level + 4.0), rel=1e-6)
    s, b = 160.0, 1600.0
    median = known_background(s, b)
    counts = np.arange(1200, 2400)
    q = 2 * (counts * np.log(counts / b) - counts + b)
    exact = stats.poisson.pmf(counts, s + b)[q > level**2].sum()
    assert Deviation(median**2, 1, median).chance(level) == pytest.approx(exact, abs=0.02)
    assert Deviation(0.0, 2, 0.0).chance(level) == pytest.approx(2 * stats.norm.sf(level), rel=1e-3)


def test_chance_against_toys() -> None:
    """How often toys with all nuisances exceed 2 and 3 sigma. Chance of failing: 1.3e-4 (4 binomial errors, twice)."""
    true, compared, number = {"R_D": 0.50, "R_Dst": 0.254}, 0.299, 400
    model = Model(enlarged(small(), 2.0), template_statistics=False)
    exact = reach(
        small(), [2.0, 3.0], true=true, against={"R_D": (compared, 0.0)},
        make=lambda templates: Model(templates, template_statistics=False),
    ).amounts[0].deviations["R_D"]  # fmt: skip
    rng = np.random.default_rng(SEED)
    values = model.values(true)
    widths = np.array([parameter.constraint or 0.0 for parameter in model.parameters])
    counts = model.expected_counts(values)
    growth = []
    for _ in range(number):
        toy = Data(rng.poisson(counts), values + widths * rng.normal(size=len(widths)), np.ones(model.bins))
        fitted = maximise(model, toy, values)
        assert fitted.valid
        growth.append(Conditional(model, toy, ["R_D"], fitted).height(compared))
    for level in (2.0, 3.0):
        chance = exact.chance(level)
        seen = (np.array(growth) > level**2).mean()
        # the asymptotic law itself is good to a few per cent at some hundred events
        assert seen == pytest.approx(chance, abs=4 * np.sqrt(chance * (1 - chance) / number) + 0.03)


def test_a_ratio_that_follows_another_has_no_true_value_of_its_own() -> None:
    def make(templates: TemplateSet) -> Model:
        return Model(templates, functions={"R_Dst": "0.85 * R_D"})

    with pytest.raises(InputError, match="is no fitted ratio"):
        reach(small(), [1.0, 2.0], true={"R_Dst": 0.3}, make=make)
    found = reach(small(), [1.0, 2.0], make=make).amounts[0].budgets
    assert found["R_Dst"].total == pytest.approx(0.85 * found["R_D"].total)


def test_enlarged_templates() -> None:
    larger = enlarged(small(), 4.0)
    model, other = Model(small()), Model(larger)
    values = model.values({"R0": 0.7, "slow_pion": -0.4, "R_D": 0.4})
    assert other.expected_counts(values) == pytest.approx(4 * model.expected_counts(values))
    for name, errors in model.template_errors().items():
        assert other.template_errors()[name] == pytest.approx(errors)
    assert not larger.data


@pytest.mark.parametrize(
    ("arguments", "words"),
    [
        ({"factors": [1.0]}, "at least two amounts"),
        ({"factors": [0.0, 1.0]}, "must be positive"),
        ({"factors": [1.0, 2.0], "true": {"R_Dst": 0.3}}, r"is no fitted ratio \(got R_Dst, allowed R_D\)"),
        ({"factors": [1.0, 2.0], "against": {"R_X": (0.3, 0.0)}}, "is no fitted ratio"),
    ],
)
def test_bad_input(arguments: dict[str, object], words: str) -> None:
    with pytest.raises(InputError, match=words):
        reach(one_bin(), **arguments)  # type: ignore[arg-type]
