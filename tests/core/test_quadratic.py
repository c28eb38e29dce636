"""Template sets as quadratic functions of coefficients: against event-by-event weights, and as files.

Everything is exact up to rounding; nothing is random but the fixed events.
"""

from __future__ import annotations

import json
import pickle
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import uproot
from scipy.optimize import approx_fprime
from semitau.core.errors import InputError
from semitau.core.quadratic import (
    contracted,
    gradient_at,
    monomials,
    pairs_of,
    poor_reweightings,
    reweightings,
    templates_at,
    value_at,
)
from semitau.core.template_file import read_templates, write_templates
from semitau.core.templates import Coefficient, ScaleParameter, TemplateSet

from .sample_templates import assert_same, sample
from .weighted_events import NAMES, World

POINTS = [(0.0, 0.0), (0.1, -0.05), (-1.3, 0.4), (3.0, 0.9), (0.7, -1.0)]


def at(point: tuple[float, float]) -> dict[str, float]:
    return dict(zip(NAMES, point, strict=True))


@pytest.mark.parametrize("point", POINTS)
def test_any_point_is_the_weighted_events(point: tuple[float, float]) -> None:
    world = World()
    moved = templates_at(world.template_set(), at(point))
    weights = world.weights(point)
    template = moved.templates["only", "signal"]
    np.testing.assert_allclose(template.nominal, world.histogram(weights), rtol=1e-12)
    assert moved.parameters[0].injected == pytest.approx(world.rate(point), rel=1e-12)
    assert {c.name: c.value for c in moved.coefficients} == at(point)
    (found,) = reweightings(world.template_set(), at(point))
    assert found.effective == pytest.approx(weights.sum() ** 2 / (weights**2).sum(), rel=1e-10)
    assert found.events == pytest.approx(weights.size, rel=1e-12)
    # the file of the other point describes the same world: back again it is what it was
    home = templates_at(moved, at(world.base)).templates["only", "signal"]
    np.testing.assert_allclose(home.nominal, world.template_set().templates["only", "signal"].nominal, rtol=1e-12)
    np.testing.assert_allclose(home.plus["tag"], world.template_set().templates["only", "signal"].plus["tag"])
    assert template.variance.sum() == pytest.approx((weights**2).sum(), rel=1e-10)


def test_variations_keep_their_relative_change() -> None:
    moved = templates_at(World().template_set(), {"SR": -1.0}).templates["only", "signal"]
    np.testing.assert_allclose(moved.plus["tag"] / moved.nominal, [0.9, 0.95, 1.05, 1.1], rtol=1e-12)


def test_contracted_pieces() -> None:
    world = World()
    template = world.template_set().templates["only", "signal"]
    left = contracted(template.quadratic, {"SR": 0.6, "T": -0.2}, ("T",))
    assert set(left) <= set(pairs_of(("T",)))
    for t in (-0.5, 0.3):
        here = sum(piece * monomials([t])[pairs_of(("T",)).index(pair)] for pair, piece in left.items())
        np.testing.assert_allclose(here, world.histogram(world.weights((0.6, t))), rtol=1e-12)


def test_gradient_of_a_form() -> None:
    form = {(a, b): piece for a, b, piece in World().template_set().parameters[0].rate}
    point = np.array([0.4, -0.3])
    slopes = gradient_at(form, at((0.4, -0.3)))
    numerical = approx_fprime(point, lambda p: value_at(form, dict(zip(NAMES, p, strict=True))), 1e-7)
    np.testing.assert_allclose([slopes[name] for name in NAMES], numerical, rtol=1e-5)


def test_few_effective_events_are_told() -> None:
    templates = World().template_set()
    assert not list(poor_reweightings(templates, {"SR": 0.3}))
    # one event far from the others carries everything: 400 events, one of them with a thousand times the tensor part
    world = World()
    world.parts[2, 0] = 3000.0
    (problem,) = poor_reweightings(world.template_set(), {"T": 0.9})
    assert problem.what == "few effective events behind signal in only"
    with pytest.raises(InputError, match=r"too few effective events behind signal.*allowed at least 10"):
        templates_at(world.template_set(), {"T": 0.9})


@pytest.mark.parametrize(
    ("values", "message"),
    [
        ({"SL": 0.1}, r"coefficient SL: the templates are no functions of this coefficient \(allowed SR, T\)"),
        ({"SR": float("nan")}, r"coefficient SR: not a value for this coefficient \(got nan, allowed ±4 at most\)"),
        ({"T": 1.01}, r"got 1.01, allowed ±1 at most"),
        ({"T": True}, "got True"),
        ({"T": "x"}, "got 'x'"),
    ],
)
def test_senseless_points(values: dict[str, Any], message: str) -> None:
    with pytest.raises(InputError, match=message):
        templates_at(World().template_set(), values)


def test_plain_templates_have_no_other_point() -> None:
    with pytest.raises(InputError, match=r"allowed none.*Build the templates with a \[quadratic\] table"):
        templates_at(sample(), {"SR": 0.1})
    assert reweightings(sample()) == ()


