"""Constraints, bounds and functions of parameters against closed forms, substitution and other minimisers."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import minimize
from scipy.stats import kstest, norm
from semitau.core.errors import InputError
from semitau.core.templates import ScaleParameter, TemplateSet
from semitau.fit import Data, Model, budget, maximise, profile, run_toys
from semitau.fit.likelihood.constraints import Correlated, Gaussian, LogNormal, Uniform
from semitau.fit.likelihood.functions import jacobian, read_function

from . import problems
from .reference import Array, Plain

COVARIANCE = [[0.04, 0.1], [0.1, 1.0]]
LOG = {"constraints": {"yield_other": LogNormal(0.25)}}
BLOCK = {"correlated": (Correlated(("yield_other", "R0"), COVARIANCE),)}


def counts(model: Model, toy: int = 0) -> Array:
    return np.random.default_rng([problems.SEED, toy, 9]).poisson(model.expected_counts()).astype(float)


class Other(Plain):
    """`Plain` with a replaced constraint part."""

    def __init__(self, templates: TemplateSet, kind: str) -> None:
        super().__init__(templates)
        self.kind = kind
        place = [self.names.index(name) for name in ("yield_other", "R0")]
        self.place = np.array(place)
        for k in place if kind == "block" else place[:1]:
            self.sigmas[k] = None

    def constraints(self, x: Array, centres: Array | None = None) -> complex:
        middle = self.start if centres is None else centres
        total = super().constraints(x, centres)
        d = (x - middle)[self.place]
        if self.kind == "block":
            return total + 0.5 * d @ np.linalg.inv(np.array(COVARIANCE)) @ d
        return total + 0.5 * (np.log(x[self.place[0]] / middle[self.place[0]]) / 0.25) ** 2


@pytest.mark.parametrize(("kind", "asked"), [("log-normal", LOG), ("block", BLOCK)])
def test_constraints_against_scipy(kind: str, asked: dict[str, object]) -> None:
    """The plain likelihood with the constraint written out, minimised by scipy; errors by its numerical Hessian."""
    templates = problems.small()
    model, plain = Model(templates, **asked), Other(templates, kind)
    n = counts(model)
    result = maximise(model, n)
    assert result.valid

    def value(y: Array) -> float:
        return float(plain.value(plain.start + result.errors * y, n).real)

    found = minimize(value, np.zeros(plain.start.size), method="BFGS", options={"gtol": 1e-6})
    assert result.minus_log_likelihood == pytest.approx(found.fun, abs=1e-7)
    np.testing.assert_allclose(plain.start + result.errors * found.x, result.values, atol=1e-3 * result.errors.min())
    at, step = (result.values - plain.start) / result.errors, 1e-3
    unit = np.eye(at.size) * step
    hessian = np.array(
        [
            [
                (value(at + a + b) - value(at + a - b) - value(at - a + b) + value(at - a - b)) / (4 * step**2)
                for b in unit
            ]
            for a in unit
        ]
    )
    np.testing.assert_allclose(np.sqrt(np.diag(np.linalg.inv(hessian))), 1.0, rtol=1e-3)


def test_log_normal_stays_positive() -> None:
    """Without counts a Gaussian yield goes negative, a log-normal one to where x + ln(x)/σ²s = 0 (scipy's root)."""
    from scipy.optimize import brentq

    base = problems.linear(10.0)
    names = [p.name for p in base.parameters]
    model = Model(base, constraints={name: LogNormal(0.5) for name in names})
    result = maximise(model, np.zeros(12))
    assert result.valid
    for name in "abc":
        total = float(base.templates["wide", name].nominal.sum())
        root = brentq(lambda x, total=total: total + np.log(x) / (0.25 * x), 1e-6, 1.0, xtol=1e-13)
        assert result.value(f"yield_{name}") == pytest.approx(root, rel=1e-6)


def test_toys_of_constraints() -> None:
    """Centres: log-normal ones have a normal logarithm, a block has its covariance (chance of failing 1e-4)."""
    model = Model(problems.small(), **LOG)
    from semitau.core.streams import event_key, stream_key
    from semitau.fit.toys.toys import draw_toy

    def centres(model: Model, number: int = 3000) -> Array:
        arrays, stream, out = model.layout.arrays, stream_key(problems.SEED, "centres"), []
        lanes = model.lane_expectations(model.injected)
        for i in range(number):
            centre = np.zeros(len(model.names))
            key = np.uint64(event_key(stream, np.uint64(i)))
            draw_toy(arrays, key, model.injected, lanes, np.zeros(lanes.size), np.ones(lanes.size), centre)
            out.append(centre)
        return np.array(out)

    logs = np.log(centres(model)[:, model.index("yield_other")]) / 0.25
    assert kstest(logs, norm.cdf).pvalue > 1e-4
    both = Model(problems.small(), **BLOCK)
    drawn = centres(both)[:, [both.index("yield_other"), both.index("R0")]]
    np.testing.assert_allclose(np.cov(drawn.T), COVARIANCE, atol=6 * 1.0 * np.sqrt(2 / 3000))


@pytest.mark.parametrize("asked", [LOG, BLOCK, {"functions": {"R_Dst": "0.85 * R_D"}}])
def test_toys_cover(asked: dict[str, object]) -> None:
    """Pull width within 4.4 of its errors (once in 1e5)."""
    toys = run_toys(Model(problems.small(factor=5.0), **asked), 600, problems.SEED)
    for summary in toys.summaries().values():
        assert summary.failures == 0
        assert abs(summary.pull_width - 1) < 4.4 * summary.pull_width_error + 0.02


def test_budget_of_constraints() -> None:
    """What was measured together is one row, and all rows add up."""
    model = Model(problems.small(), **BLOCK)
    part = budget(model, maximise(model, model.expected_data()))["R_D"]
    assert "yield_other & R0" in part.sources
    assert sum(row**2 for row in part.rows.values()) == pytest.approx(part.total**2, rel=1e-12)
    followed = Model(problems.small(), functions={"R_Dst": "0.85 * R_D"})
    parts = budget(followed, maximise(followed, followed.expected_data()))
    assert parts["R_Dst"].total == pytest.approx(0.85 * parts["R_D"].total)
    assert parts["R_Dst"].rows["statistical"] == pytest.approx(0.85 * parts["R_D"].rows["statistical"])


def test_bounds_against_scipy() -> None:
    """The constrained minimum of L-BFGS-B; for several bounds at once."""
    templates = problems.small()
    plain = Plain(templates)
    bounds = {"R_D": (0.25, 0.32), "yield_other": (0.98, None), "R0": (-0.1, 0.1)}
    with pytest.raises(InputError, match="outside the bounds"):
        Model(templates, bounds=bounds | {"R_D": (0.2, 0.25)})
    for toy in range(4):
        model = Model(templates, bounds=bounds)
        n = counts(model, toy)
        result = maximise(model, n)
        assert result.valid
        low = [bounds.get(name, (None, None))[0] for name in model.names]
        high = [bounds.get(name, (None, None))[1] for name in model.names]
        found = minimize(
            lambda x, n=n: float(plain.value(x, n).real), plain.start, method="L-BFGS-B",
            bounds=list(zip(low, high, strict=True)), options={"ftol": 1e-15, "gtol": 1e-8, "maxiter": 2000},
        )  # fmt: skip
        assert result.minus_log_likelihood <= found.fun + 1e-9
        assert result.minus_log_likelihood == pytest.approx(found.fun, abs=1e-5)
        for name in result.certificate.at_bounds:
            assert result.value(name) in bounds[name]


def test_bound_in_closed_form() -> None:
    """One bin, n below the background: the ratio stops at zero, where -ln L is that of the background alone."""
    model = Model(problems.one_bin(), bounds={"R_D": (0.0, None)})
    result = maximise(model, np.array([50.0]))
    assert result.value("R_D") == 0.0
    assert result.certificate.at_bounds == ("R_D",)
    assert result.minus_log_likelihood == pytest.approx(60 - 50 + 50 * np.log(50 / 60))
    assert result.error("R_D") == pytest.approx(0.3 / 40 * 60 / np.sqrt(50))  # 1/√(n s²/b²), curvature at the bound
    above = maximise(model, np.array([90.0]))
    assert above.certificate.at_bounds == ()
    assert above.value("R_D") == pytest.approx(0.3 * 30 / 40)


def test_uniform_constraint() -> None:
    """Inside, a uniform nuisance is free; at its ends it is held there."""
    wide = Model(problems.small(factor=20.0), constraints={"R0": Uniform(-50.0, 50.0)})
    free = Model(problems.small(factor=20.0), constraints={"R0": None})
    n = counts(wide)
    np.testing.assert_allclose(maximise(wide, n).values, maximise(free, n).values, rtol=1e-5, atol=1e-6)
    narrow = Model(problems.small(factor=20.0), constraints={"R0": Uniform(-0.01, 0.01)})
    assert abs(maximise(narrow, n).value("R0")) <= 0.01
    assert narrow.parameters[narrow.index("R0")].law == "uniform"


def test_function_is_substitution() -> None:
    """R_Dst = 0.85 R_D, against scipy with the substitution written out; errors by propagation."""
    templates = problems.small()
    model, plain = Model(templates, functions={"R_Dst": "0.85 * R_D"}), Plain(templates)
    n = counts(model)
    result = maximise(model, n)
    keep = [i for i, name in enumerate(plain.names) if name != "R_Dst"]
    r, d = plain.names.index("R_D"), plain.names.index("R_Dst")

    def value(y: Array) -> float:
        x = plain.start.copy()
        x[keep] += result.errors[keep] * y
        x[d] = 0.85 * x[r]
        return float(plain.value(x, n).real)

    found = minimize(value, np.zeros(len(keep)), method="BFGS", options={"gtol": 1e-6})
    assert result.minus_log_likelihood == pytest.approx(found.fun, abs=1e-7)
    assert result.value("R_Dst") == pytest.approx(0.85 * result.value("R_D"), rel=1e-12)
    assert result.error("R_Dst") == pytest.approx(0.85 * result.error("R_D"), rel=1e-9)
    assert result.correlation("R_Dst", "R_D") == pytest.approx(1.0)
    assert model.injected[d] == pytest.approx(0.85 * model.injected[r])
    assert result.goodness.degrees_of_freedom == 21 - 3
    with pytest.raises(InputError, match="no likelihood curve of its own"):
        profile(model, n, "R_Dst")


def test_tie_is_one_template() -> None:
    """Two yields tied are the fit with both templates added up."""
    base = problems.linear(300.0)
    tied = Model(base, functions={"yield_c": "yield_a"})
    summed = TemplateSet(
        base.categories,
        tuple(c for c in base.components if c.name != "c"),
        tuple(p for p in base.parameters if p.name != "yield_c"),
        (),
        {
            ("wide", "a"): replace(
                base.templates["wide", "a"],
                nominal=base.templates["wide", "a"].nominal + base.templates["wide", "c"].nominal,
            ),
            ("wide", "b"): base.templates["wide", "b"],
        },
    )
    n = counts(tied)
    one, two = maximise(tied, n), maximise(Model(summed), n)
    for name in ("yield_a", "yield_b"):
        assert one.value(name) == pytest.approx(two.value(name), rel=1e-9)
        assert one.error(name) == pytest.approx(two.error(name), rel=1e-9)


def test_fractions() -> None:
    """yield_b = t f and yield_c = t (1 - f) is another name for two free yields: same minimum, propagated errors."""
    base = problems.linear(300.0)
    hidden = ScaleParameter("t", "total", "yield", 2.0), ScaleParameter("f", "fraction", "yield", 0.5)
    extended = replace(base, parameters=(*base.parameters, *hidden))
    model = Model(extended, functions={"yield_b": "t * f", "yield_c": "t - t*f"})
    n = counts(Model(base))
    plain, result = maximise(Model(base), n), maximise(model, n)
    assert result.valid
    for name in ("yield_a", "yield_b", "yield_c"):
        assert result.value(name) == pytest.approx(plain.value(name), rel=1e-6)
        assert result.error(name) == pytest.approx(plain.error(name), rel=1e-5)
    assert result.correlation("yield_b", "yield_c") == pytest.approx(plain.correlation("yield_b", "yield_c"), abs=1e-5)


@pytest.mark.parametrize("text", ["2*a*b/c**2 - 0.5*a**0.5", "(a + b)**2 * c", "1 - a", "-a/(2*b)", "3 + 2*(a - b)*c"])
def test_formulas_against_python(text: str) -> None:
    """Value against eval, derivatives against central differences."""
    from semitau.fit.likelihood.functions import arrays_of, set_functions

    f = arrays_of({"d": read_function("d", text)}, {"a": 0, "b": 1, "c": 2, "d": 3})
    x = np.array([0.7, 1.3, 2.1, 0.0])

    def value(at: Array) -> float:
        return float(eval(text, {}, dict(zip("abc", at.tolist(), strict=False))))

    set_functions(f, x)
    assert x[3] == pytest.approx(value(x), rel=1e-13)
    slopes = [(value(x + e) - value(x - e)) / 2e-6 for e in np.eye(4)[:3] * 1e-6]
    np.testing.assert_allclose(jacobian(f, x)[3, :3], slopes, rtol=1e-7, atol=1e-9)


@pytest.mark.parametrize(
    ("asked", "message"),
    [
        ({"functions": {"R_Dst": "R_Dx"}}, "no such parameter"),
        ({"functions": {"R_Dst": "sin(R_D)"}}, "numbers, parameters"),
        ({"functions": {"R_Dst": "R_D +"}}, "not a formula"),
        ({"functions": {"R_Dst": "R_D/(R_D + R0)"}}, "only a product"),
        ({"functions": {"R_Dst": "R_D", "R_D": "2 * R_Dst"}}, "may not follow another"),
        ({"functions": {"R_Dst": "R_Dst"}}, "may not follow another"),
        ({"functions": {"R_Dst": "0.3"}}, "no parameter in it"),
        ({"functions": {"R_Dst": "R_D"}, "fixed": {"R_Dst": 0.3}}, "held fixed as well"),
        ({"functions": {"R_Dst": "R_D"}, "bounds": {"R_Dst": (0, 1)}}, "no bounds"),
        ({"bounds": {"R_D": (1, 0)}}, "lower end must be below"),
        ({"bounds": {"R_D": (0, 1)}, "fixed": {"R_D": 2.0}}, "held outside"),
        ({"constraints": {"R0": LogNormal(0.1)}}, "log-normal"),
        ({"constraints": {"R_D": Gaussian(-1.0)}}, "positive and finite"),
        ({"constraints": {"R_D": 0.1}}, "not a constraint"),
        ({"constraints": {"R0": Gaussian(1.0)}, "correlated": BLOCK["correlated"]}, "two constraints"),
    ],
)
def test_contradictions(asked: dict[str, object], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Model(problems.small(), **asked)


@pytest.mark.parametrize(
    ("names", "matrix", "message"),
    [
        (("a",), [[1.0]], "two or more"),
        (("a", "b"), [[1.0]], "wrong shape"),
        (("a", "b"), [[1.0, 0.1], [0.2, 1.0]], "not symmetric"),
        (("a", "b"), [[1.0, 1.0], [1.0, 1.0]], "not positive definite"),
        (("a", "b"), [[1.0, np.nan], [np.nan, 1.0]], "not finite"),
    ],
)
def test_covariances(names: tuple[str, ...], matrix: list[list[float]], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Correlated(names, matrix)


def test_auxiliary_measurements_move_the_fit() -> None:
    """Counts that know nothing of it: a log-normal parameter follows its centre."""
    base = problems.one_bin(40.0, 60.0)
    model = Model(base, constraints={"R_D": LogNormal(1e-4)})
    data = Data(np.array([100.0]), np.array([0.36]), np.ones(1))
    assert maximise(model, data).value("R_D") == pytest.approx(0.36, rel=1e-4)
