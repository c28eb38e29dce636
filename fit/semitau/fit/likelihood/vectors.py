"""A dot product of lanes that runs on the machine's vectors without leave to reorder arithmetic.

A plain loop adds one product after the other, and the compiler must keep that order; eight partial sums written out
by hand were measured to stay scalar as well (7 times slower). Here the eight partial sums are one vector in the
compiler's own language, added up pairwise at the end: the order is fixed, so the bits are the same on machines with
wide and narrow vectors.
"""

from __future__ import annotations

from typing import Any

from llvmlite import ir
from numba import types
from numba.core import cgutils
from numba.extending import intrinsic

WIDTH = 8
"""Lanes of a vector; lengths are multiples of it."""


@intrinsic
def _dot(_typing: Any, a: Any, a_first: Any, b: Any, b_first: Any, length: Any) -> Any:
    def generate(context: Any, builder: Any, signature: Any, args: Any) -> Any:
        a_value, a_offset, b_value, b_offset, count = args
        a_data = context.make_array(signature.args[0])(context, builder, a_value).data
        b_data = context.make_array(signature.args[2])(context, builder, b_value).data
        vector, whole = ir.VectorType(ir.DoubleType(), WIDTH), ir.IntType(64)

        def lanes(data: Any, place: Any) -> Any:
            return builder.load(builder.bitcast(builder.gep(data, [place]), vector.as_pointer()), align=8)

        sums = cgutils.alloca_once(builder, vector)  # type: ignore[no-untyped-call]
        builder.store(ir.Constant(vector, [0.0] * WIDTH), sums)
        with cgutils.for_range_slice(builder, ir.Constant(whole, 0), count, ir.Constant(whole, WIDTH)) as (i, _):
            product = builder.fmul(lanes(a_data, builder.add(a_offset, i)), lanes(b_data, builder.add(b_offset, i)))
            builder.store(builder.fadd(builder.load(sums), product), sums)
        last = builder.load(sums)
        parts = [builder.extract_element(last, ir.Constant(ir.IntType(32), lane)) for lane in range(WIDTH)]
        while len(parts) > 1:
            parts = [builder.fadd(parts[i], parts[i + 1]) for i in range(0, len(parts), 2)]
        return parts[0]

    return types.float64(a, types.int64, b, types.int64, types.int64), generate


dot: Any = _dot
"""dot(a, a_first, b, b_first, length) in compiled code: the sum of a[a_first + i] b[b_first + i] for i < length.

a, b : C-contiguous float64 arrays of any dimension, read as flat; length a multiple of WIDTH. Nothing is checked.
"""
