"""Gradient and Hessian from the derivatives of the bins: sums of outer products over the lanes of a tile."""

from __future__ import annotations

from semitau.core.compiled import kernel
from semitau.core.templates import Floats

from .expectation import Workspace
from .layout import Arrays
from .vectors import dot


@kernel
def add_outer_products(arrays: Arrays, tile: int, gradient: Floats, hessian: Floats, work: Workspace) -> None:
    length = arrays.tile_first[tile + 1] - arrays.tile_first[tile]
    stride = work.rows.shape[1]
    derivative, weight, product = work.lanes[1], work.lanes[2], work.lanes[3]
    begin, end = arrays.tile_rows[tile], arrays.tile_rows[tile + 1]
    for j in range(begin, end):
        p = arrays.rows[j]
        row = work.rows[p]
        gradient[p] += dot(derivative, 0, row, 0, length)
        for i in range(length):
            product[i] = weight[i] * row[i]
        for l in range(begin, j + 1):
            q = arrays.rows[l]
            hessian[p, q] += dot(product, 0, work.rows, q * stride, length)
