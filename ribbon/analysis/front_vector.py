"""Steps on eight numbers at a time for `front_code`: LLVM vectors through numba.

Written out because loops over columns come out scalar: the compiler must ask whether the arrays
overlap and whether an index is negative. Whoever changes a step here must touch `front_code`
too, where numba looks to see whether its cached code is stale.
"""

from __future__ import annotations

import importlib
from typing import Any

__all__ = ["PANEL", "carry", "dots", "jit", "numba", "squares", "subtract"]

PANEL = 8
"""Rows that are eliminated together, and numbers in a vector."""

numba: Any
cgutils: Any
try:
    numba = importlib.import_module("numba")
    cgutils = importlib.import_module("numba.core.cgutils")
except ImportError:
    numba = cgutils = None
else:
    ir = cgutils.ir
    VECTOR = ir.VectorType(ir.DoubleType(), PANEL)
    LONG, SHORT = ir.IntType(64), ir.IntType(32)
    CONTRACT = ("contract",)


def jit(function: Any) -> Any:
    """The function compiled when it is first called; itself where numba is not there."""
    if numba is None:
        return function
    options = {"nogil": True, "error_model": "numpy", "fastmath": {"contract", "reassoc", "nsz"}}
    try:
        return numba.njit(cache=True, **options)(function)
    except RuntimeError:  # no folder to keep compiled code in
        return numba.njit(**options)(function)


def _pointers(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
    """A function that gives the vector at an offset into the array that is argument ``place``."""

    def pointer(place: int, offset: Any, kind: Any = None) -> Any:
        make = context.make_array(signature.args[place])
        data = make(context, builder, arguments[place]).data
        return builder.bitcast(builder.gep(data, [offset]), (kind or VECTOR).as_pointer())

    return pointer


def _emit_subtract(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
    """LLVM code: eight columns of one row, less the eight rows of the panel times factors."""
    pointer = _pointers(context, builder, signature, arguments)

    def everywhere(value: Any) -> Any:
        empty = ir.Constant(VECTOR, ir.Undefined)
        first = builder.insert_element(empty, value, SHORT(0))
        return builder.shuffle_vector(first, empty, ir.VectorType(SHORT, PANEL)([0] * PANEL))

    target, source, start, stride = arguments[1:3] + arguments[4:6]
    total = builder.load(pointer(0, source), align=8)
    for row in range(PANEL):
        offset = builder.add(start, builder.mul(stride, LONG(row)))
        held = builder.load(pointer(3, offset), align=8)
        factor = everywhere(builder.extract_value(arguments[6], row))
        product = builder.fmul(factor, held, flags=CONTRACT)
        total = builder.fsub(total, product, flags=CONTRACT)
    builder.store(total, pointer(0, target), align=8)
    return context.get_dummy_value()


def _subtract(
    typing: Any,
    rows: Any,
    target: Any,
    source: Any,
    panel: Any,
    start: Any,
    stride: Any,
    factors: Any,
) -> Any:
    """Types of `_emit_subtract`, for numba: flat arrays, places in them, and a tuple of factors."""
    place = numba.types.intp
    kinds = (rows, place, place, panel, place, place, factors)
    return numba.types.void(*kinds), _emit_subtract


def _emit_carry(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
    """LLVM code: copy numbers of one array into another, eight at a time."""
    pointer = _pointers(context, builder, signature, arguments)
    _, target, _, source, count = arguments
    with cgutils.for_range_slice(builder, LONG(0), count, LONG(PANEL)) as (offset, _):
        held = builder.load(pointer(2, builder.add(source, offset)), align=8)
        builder.store(held, pointer(0, builder.add(target, offset)), align=8)
    return context.get_dummy_value()


def _carry(typing: Any, rows: Any, target: Any, other: Any, source: Any, count: Any) -> Any:
    """Types of `_emit_carry`, for numba."""
    place = numba.types.intp
    return numba.types.void(rows, place, other, place, place), _emit_carry


def _emit_squares(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
    """LLVM code: the sum of squares of a stretch of an array, eight at a time."""
    pointer = _pointers(context, builder, signature, arguments)
    total = cgutils.alloca_once_value(builder, ir.Constant(VECTOR, [0.0] * PANEL))
    with cgutils.for_range_slice(builder, LONG(0), arguments[2], LONG(PANEL)) as (offset, _):
        held = builder.load(pointer(0, builder.add(arguments[1], offset)), align=8)
        square = builder.fmul(held, held, flags=CONTRACT)
        builder.store(builder.fadd(builder.load(total), square, flags=CONTRACT), total)
    found = builder.load(total)
    parts = [builder.extract_element(found, SHORT(place)) for place in range(PANEL)]
    while len(parts) > 1:
        parts = [builder.fadd(*parts[place : place + 2]) for place in range(0, len(parts), 2)]
    return parts[0]


def _squares(typing: Any, rows: Any, first: Any, count: Any) -> Any:
    """Types of `_emit_squares`, for numba."""
    place = numba.types.intp
    return numba.types.float64(rows, place, place), _emit_squares


def _emit_dots(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
    """LLVM code: products of eight rows with a stretch of a vector, four columns at a time."""
    pointer = _pointers(context, builder, signature, arguments)
    four = ir.VectorType(ir.DoubleType(), 4)

    def load(place: int, offset: Any) -> Any:
        return builder.load(pointer(place, offset, four), align=8)

    start, stride, _, place, count = arguments[1:]
    none = ir.Constant(four, [0.0] * 4)
    totals = [cgutils.alloca_once_value(builder, none) for _ in range(PANEL)]
    with cgutils.for_range_slice(builder, LONG(0), count, LONG(4)) as (offset, _):
        there = load(3, builder.add(place, offset))
        for row, total in enumerate(totals):
            begin = builder.add(start, builder.mul(stride, LONG(row)))
            product = builder.fmul(load(0, builder.add(begin, offset)), there, flags=CONTRACT)
            builder.store(builder.fadd(builder.load(total), product, flags=CONTRACT), total)
    sums = []
    for total in totals:
        found = builder.load(total)
        one, two, three, last = (builder.extract_element(found, SHORT(i)) for i in range(4))
        sums.append(builder.fadd(builder.fadd(one, two), builder.fadd(three, last)))
    return context.make_tuple(builder, signature.return_type, sums)


def _dots(
    typing: Any, rows: Any, start: Any, stride: Any, vector: Any, first: Any, count: Any
) -> Any:
    """Types of `_emit_dots`, for numba."""
    place, result = numba.types.intp, numba.types.UniTuple(numba.types.float64, PANEL)
    return result(rows, place, place, vector, place, place), _emit_dots


def _intrinsic(typer: Any) -> Any:
    return None if numba is None else numba.extending.intrinsic(typer)


carry, dots, squares, subtract = (
    _intrinsic(typer) for typer in (_carry, _dots, _squares, _subtract)
)
