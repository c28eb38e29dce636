"""Information brought back to the positive ones: nearest by brute force, in any units of the parameters."""

from __future__ import annotations

import os

import numpy as np
from numpy.typing import NDArray
from scipy import linalg, optimize
from semitau.fit.uncertainty.positive_information import positive_information

Floats = NDArray[np.float64]
SEED = int(os.environ.get("SEMITAU_TEST_SEED", "20261201"))


def whole(lower: Floats) -> Floats:
    return lower + np.tril(lower, -1).T


def square(generator: np.random.Generator, n: int) -> Floats:
    root = generator.normal(size=(n, n))
    return root @ root.T


def test_nothing_to_mend() -> None:
    estimate, upper = np.tril(np.diag([1.0, 0.0, 0.5])), np.diag([1.0, 1.0, 2.0])
    assert positive_information(estimate, upper) is estimate


def test_independent_parameters() -> None:
    """Each stands for itself; what nothing is told of stays out."""
    found = positive_information(np.diag([3.0, -0.2, 0.0, 1e-9]), np.diag([4.0, 0.1, 0.0, 1e-8]))
    np.testing.assert_allclose(found, np.diag([3.0, 0.0, 0.0, 1e-9]), atol=1e-14)


def test_nearest_in_the_metric_of_the_upper_one() -> None:
    """Distance tr[(X - E) U⁻¹ (X - E) U⁻¹] over X = L Lᵀ, by a general-purpose minimiser."""
    generator = np.random.default_rng(SEED)
    for _ in range(5):
        upper = square(generator, 3)
        estimate = upper - 1.7 * square(generator, 3) * np.trace(upper) / 9.0
        found = whole(positive_information(np.tril(estimate), np.tril(upper)))
        assert linalg.eigvalsh(estimate, upper)[0] < 0.0 <= linalg.eigvalsh(found, upper)[0] + 1e-12
        inverse = np.linalg.inv(upper)

        def distance(x: Floats, estimate: Floats = estimate, inverse: Floats = inverse) -> float:
            gap = (x - estimate) @ inverse
            return float(np.trace(gap @ gap))

        def of_root(entries: Floats, distance: object = distance) -> float:
            root = entries.reshape(3, 3)
            return distance(root @ root.T)  # type: ignore[operator, no-any-return]

        starts = [generator.normal(size=9) for _ in range(4)]
        best = min(optimize.minimize(of_root, s, method="BFGS", options={"gtol": 1e-9}).fun for s in starts)
        assert distance(found) <= best + 1e-6 * (1.0 + best)


def test_units_of_the_parameters_do_not_matter() -> None:
    generator = np.random.default_rng(SEED + 1)
    upper, scale = square(generator, 4), np.diag([1e-4, 1.0, 30.0, 1e6])
    estimate = upper - 0.8 * square(generator, 4)
    expected = whole(positive_information(np.tril(estimate), np.tril(upper)))
    found = whole(positive_information(np.tril(scale @ estimate @ scale), np.tril(scale @ upper @ scale)))
    back = np.linalg.inv(scale)
    np.testing.assert_allclose(back @ found @ back, expected, rtol=1e-8, atol=1e-9)
