"""The Chebyshev recursion compiled by numba, where that package is there; None otherwise.

Loaded on first use only: numba takes longer to import than the rest of the package. A block of
`WIDTH` columns of one site is one LLVM vector, so that a row is worked on in registers; written
as a loop over the columns the same arithmetic took twice as long, because the compiler must ask
for every row whether the arrays overlap.

The steps are not done one after another over the whole ring. Rows stand in an order in which
they meet only near ones, and each piece of rows is taken on by several steps while it is still
in the cache: step s works on piece c - s when step 0 works on piece c. What memory carries is
then one reading and writing for several steps.
"""

from __future__ import annotations

import importlib
from typing import Any

import numpy as np

__all__ = ["WIDTH", "sweep"]

WIDTH = 16

numba: Any
cgutils: Any
try:
    numba = importlib.import_module("numba")
    cgutils = importlib.import_module("numba.core.cgutils")
except ImportError:
    numba = cgutils = None
else:
    ir = cgutils.ir
    VECTOR = ir.VectorType(ir.DoubleType(), WIDTH)
    LONG, SHORT = ir.IntType(64), ir.IntType(32)
    CONTRACT = ("contract",)


def _emit(context: Any, builder: Any, signature: Any, arguments: Any) -> Any:
    """LLVM code of one row: new = bonds @ current - new, and both dot products."""

    def base(kind: Any, value: Any) -> Any:
        return context.make_array(kind)(context, builder, value).data

    def vectors(place: int) -> Any:
        pointer = base(signature.args[place], arguments[place])
        return builder.bitcast(pointer, VECTOR.as_pointer())

    def load(pointer: Any, place: Any) -> Any:
        return builder.load(builder.gep(pointer, [place]), align=8)

    def store(vector: Any, pointer: Any, place: Any) -> None:
        builder.store(vector, builder.gep(pointer, [place]), align=8)

    def number(pointer: Any, place: Any) -> Any:
        found = builder.load(builder.gep(pointer, [place]))
        short = isinstance(found.type, ir.IntType) and found.type.width < 64
        return builder.sext(found, LONG) if short else found

    def everywhere(value: Any) -> Any:
        empty = ir.Constant(VECTOR, ir.Undefined)
        first = builder.insert_element(empty, value, SHORT(0))
        return builder.shuffle_vector(first, empty, ir.VectorType(SHORT, WIDTH)([0] * WIDTH))

    def plus_product(total: Any, left: Any, right: Any) -> Any:
        return builder.fadd(total, builder.fmul(left, right, flags=CONTRACT), flags=CONTRACT)

    new, current, sums = (vectors(place) for place in range(3))
    row = arguments[3]
    kinds = signature.args[4]
    held = [builder.extract_value(arguments[4], place) for place in range(len(kinds))]
    diagonal, *entries = (base(kind, value) for kind, value in zip(kinds, held, strict=True))
    here = load(current, row)
    total = cgutils.alloca_once(builder, VECTOR)
    start = builder.fsub(ir.Constant(VECTOR, [0.0] * WIDTH), load(new, row), flags=CONTRACT)
    builder.store(plus_product(start, everywhere(number(diagonal, row)), here), total)
    for (starts, columns, values), turned in ((entries[:3], False), (entries[3:], True)):
        first, last = number(starts, row), number(starts, builder.add(row, LONG(1)))
        with cgutils.for_range_slice(builder, first, last, LONG(1)) as (place, _):
            there = load(current, number(columns, place))
            there = _times_i(builder, there) if turned else there
            value = everywhere(number(values, place))
            builder.store(plus_product(builder.load(total), value, there), total)
    found = builder.load(total)
    store(found, new, row)
    for place, other in ((LONG(0), here), (LONG(1), found)):
        store(plus_product(load(sums, place), here, other), sums, place)
    return context.get_dummy_value()


def _times_i(builder: Any, vector: Any) -> Any:
    """i (a + ib) = -b + ia, the real parts in the first half of the columns."""
    half = WIDTH // 2
    order = [*range(half, WIDTH), *range(half)]
    swapped = builder.shuffle_vector(vector, vector, ir.VectorType(SHORT, WIDTH)(order))
    return builder.fmul(swapped, ir.Constant(VECTOR, [-1.0] * half + [1.0] * half))


def _advance(typing: Any, new: Any, current: Any, sums: Any, row: Any, bonds: Any) -> Any:
    """Types of `_emit`, for numba."""
    kinds = (new, current, sums, numba.types.intp, bonds)
    return numba.types.void(*kinds), _emit


def _sweep(bonds: Any, even: Any, odd: Any, sums: Any, piece: int) -> None:  # pragma: no cover
    """As many steps as ``sums`` has places, on pieces of ``piece`` rows (see the module)."""
    rows, steps = even.shape[0], sums.shape[0]
    pieces = (rows + piece - 1) // piece
    for front in range(pieces + steps - 1):
        for step in range(steps):
            behind = front - step
            if 0 <= behind < pieces:
                for row in range(behind * piece, min(rows, (behind + 1) * piece)):
                    if step % 2 == 0:
                        advance(even, odd, sums[step], row, bonds)
                    else:
                        advance(odd, even, sums[step], row, bonds)


def _compile() -> Any:
    """`_sweep` compiled, or None where numba is not there or cannot compile it."""
    if numba is None:
        return None
    options = {"nogil": True, "error_model": "numpy"}
    try:
        compiled = numba.njit(cache=True, **options)(_sweep)
    except RuntimeError:  # no folder to keep compiled code in
        compiled = numba.njit(**options)(_sweep)
    starts, none = np.zeros(2, np.int32), np.zeros(0)
    diagonal, columns = np.ones(1), np.zeros(0, np.int32)
    diagonal.setflags(write=False)
    bonds = (diagonal, starts, columns, none, starts, columns, none)
    even, odd, sums = np.zeros((1, WIDTH)), np.ones((1, WIDTH)), np.zeros((1, 2, WIDTH))
    try:
        compiled(bonds, even, odd, sums, 1)
    except (numba.core.errors.NumbaError, NotImplementedError):
        # a processor or release that cannot compile this: the way without numba is as right
        return None
    return compiled if np.all(even == 1) and np.all(sums == 1) else None


advance: Any = None if numba is None else numba.extending.intrinsic(_advance)
sweep = _compile()
