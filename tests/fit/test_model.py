"""Models and data: expectations against the plain implementation, and what is refused."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from semitau.core.errors import InputError
from semitau.core.template_file import write_templates
from semitau.core.templates import Component, Nuisance, ScaleParameter, Template, TemplateSet
from semitau.fit import Data, Model, maximise

from . import problems
from .reference import Plain

SMALL = problems.small()
MODEL, PLAIN = Model(SMALL), Plain(SMALL)


@settings(deadline=None)
@given(st.lists(st.floats(-3, 3), min_size=8, max_size=8))
def test_expectations(shifts: list[float]) -> None:
    values = MODEL.injected + 0.2 * np.array(shifts) * np.where(MODEL.injected > 0, MODEL.injected, 5.0)
    np.testing.assert_allclose(MODEL.expected_counts(values), PLAIN.expected(values).real, rtol=1e-12)


def test_contributions_add_up() -> None:
    parts = MODEL.contributions({"R_D": 0.5, "R0": -0.4, "yield_other": 1.3})
    totals = MODEL.expected({"R_D": 0.5, "R0": -0.4, "yield_other": 1.3})
    for category in SMALL.categories:
        mine = [part for (name, _), part in parts.items() if name == category.name]
        assert mine[0].shape == category.shape
        np.testing.assert_allclose(sum(mine), totals[category.name], rtol=1e-12)


def test_ratio_times_yield() -> None:
    """D tau scales with R_D/injected × yield_D_light."""
    nominal = SMALL.templates["D0", "D_tau"].nominal
    parts = MODEL.contributions({"R_D": 0.598, "yield_D_light": 1.5})
    np.testing.assert_allclose(parts["D0", "D_tau"], 3.0 * nominal, rtol=1e-12)


def test_parameters() -> None:
    assert MODEL.names[:2] == ("R_D", "R_Dst")
    assert MODEL.ratios == ("R_D", "R_Dst")
    assert MODEL.names[-1] == "R0"
    assert MODEL.parameters[4].constraint == 0.2
    assert MODEL.parameters[5].group == "efficiency"
    with pytest.raises(ValueError, match="read-only"):
        MODEL.injected[0] = 1.0


def test_big_categories_are_split() -> None:
    """More bins than a tile holds, and not a multiple of the vector width: nothing is lost."""
    rng = np.random.default_rng(2)
    nominal = rng.uniform(1, 9, (19, 17))
    templates = TemplateSet(
        (problems.axes("big", 19, 17),),
        (Component("a", "a", "background", ("yield_a",)),),
        (ScaleParameter("yield_a", "a", "yield", 1.0),),
        (Nuisance("tilt", "tilt", "x"),),
        {("big", "a"): Template(nominal, nominal, {"tilt": nominal * 1.1}, {"tilt": nominal * 0.9})},
    )
    model = Model(templates)
    np.testing.assert_allclose(model.expected({"yield_a": 2.0, "tilt": 2.0})["big"], 2.4 * nominal, rtol=1e-12)
    n = rng.poisson(nominal).astype(float)
    result = maximise(model, {"big": n})
    # One yield and one nuisance that do the same: the sum of all counts is all that matters (closed form).
    assert result.value("tilt") == pytest.approx(0.0, abs=1e-6)
    assert model.template_errors()["big"][3, 4] == pytest.approx(nominal[3, 4] ** -0.5)


def hollow() -> TemplateSet:
    """Four bins: one never filled, one filled by a variation only."""
    nominal = np.array([5.0, 0.0, 0.0, 7.0])
    return TemplateSet(
        (problems.axes("few", 4),),
        (Component("a", "a", "background", ("yield_a",)),),
        (ScaleParameter("yield_a", "a", "yield", 1.0),),
        (Nuisance("leak", "leak", "x"),),
        {
            ("few", "a"): Template(
                nominal,
                0.1 * nominal,
                {"leak": nominal + np.array([0, 0, 0.5, 0])},
                {"leak": nominal - np.array([0, 0, 0.1, 0])},
            )
        },
    )


def test_empty_bins() -> None:
    model = Model(hollow())
    result = maximise(model, np.array([4.0, 0.0, 1.0, 8.0]))
    assert result.valid
    assert result.goodness.degrees_of_freedom == 3 - 1
    assert model.expected_counts()[1] == 0.0
    with pytest.raises(InputError, match=r"category few, bin \[1\]: events were seen where none are expected"):
        model.data(np.array([4.0, 2.0, 0.0, 8.0]))


def test_bad_counts() -> None:
    good = MODEL.expected()
    for changes, message in (
        ({"D0": good["D0"] - 1e4}, "count is negative"),
        ({"D0": np.full(9, np.nan)}, "count is not finite"),
        ({"D0": np.full(9, np.inf)}, "count is not finite"),
        ({"D0": np.zeros(8)}, "wrong shape"),
        ({"D0": ["many"] * 9}, "not an array of numbers"),
        ({"elsewhere": np.zeros(3)}, "no such category"),
    ):
        with pytest.raises(InputError, match=message):
            MODEL.data(good | changes)
    with pytest.raises(InputError, match="counts are missing"):
        MODEL.data({"D0": good["D0"]})
    with pytest.raises(InputError, match="wrong shape"):
        MODEL.data(np.zeros(20))
    with pytest.raises(InputError, match="do not fit the model"):
        MODEL.data(Data(np.zeros(21), np.zeros(2), np.ones(21)))
    with pytest.raises(InputError, match="auxiliary measurements must be finite"):
        MODEL.data(Data(np.zeros(21), np.full(8, np.nan), np.ones(21)))


def test_many_bad_bins_are_counted() -> None:
    with pytest.raises(InputError) as caught:
        MODEL.data(-np.ones(21))
    assert len(caught.value.problems) == 6
    assert "and 6 more bins" in str(caught.value)


def test_data_of_a_template_set_and_of_a_file(tmp_path: Path) -> None:
    n = {name: np.round(counts) for name, counts in MODEL.expected().items()}
    with pytest.raises(InputError, match="no observed counts"):
        MODEL.data(SMALL)
    observed = SMALL.with_data(n)
    flat = np.concatenate([counts.ravel() for counts in n.values()])
    np.testing.assert_array_equal(MODEL.data(observed).counts, flat)
    write_templates(observed, tmp_path / "templates.root")
    np.testing.assert_array_equal(MODEL.data(tmp_path / "templates.root").counts, flat)
    with pytest.raises(InputError):
        MODEL.data(tmp_path / "nowhere.root")


def test_bad_models() -> None:
    with pytest.raises(InputError, match=r"not a template set \(got str, allowed a template set"):
        Model("templates.root")  # type: ignore[arg-type]
    with pytest.raises(InputError, match="Did you mean 'R_Dst'"):
        Model(SMALL, fixed={"R_Dsta": 0.3})
    with pytest.raises(InputError, match="finite number"):
        Model(SMALL, fixed={"R_D": float("nan")})
    with pytest.raises(InputError, match="positive number, or None"):
        Model(SMALL, yields={"yield_other": -0.1})
    with pytest.raises(InputError, match="no such scale parameter"):
        Model(SMALL, yields={"R0": 0.1})
    with pytest.raises(InputError, match="every parameter is fixed"):
        Model(problems.one_bin(), fixed={"R_D": 0.3})
    useless = TemplateSet(
        SMALL.categories, SMALL.components, (*SMALL.parameters, ScaleParameter("yield_x", "x", "yield", 1.0)),
        SMALL.nuisances, SMALL.templates,
    )  # fmt: skip
    with pytest.raises(InputError, match="yield_x: no template depends on this free parameter"):
        Model(useless)
    assert "yield_x" in Model(useless, fixed={"yield_x": 1.0}).names
    with pytest.raises(InputError, match=r"category only, bin \[0\].*negative number of events"):
        Model(problems.one_bin(signal=-70.0))
    with pytest.raises(InputError, match="no bin of any category"):
        Model(problems.one_bin(signal=0.0, background=0.0))


def test_bad_values() -> None:
    with pytest.raises(InputError, match="no such parameter"):
        MODEL.expected({"R_DD": 0.3})
    with pytest.raises(InputError, match="wrong number of parameter values"):
        MODEL.expected(np.zeros(3))
    with pytest.raises(InputError, match="must be finite"):
        MODEL.expected({"R_D": float("inf")})
    with pytest.raises(InputError, match="no such parameter"):
        maximise(MODEL, MODEL.expected_data(), fixed=("nothing",))
