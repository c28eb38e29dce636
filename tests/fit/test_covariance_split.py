"""The covariance by kind of source against the fit's own, and against refits with every source moved by hand."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from semitau.core.errors import RunError
from semitau.fit.fitting.model import Model
from semitau.fit.fitting.newton import maximise
from semitau.fit.uncertainty.covariance_split import split_covariance
from semitau.fit.uncertainty.decomposition import budget

from .problems import real_size

NAMES = ("R_D", "R_Dst")


@pytest.fixture(scope="module")
def model() -> Model:
    return Model(real_size())


def test_parts_add_up_to_the_fit(model: Model) -> None:
    """On the expected set the expected information is the Hessian, which the fit inverts."""
    fitted = maximise(model, model.expected_data())
    parts = split_covariance(model, fitted, NAMES)
    places = [model.index(name) for name in NAMES]
    assert parts.statistical + parts.systematic == pytest.approx(fitted.covariance[np.ix_(places, places)], rel=1e-6)
    for k, split in enumerate(budget(model, fitted).values()):
        assert parts.systematic[k, k] == pytest.approx(split.systematic**2, rel=1e-9)
    assert abs(parts.systematic[0, 1]) > 1e-3 * np.sqrt(parts.systematic[0, 0] * parts.systematic[1, 1])


def test_systematic_part_by_brute_force(model: Model) -> None:
    """Every auxiliary measurement moved by a twentieth of its error and the fit repeated: the sum over sources of the
    products of what the ratios do. The step is small, as the formula is that of a straight line."""
    data = model.expected_data()
    best = maximise(model, data)
    expected = np.zeros((2, 2))
    for k, parameter in enumerate(model.parameters):
        if parameter.constraint is None:
            continue
        step = 0.05 / np.sqrt(model.precision(best.values)[k, k])
        moved = []
        for sign in (1.0, -1.0):
            centres = data.centres.copy()
            centres[k] += sign * step
            moved.append(maximise(model, replace(data, centres=centres)))
        shift = np.array([moved[0].value(name) - moved[1].value(name) for name in NAMES]) / 0.1
        expected += np.outer(shift, shift)
    assert split_covariance(model, best, NAMES).systematic == pytest.approx(expected, rel=0.02)


def test_a_held_ratio_has_none(model: Model) -> None:
    held = Model(real_size(), fixed={"R_D": 0.3})
    with pytest.raises(RunError, match="no covariance to take apart"):
        split_covariance(held, maximise(held, held.expected_data()), NAMES)
