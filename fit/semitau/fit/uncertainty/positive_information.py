"""Information that came out negative in some direction, brought back to what information can be."""

from __future__ import annotations

import numpy as np
from scipy import linalg
from semitau.core.templates import Floats

_NEGLIGIBLE = 1e-12
"""Of the largest eigenvalue: a direction of which nothing is told."""


def positive_information(estimate: Floats, upper: Floats) -> Floats:
    """The estimate without what is negative in it: lower triangles (n, n), as the result.

    upper : information that is positive and contains the estimated one, such as the same with the fluctuations of the
    templates in it; it says in what units directions are compared. An estimate without bias of a small information
    may be negative in single directions. There it becomes zero; an estimate that is positive comes back as it is.
    This is the projection onto the positive semidefinite matrices in the metric of `upper` (N. J. Higham, Linear
    Algebra Appl. 103 (1988) 103, from memory).
    """
    whole, above = (matrix + np.tril(matrix, -1).T for matrix in (estimate, upper))
    told = np.flatnonzero(np.diag(above) > 0.0)
    size = np.sqrt(np.diag(above)[told])
    values, vectors = linalg.eigh(above[np.ix_(told, told)] / np.outer(size, size))
    kept = values > _NEGLIGIBLE * values[-1] if values.size else values > 0.0
    basis = vectors[:, kept] / np.sqrt(values[kept]) / size[:, None]
    shares, turns = linalg.eigh(basis.T @ whole[np.ix_(told, told)] @ basis)
    if not np.any(shares < 0.0):
        return estimate
    back = (vectors[:, kept] * np.sqrt(values[kept]) * size[:, None]) @ turns
    out = np.zeros_like(whole)
    out[np.ix_(told, told)] = (back * np.maximum(shares, 0.0)) @ back.T
    return np.tril(out)