def test_a_point_without_rate() -> None:
    templates = World((0.0, 0.0)).template_set()
    rate = (("one", "one", 0.3), ("one", "SR", 0.6), ("SR", "SR", 0.3))  # 0.3 (1 + SR)²
    parameters = (replace(templates.parameters[0], rate=rate), templates.parameters[1])
    with pytest.raises(InputError, match="there is no rate at this point"):
        templates_at(replace(templates, parameters=parameters), {"SR": -1.0})


def test_round_trip(tmp_path: Path) -> None:
    templates = World().template_set()
    write_templates(templates, tmp_path / "t.root")
    read = read_templates(tmp_path / "t.root")
    assert_same(templates, read)
    first, second = (t.templates["only", "signal"] for t in (templates, read))
    assert read.coefficients == templates.coefficients
    assert first.quadratic.keys() == second.quadratic.keys()
    for pair, piece in first.quadratic.items():
        assert piece.tobytes() == second.quadratic[pair].tobytes()
    assert first.moments is not None
    assert second.moments is not None
    assert first.moments.tobytes() == second.moments.tobytes()
    with uproot.open(tmp_path / "t.root") as file:
        assert json.loads(file["meta"])["version"] == "1.1"
        assert "only/signal/quadratic/one/SR;1" in file
    copied = pickle.loads(pickle.dumps(templates))
    assert_same(templates, copied)
    assert copied.templates["only", "signal"].quadratic.keys() == first.quadratic.keys()


def test_files_without_coefficients_stay_as_they_were(tmp_path: Path) -> None:
    write_templates(sample(), tmp_path / "t.root")
    with uproot.open(tmp_path / "t.root") as file:
        meta = json.loads(file["meta"])
    assert meta["version"] == "1.0"
    assert "coefficients" not in meta
    assert all("rate" not in parameter for parameter in meta["parameters"])


Change = Callable[[dict[str, Any], Any], None]


def tampered(path: Path, change: Callable[[dict[str, Any]], None], extra: dict[str, Any] | None = None) -> Path:
    """The file with its description changed and objects added."""
    with uproot.open(path) as file:
        meta = json.loads(file["meta"])
        histograms = {name: file[name].to_boost() for name in file.keys(cycle=False, filter_classname="TH*")}
    change(meta)
    target = path.with_name("tampered.root")
    with uproot.recreate(target) as file:
        file["meta"] = json.dumps(meta)
        for name, histogram in (histograms | (extra or {})).items():
            if histogram is not None:
                file[name] = histogram
    return target


def nothing(meta: dict[str, Any]) -> None:
    pass


def plain(*shape: int) -> tuple[np.ndarray, ...]:
    return (np.ones(shape), *(np.arange(n + 1.0) for n in shape))


@pytest.mark.parametrize(
    ("change", "extra", "message"),
    [
        (lambda m: m["coefficients"].pop(0), None, r"unknown coefficient \(got 'SR', allowed one, T\)"),
        (lambda m: m["coefficients"][0].update(value=9.0), None, "the value is beyond its limit .got 9.0, allowed ±4"),
        (lambda m: m["coefficients"][0].update(limit="x"), None, r"coefficients\[0\].limit: input should be a valid"),
        (lambda m: m["coefficients"][0].update(value=0.2), None, "the pieces do not add up to what is injected"),
        (lambda m: m["coefficients"][0].update(name="moments"), None, "keeps this name for itself"),
        (lambda m: m["parameters"][0].update(rate=[["one", "one", 0.1]]), None, "R_D: the pieces do not add up"),
        (lambda m: m["parameters"][0].update(rate=[["one", "XX", 0.1]]), None, "unknown coefficient .got 'XX'"),
        (lambda m: m["parameters"][0].update(rate=[["one", 0.1]]), None, r"rate\[0\]"),
        (nothing, {"only/signal/quadratic/moments": plain(3, 3)}, r"wrong size \(got \(3, 3\), allowed \(6, 6\)\)"),
        (nothing, {"only/signal/quadratic/moments": plain(3, 6)}, "not a square matrix"),
        (nothing, {"only/signal/quadratic/moments": plain(6)}, "moments: wrong number of axes .got 1, allowed 2"),
        (nothing, {"only/signal/quadratic/one/SR": plain(3)}, "edges of x differ"),
        (nothing, {"only/signal/quadratic/T/SR": World().template_set()}, "coefficients in the wrong order"),
        (nothing, {"only/light/quadratic/moments": plain(6, 6)}, "moments without pieces"),
    ],
)
def test_untrusted_files(tmp_path: Path, change: Any, extra: dict[str, Any] | None, message: str) -> None:
    write_templates(World().template_set(), tmp_path / "t.root")
    edges = np.array([0.0, 0.2, 0.5, 0.7, 1.0])
    given = {
        name: (np.ones(4), edges) if isinstance(value, TemplateSet) else value for name, value in (extra or {}).items()
    }
    with pytest.raises(InputError, match=message):
        read_templates(tampered(tmp_path / "t.root", change, given))


def test_values_beyond_sense() -> None:
    with pytest.raises(InputError, match="a limit must be positive and finite"):
        Coefficient("SR", "", 0.0, float("inf"))
    with pytest.raises(InputError, match="a piece of the rate is not finite"):
        ScaleParameter("R_D", "", "ratio", 0.3, None, (("one", "one", float("nan")),))
