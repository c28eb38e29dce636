"""The types between generation and fit refuse what no fit could use, and say where it is."""

from __future__ import annotations

import pickle
from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st
from semitau.core.errors import InputError
from semitau.core.templates import Category, Component, Nuisance, Observable, ScaleParameter, Template, TemplateSet

from .sample_templates import EL, MM2, assert_same, sample


@pytest.mark.parametrize(
    ("edges", "message"),
    [
        ((0.0,), r"observable x: an axis needs at least two edges \(got 1\)"),
        ((0.0, 2.0, 1.0), r"observable x: edges must increase \(got 2 before 1\)"),
        ((0.0, 0.0), r"edges must increase \(got 0 before 0\)"),
        ((0.0, float("nan"), 1.0), "edges must be finite"),
        ((0.0, float("inf")), "edges must be finite"),
    ],
)
def test_edges(edges: tuple[float, ...], message: str) -> None:
    with pytest.raises(InputError, match=message):
        Observable("x", "x", "", edges)


def test_category() -> None:
    assert Category("a", "", (MM2, EL)).shape == (3, 2)
    with pytest.raises(InputError, match=r"category a: wrong number of observables \(got 0, allowed 1 to 3\)"):
        Category("a", "", ())
    with pytest.raises(InputError, match=r"category a: observable given 2 times \(got 'mm2', allowed once\)"):
        Category("a", "", (MM2, MM2))


@pytest.mark.parametrize("name", ["", "D*", "a b", "a/b", "é", 3])
def test_names(name: Any) -> None:
    for make in (
        lambda: Category(name, "", (MM2,)),
        lambda: Component(name, "", "signal", ()),
        lambda: ScaleParameter(name, "", "ratio", 1.0),
        lambda: Nuisance(name, "", ""),
    ):
        with pytest.raises(InputError, match=r"not a name for a .*allowed letters, digits and _"):
            make()


def test_names_that_the_file_uses_itself() -> None:
    with pytest.raises(InputError, match="no component can have it"):
        Component("data", "", "signal", ())
    with pytest.raises(InputError, match="no category can have it"):
        Category("meta", "", (MM2,))


def test_words_and_values() -> None:
    with pytest.raises(InputError, match=r"component a: unknown role \(got 'sgnal', allowed signal, normal"):
        Component("a", "", "sgnal", ())
    with pytest.raises(InputError, match=r"parameter a: unknown kind \(got 'rate', allowed ratio, yield\)"):
        ScaleParameter("a", "", "rate", 1.0)
    with pytest.raises(InputError, match=r"parameter a: injected value must be positive and finite \(got 0.0\)"):
        ScaleParameter("a", "", "ratio", 0.0)
    with pytest.raises(InputError, match=r"parameter a: constraint must be positive and finite \(got nan\)"):
        ScaleParameter("a", "", "ratio", 1.0, float("nan"))


def test_arrays_are_copied_and_read_only() -> None:
    mine = np.ones(3)
    template = Template(mine, mine, {"tag": mine}, {"tag": mine})
    mine[:] = 7.0
    for array in (template.nominal, template.variance, template.plus["tag"], template.minus["tag"]):
        assert array.tolist() == [1, 1, 1]
        with pytest.raises(ValueError, match="read-only"):
            array[0] = 2.0
    with pytest.raises(TypeError):
        template.plus["other"] = mine  # type: ignore[index]


def test_every_problem_of_a_template_at_once() -> None:
    with pytest.raises(InputError) as caught:
        Template(
            np.array([1.0, np.nan, np.inf]),
            np.array([1.0, 2.0, -3.0]),
            {"tag": np.ones(2), "rho2": np.ones(3)},
            {"tag": np.ones(3), "scale": np.ones(3)},
        )
    assert str(caught.value).splitlines() == [
        "nominal bin [1] and 1 more: not finite (got nan)",
        "plus/tag: shape differs from the nominal (got (2,), allowed (3,))",
        "variance bin [2]: negative variance (got -3)",
        "minus/rho2: one side of a variation is missing. Add it beside plus/rho2.",
        "plus/scale: one side of a variation is missing. Add it beside minus/scale.",
    ]


def test_negative_contents_are_allowed() -> None:
    assert Template(np.array([-1.0]), np.array([1.0])).nominal[0] == -1.0


@given(
    part=st.sampled_from(["nominal", "variance", "plus/tag", "minus/tag"]),
    value=st.sampled_from([np.nan, np.inf, -np.inf]),
    place=st.tuples(st.integers(0, 2), st.integers(0, 1), st.integers(0, 3)),
)
def test_a_bad_bin_is_named(part: str, value: float, place: tuple[int, int, int]) -> None:
    parts = {name: np.ones((3, 2, 4)) for name in ("nominal", "variance", "plus/tag", "minus/tag")}
    parts[part][place] = value
    with pytest.raises(InputError) as caught:
        Template(parts["nominal"], parts["variance"], {"tag": parts["plus/tag"]}, {"tag": parts["minus/tag"]})
    assert f"{part} bin {list(place)}: not finite (got {value:g})" in str(caught.value)


@pytest.mark.parametrize(
    ("change", "message"),
    [
        ({"categories": ()}, "there is no category"),
        ({"components": ()}, "there is no component"),
        ({"categories": sample().categories[:1] * 2}, r"category given 2 times \(got 'one'"),
        ({"nuisances": (Nuisance("R_D", "", ""),)}, r"parameter given 2 times \(got 'R_D'"),
        (
            {"parameters": sample().parameters[:1]},
            r"light: unknown parameter \(got 'yield_light', allowed R_D\)",
        ),
        ({"nuisances": sample().nuisances[:1]}, r"two/light: unknown nuisance \(got 'rho2', allowed tag\)"),
        ({"components": sample().components[:1]}, r"two/light: unknown component \(got 'light', allowed signal\)"),
        ({"categories": sample().categories[1:]}, r"one/signal: unknown category \(got 'one', allowed three, two\)"),
        ({"data": {"one": np.ones(4)}}, r"one/data: shape differs from the axes \(got \(4,\), allowed \(3,\)\)"),
        ({"data": {"one": np.array([0, -1, 2])}}, r"one/data bin \[1\]: negative count \(got -1\)"),
        ({"data": {"one": np.array([0, np.nan, 2])}}, r"one/data bin \[1\]: not finite \(got nan\)"),
        ({"data": {"none": np.ones(3)}}, r"none/data: unknown category \(got 'none'"),
        ({"data": {"one": "many"}}, r"not an array of numbers \(got str\)"),
    ],
)
def test_a_set_is_consistent(change: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        replace(sample(), **change)


def test_a_template_has_the_shape_of_its_axes() -> None:
    templates = dict(sample().templates) | {("two", "signal"): Template(np.ones((2, 3)), np.ones((2, 3)))}
    with pytest.raises(InputError, match=r"two/signal: shape differs from the axes \(got \(2, 3\), allowed \(3, 2\)\)"):
        replace(sample(), templates=templates)


def test_with_data() -> None:
    templates = sample().with_data({"one": [1, 2, 3]})
    assert templates.data["one"].tolist() == [1, 2, 3]
    assert list(templates.data) == ["one"]


def test_sets_travel_to_other_processes() -> None:
    copy: TemplateSet = pickle.loads(pickle.dumps(sample()))
    assert_same(sample(), copy)
    assert not copy.templates["one", "signal"].nominal.flags.writeable
