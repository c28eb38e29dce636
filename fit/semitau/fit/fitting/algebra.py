"""Small dense linear algebra for compiled fits: no threads, no allocation, the same bits every time."""

from __future__ import annotations

import numpy as np
from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from ..likelihood.layout import Indices

SINGULAR = 1e-10
"""A pivot of a matrix with unit diagonal below which a direction counts as flat: 1 - R² of a parameter on others."""


@kernel
def factorise(matrix: Floats, free: Indices, ridge: float, scale: Floats, lower: Floats) -> bool:
    """Cholesky factor of the free rows and columns, scaled to unit diagonal: S(matrix)S + ridge = lower lowerᵀ.

    scale : filled with the diagonal of S. Returns False when the matrix is not positive definite (enough).
    """
    n = free.shape[0]
    for i in range(n):
        diagonal = matrix[free[i], free[i]]
        if not diagonal > 0.0:
            if ridge == 0.0:
                return False
            diagonal = 1.0
        scale[i] = 1.0 / np.sqrt(diagonal)
    for i in range(n):
        for j in range(i + 1):
            total = matrix[free[i], free[j]] * scale[i] * scale[j]
            if i == j:
                total += ridge
            for k in range(j):
                total -= lower[i, k] * lower[j, k]
            if i == j:
                if not total > SINGULAR:
                    return False
                lower[i, i] = np.sqrt(total)
            else:
                lower[i, j] = total / lower[j, j]
    return True


@kernel
def solve(lower: Floats, scale: Floats, free: Indices, vector: Floats, out: Floats) -> None:
    """out = (matrix)⁻¹ vector[free] from the factor of `factorise`; out has one entry for each free parameter."""
    n = free.shape[0]
    for i in range(n):
        total = vector[free[i]] * scale[i]
        for k in range(i):
            total -= lower[i, k] * out[k]
        out[i] = total / lower[i, i]
    for i in range(n - 1, -1, -1):
        total = out[i]
        for k in range(i + 1, n):
            total -= lower[k, i] * out[k]
        out[i] = total / lower[i, i]
    for i in range(n):
        out[i] *= scale[i]


@kernel
def inverse_diagonal(lower: Floats, scale: Floats, n: int, scratch: Floats, out: Floats) -> None:
    """Diagonal of the inverse matrix from the factor of `factorise`: variances from a Hessian. scratch : (n,)."""
    for column in range(n):
        total = 0.0
        for i in range(column, n):
            value = 1.0 if i == column else 0.0
            for k in range(column, i):
                value -= lower[i, k] * scratch[k]
            scratch[i] = value / lower[i, i]
            total += scratch[i] * scratch[i]
        out[column] = total * scale[column] * scale[column]
