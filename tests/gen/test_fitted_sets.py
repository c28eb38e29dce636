"""Sets that this project fitted: the recipe that their files tell gives their numbers again."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from scipy.optimize import least_squares
from semitau import gen
from semitau.core.constants import MASS
from semitau.gen.decays.form_factor_set import FormFactors
from semitau.gen.decays.form_factor_values import PseudoscalarFormFactors, VectorFormFactors

B, D, DST = MASS["B0"], MASS["D+"], MASS["D*+"]
REST = 1.0001
"""Stands for w = 1, where A2 is 0/0."""

Points = Callable[[FormFactors], np.ndarray]


def q2_at(w: list[float], m: float) -> np.ndarray:
    return B * B + m * m - 2 * B * m * np.array(w)


def pseudoscalar(member: FormFactors, w: list[float]) -> PseudoscalarFormFactors:
    values = member(B, D, q2_at(w, D))
    assert isinstance(values, PseudoscalarFormFactors)
    return values


def vector(member: FormFactors, w: list[float]) -> VectorFormFactors:
    values = member(B, DST, q2_at(w, DST))
    assert isinstance(values, VectorFormFactors)
    return values


def points_with_covariance(member: FormFactors, points: Points) -> tuple[np.ndarray, np.ndarray]:
    """Values of a set at points, and their covariance from that of its parameters."""
    slopes = np.array(
        [
            (points(member.shifted({name: error})) - points(member.shifted({name: -error}))) / (2 * error)
            for name, error in zip(member.names, member.errors, strict=True)
        ]
    )
    return points(member), slopes.T @ member.covariance @ slopes


def whitened(covariance: np.ndarray) -> np.ndarray:
    return np.linalg.cholesky(np.linalg.inv(covariance)).T


def compare(start: FormFactors, residuals: Callable[[FormFactors], np.ndarray]) -> None:
    """Values to a twentieth of their errors, errors to 2%, correlations to 0.02."""
    scale = np.array(start.errors)

    def function(x: np.ndarray) -> np.ndarray:
        return residuals(replace(start, values=tuple((x * scale).tolist())))

    found = least_squares(function, np.array(start.values) / scale)
    covariance = np.linalg.inv(found.jac.T @ found.jac)
    errors = np.sqrt(np.diag(covariance))
    np.testing.assert_allclose(found.x, np.array(start.values) / scale, atol=0.05)
    np.testing.assert_allclose(errors, 1.0, rtol=0.02)
    np.testing.assert_allclose(covariance / np.outer(errors, errors), start.correlation, atol=0.02)


def test_heavy_quark_expansion() -> None:
    w = 1.25
    square = (B * B - DST * DST - q2_at([w], DST)[0]) ** 2 - 4 * DST**2 * q2_at([w], DST)[0]

    def of_d(member: FormFactors) -> np.ndarray:
        values = pseudoscalar(member, [REST, 1.3, 1.58])
        return np.concatenate([values.f_plus, values.f_zero[:2]])

    def of_dst(member: FormFactors) -> np.ndarray:
        values = vector(member, [REST, w])
        r = DST / B
        h = values.A1 / (np.sqrt(r) / (1 + r) * (np.array([REST, w]) + 1))
        A2 = (
            ((B * B - DST**2 - q2_at([w], DST)) * (B + DST) * values.A1[1] - 2 * DST * values.F1[1])
            * (B + DST)
            / square
        )
        c = 2 * np.sqrt(r) / (1 + r)
        return np.array([h[1] / h[0], values.V[1] * c / h[1], A2[0] * c / h[1]])

    known_d, error_d = points_with_covariance(gen.form_factors("BCL-2021")["D"], of_d)
    known_dst, error_dst = points_with_covariance(gen.form_factors("CLN-2021")["Dst"], of_dst)
    turn_d = whitened(error_d + np.diag((0.01 * known_d) ** 2))
    turn_dst = whitened(error_dst + np.diag((0.02 * known_dst) ** 2))
    sum_rules = {
        "chi2(1)": (-0.06, 0.02),
        "chi2_slope": (0.0, 0.02),
        "chi3_slope": (0.04, 0.02),
        "eta(1)": (0.62, 0.20),
        "eta_slope": (0.0, 0.2),
        "m_b": (4.71, 0.05),
        "m_b-m_c": (3.40, 0.02),
        "h(1)": (0.906, 0.013),
    }
    dst = gen.form_factors("HQE-2021")["Dst"]

    def residuals(member: FormFactors) -> np.ndarray:
        other = replace(dst, values=member.values)
        rules = [(member.parameters[name] - value) / error for name, (value, error) in sum_rules.items()]
        return np.concatenate([turn_d @ (of_d(member) - known_d), turn_dst @ (of_dst(other) - known_dst), rules])

    compare(gen.form_factors("HQE-2021")["D"], residuals)


def test_bcl_of_dst() -> None:
    def points(member: FormFactors) -> np.ndarray:
        values = vector(member, [REST, 1.25, 1.5])
        return np.concatenate([values.V, values.A0, values.A1, values.F1[1:]])

    known, covariance = points_with_covariance(gen.form_factors("BGL-2021")["Dst"], points)
    turn = whitened(covariance)
    compare(gen.form_factors("BCL-2022")["Dst"], lambda member: turn @ (points(member) - known))


@pytest.mark.parametrize("w", [1.05, 1.2, 1.35, 1.5])
def test_curves_stay(w: float) -> None:
    """BCL-2022 against BGL-2021 at other points: within a third of the errors of the latter."""
    ours, theirs = (gen.form_factors(name)["Dst"] for name in ("BCL-2022", "BGL-2021"))

    def points(member: FormFactors) -> np.ndarray:
        values = vector(member, [w])
        return np.concatenate([values.V, values.A0, values.A1, values.F1])

    known, covariance = points_with_covariance(theirs, points)
    assert np.all(np.abs(points(ours) - known) < np.sqrt(np.diag(covariance)) / 3)
