"""Variations rearranged, against their definitions; extrapolation and positivity of what the fit makes of them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from semitau.core.errors import InputError
from semitau.core.templates import Template, TemplateSet
from semitau.fit import Model, interpolate, maximise
from semitau.fit.fitting.shape_and_rate import mirror, mirrored, one_sided, split_shape_and_rate
from semitau.fit.likelihood.interpolation import positive

from . import problems


def totals(templates: TemplateSet, component: str, side: str, name: str) -> float:
    mine = [t for (_, owner), t in templates.templates.items() if owner == component]
    return sum(float((getattr(t, side) if side != "nominal" else {}).get(name, t.nominal).sum()) for t in mine)


def test_parts_are_what_they_say() -> None:
    """The shape part keeps each total, the rate part each shape, and their product is the variation."""
    whole = problems.small()
    parts = split_shape_and_rate(whole, ["lepton_id"])
    assert [n.name for n in parts.nuisances] == ["slow_pion", "lepton_id_shape", "lepton_id_rate", "R0"]
    for component in ("D_tau", "Dst_tau", "Dst_light"):
        for side in ("plus", "minus"):
            nominal = totals(whole, component, "nominal", "")
            assert totals(parts, component, side, "lepton_id_shape") == pytest.approx(nominal, rel=1e-12)
            assert totals(parts, component, side, "lepton_id_rate") == pytest.approx(
                totals(whole, component, side, "lepton_id"), rel=1e-12
            )
    for place, template in whole.templates.items():
        if "lepton_id" in template.plus:
            new = parts.templates[place]
            product = new.plus["lepton_id_shape"] * new.plus["lepton_id_rate"] / new.nominal
            np.testing.assert_allclose(product, template.plus["lepton_id"], rtol=1e-12)


def test_parts_are_fitted_apart() -> None:
    """Pulled alike they are the whole, to the product of two small shifts; held apart they give two pulls."""
    whole, parts = Model(problems.small()), Model(split_shape_and_rate(problems.small(), ["lepton_id"]))
    for theta in (-1.0, 0.3):
        one = whole.expected_counts({"lepton_id": theta})
        two = parts.expected_counts({"lepton_id_shape": theta, "lepton_id_rate": theta})
        np.testing.assert_allclose(one, two, rtol=0.01)
    assert maximise(parts, parts.expected_data()).valid


def test_parts_need_a_rate() -> None:
    with pytest.raises(InputError, match="no such nuisance"):
        split_shape_and_rate(problems.small(), ["lepton"])
    base = problems.small()
    place = ("D0", "D_tau")
    empty = {key: t for key, t in base.templates.items() if key[1] != "D_tau"}
    zero = np.zeros_like(base.templates[place].nominal)
    empty[place] = Template(zero, zero, {"slow_pion": zero + 1}, {"slow_pion": zero})
    with pytest.raises(InputError, match="a total is not positive"):
        split_shape_and_rate(replace(base, templates=empty), ["slow_pion"])


def test_mirror() -> None:
    """The other side as far from the nominal, so the template is a straight line: no even part is left."""
    once = mirrored(problems.small(), {"R0": "plus"})
    for place, template in problems.small().templates.items():
        if "R0" in template.plus:
            np.testing.assert_array_equal(once.templates[place].plus["R0"], template.plus["R0"])
            np.testing.assert_allclose(once.templates[place].minus["R0"], mirror(template.nominal, template.plus["R0"]))
            for theta in (-2.0, -0.4, 0.7):
                value, _, curvature = interpolate(
                    template.nominal, once.templates[place].plus["R0"], once.templates[place].minus["R0"], theta
                )
                straight = template.nominal + theta * (template.plus["R0"] - template.nominal)
                np.testing.assert_allclose(value, straight, rtol=1e-12)
                np.testing.assert_allclose(curvature, 0.0, atol=1e-12)
    with pytest.raises(InputError, match="no side of a variation"):
        mirrored(problems.small(), {"R0": "up"})
    with pytest.raises(InputError, match="no such nuisance"):
        mirrored(problems.small(), {"R1": "plus"})


def test_missing_side_is_refused() -> None:
    with pytest.raises(InputError, match="one side of a variation is missing"):
        Template(np.ones(3), np.ones(3), {"R0": np.ones(3)}, {})


def folded() -> TemplateSet:
    base = problems.small()
    changed = {
        place: Template(t.nominal, t.variance, t.plus, {**t.minus, **({"R0": t.plus["R0"]} if "R0" in t.plus else {})})
        for place, t in base.templates.items()
    }
    return replace(base, templates=changed)


def test_one_sided_variations_are_found() -> None:
    assert one_sided(problems.small()) == ()
    assert one_sided(folded()) == ("R0",)
    with pytest.raises(InputError, match="both sides shift the templates alike"):
        Model(folded())
    assert Model(mirrored(folded(), {"R0": "plus"})).names[-1] == "R0"
    assert Model(folded(), fixed={"R0": 0.0}).bins == 21


@pytest.mark.parametrize("theta", [-8.0, -3.0, 3.0, 8.0])
def test_far_out_it_is_straight_and_expectations_stay_positive(theta: float) -> None:
    """Outside |θ| = 1 a line through nominal and side; where that is negative, the sum is kept positive."""
    model = Model(problems.small())
    counts = model.expected_counts({"R0": theta})
    assert (counts > 0).all()
    side = model.expected_counts({"R0": np.sign(theta)})
    line = model.expected_counts() + abs(theta) * (side - model.expected_counts())
    floor = 0.01 * model.expected_counts()
    np.testing.assert_allclose(counts, [positive(n, f)[0] for n, f in zip(line, floor, strict=True)], rtol=1e-9)
