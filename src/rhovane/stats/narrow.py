# ruff: noqa: ARG001  (numba reads the names; the values arrive as a list)
"""Whole-number arithmetic in 16 and 32 bits for the kernels, 16 rows at a time.

Numba widens every integer operation to 64 bits, which leaves three quarters of a vector register empty, and
counts references for every slice of an array. The operations here stay narrow and take an array with the
row to start at. They are plain LLVM instructions, for any processor.

Rules for callers, who are the kernels of this package: arrays are one-dimensional, contiguous, of int16; they
reach at least 16 rows past the last row named, because rows are read, and where a function says so written,
in whole blocks. Masks are -1 (all bits) or 0. Centred ranks of a window of at most 4096 rows fit 16 bits.
"""

from __future__ import annotations

from collections.abc import Callable
from typing import Any

from llvmlite import ir  # type: ignore[import-untyped]
from numba import types
from numba.core import cgutils
from numba.extending import intrinsic

BLOCK = 16  # rows handled at once
LARGEST_32_BITS = 2**31 - 1

_I16, _I32 = ir.IntType(16), ir.IntType(32)
_ROWS = ir.VectorType(_I16, BLOCK)
_WIDE = ir.VectorType(_I32, BLOCK)
_PAIRS = ir.VectorType(_I32, BLOCK // 2)
_NOTHING = ir.Constant(_ROWS, ir.Undefined)
_COUNTING = ir.Constant(_ROWS, list(range(BLOCK)))


def rows_in_32_bits(window: int) -> int:
    """Return how many rows of products of a window's centred ranks surely add up within 32 bits, in whole blocks."""
    if window * (window * window - 1) // 3 <= LARGEST_32_BITS:
        return -(-max(window, 1) // BLOCK) * BLOCK
    return LARGEST_32_BITS // (window - 1) ** 2 // BLOCK * BLOCK


def _sign(builder: Any, kind: Any, a: Any, b: Any) -> Any:
    above = builder.zext(builder.icmp_signed(">", a, b), kind)
    below = builder.zext(builder.icmp_signed("<", a, b), kind)
    return builder.sub(above, below)


class _Rows:
    """Blocks of rows of one array from a first row on, while code is generated."""

    def __init__(self, target: Any, builder: Any, kind: Any, value: Any, first: Any) -> None:
        self.builder = builder
        self.start = builder.gep(target.make_array(kind)(target, builder, value).data, [first])

    def _at(self, row: Any) -> Any:
        return self.builder.bitcast(self.builder.gep(self.start, [row]), _ROWS.as_pointer())

    def load(self, row: Any) -> Any:
        block = self.builder.load(self._at(row))
        block.align = 2
        return block

    def store(self, row: Any, block: Any) -> None:
        self.builder.store(block, self._at(row)).align = 2

    def value(self, row: Any) -> Any:
        return self.builder.load(self.builder.gep(self.start, [row]))


def _rows(target: Any, builder: Any, signature: Any, arguments: Any, count: int) -> list[_Rows]:
    """Return the first ``count`` (array, first row) arguments."""
    return [
        _Rows(target, builder, signature.args[2 * i], arguments[2 * i], arguments[2 * i + 1])
        for i in range(count)
    ]


def _everywhere(builder: Any, value: Any) -> Any:
    """Return a block with ``value`` in every row."""
    lane = builder.insert_element(_NOTHING, value, ir.Constant(_I32, 0))
    return builder.shuffle_vector(lane, _NOTHING, ir.Constant(_WIDE, [0] * BLOCK))


def _each_block(builder: Any, n_rows: Any, body: Callable[[Any, Any], None]) -> None:
    """Run ``body(row, None)`` for whole blocks, then ``body(row, mask)`` for the rows that are left."""
    size = ir.Constant(n_rows.type, BLOCK)
    blocks = builder.sdiv(n_rows, size)
    with cgutils.for_range(builder, blocks) as loop:
        body(builder.mul(loop.index, size), None)
    done = builder.mul(blocks, size)
    left = builder.sub(n_rows, done)
    with builder.if_then(builder.icmp_signed(">", left, ir.Constant(n_rows.type, 0))):
        within = builder.icmp_signed("<", _COUNTING, _everywhere(builder, builder.trunc(left, _I16)))
        body(done, builder.sext(within, _ROWS))


def _each_touched_block(builder: Any, n_rows: Any, body: Callable[[Any], None]) -> None:
    """Run ``body(row)`` for all blocks that hold any of the rows; the last may reach past them."""
    size = ir.Constant(n_rows.type, BLOCK)
    blocks = builder.sdiv(builder.add(n_rows, ir.Constant(n_rows.type, BLOCK - 1)), size)
    with cgutils.for_range(builder, blocks) as loop:
        body(builder.mul(loop.index, size))


def _add_products(builder: Any, total: Any, a: Any, b: Any) -> None:
    """Add the products of two blocks to a running sum of 8 lanes of 32 bits."""
    product = builder.mul(builder.sext(a, _WIDE), builder.sext(b, _WIDE))
    even, odd = (
        builder.shuffle_vector(product, product, ir.Constant(_PAIRS, list(range(first, BLOCK, 2))))
        for first in (0, 1)
    )
    # Neighbours first: most processors multiply and add pairs in one instruction.
    builder.store(builder.add(builder.load(total), builder.add(even, odd)), total)


def _sum_of_lanes(builder: Any, total: Any, lanes: int) -> Any:
    block = builder.load(total)
    result = builder.extract_element(block, ir.Constant(_I32, 0))
    for lane in range(1, lanes):
        result = builder.add(result, builder.extract_element(block, ir.Constant(_I32, lane)))
    return result


@intrinsic
def shift_signs(
    _context: Any,
    target_rows: Any,
    target_at: Any,
    source: Any,
    source_at: Any,
    ranks: Any,
    ranks_at: Any,
    n_rows: Any,
    plus: Any,
    plus_on: Any,
    minus: Any,
    minus_on: Any,
) -> Any:
    """Set target = source + sign(rank - plus) - sign(rank - minus) in whole blocks over ``n_rows`` rows.

    ``plus_on`` and ``minus_on`` are masks: 0 leaves that sign out. Source and target may be the same rows, or the
    target the earlier of two overlapping ones.
    """
    signature = types.void(
        target_rows,
        types.intp,
        source,
        types.intp,
        ranks,
        types.intp,
        types.intp,
        types.int16,
        types.int16,
        types.int16,
        types.int16,
    )

    def generate(target: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        result, before, values = _rows(target, builder, signature, arguments, 3)
        entering, entering_on, leaving, leaving_on = (_everywhere(builder, value) for value in arguments[7:])

        def body(row: Any) -> None:
            here = values.load(row)
            added = builder.and_(_sign(builder, _ROWS, here, entering), entering_on)
            removed = builder.and_(_sign(builder, _ROWS, here, leaving), leaving_on)
            result.store(row, builder.sub(builder.add(before.load(row), added), removed))

        _each_touched_block(builder, arguments[6], body)
        return target.get_dummy_value()

    return signature, generate


@intrinsic
def set_signs(
    _context: Any,
    result: Any,
    result_at: Any,
    ranks: Any,
    ranks_at: Any,
    values: Any,
    values_at: Any,
    n_rows: Any,
    n_values: Any,
) -> Any:
    """Set result = Σ sign(rank - value) over ``n_values`` values, in whole blocks over ``n_rows`` rows."""
    signature = types.void(result, types.intp, ranks, types.intp, values, types.intp, types.intp, types.intp)

    def generate(target: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        out, rows, others = _rows(target, builder, signature, arguments, 3)
        total = cgutils.alloca_once(builder, _ROWS)

        def body(row: Any) -> None:
            here = rows.load(row)
            builder.store(ir.Constant(_ROWS, None), total)
            with cgutils.for_range(builder, arguments[7]) as loop:
                sign = _sign(builder, _ROWS, here, _everywhere(builder, others.value(loop.index)))
                builder.store(builder.add(builder.load(total), sign), total)
            out.store(row, builder.load(total))

        _each_touched_block(builder, arguments[6], body)
        return target.get_dummy_value()

    return signature, generate


@intrinsic
def sum_signs(
    _context: Any, ranks: Any, ranks_at: Any, seen: Any, seen_at: Any, n_rows: Any, value: Any
) -> Any:
    """Return Σ sign(value - rank) over exactly ``n_rows`` rows where the mask ``seen`` is on, as int16."""
    signature = types.int16(ranks, types.intp, seen, types.intp, types.intp, types.int16)

    def generate(target: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        values, masks = _rows(target, builder, signature, arguments, 2)
        here = _everywhere(builder, arguments[5])
        total = cgutils.alloca_once_value(builder, ir.Constant(_ROWS, None))

        def body(row: Any, within: Any) -> None:
            sign = builder.and_(_sign(builder, _ROWS, here, values.load(row)), masks.load(row))
            if within is not None:
                sign = builder.and_(sign, within)
            builder.store(builder.add(builder.load(total), sign), total)

        _each_block(builder, arguments[4], body)
        return _sum_of_lanes(builder, total, BLOCK)

    return signature, generate


@intrinsic
def product_sums16(
    _context: Any,
    base_x: Any,
    base_x_at: Any,
    lone_x: Any,
    lone_x_at: Any,
    seen_x: Any,
    seen_x_at: Any,
    base_y: Any,
    base_y_at: Any,
    lone_y: Any,
    lone_y_at: Any,
    seen_y: Any,
    seen_y_at: Any,
    n_rows: Any,
) -> Any:
    """Return Σ a·a, Σ b·b, Σ a·b over exactly ``n_rows`` rows seen on both sides, as int32.

    a = base_x - lone_x, b = base_y - lone_y.
    """
    arrays = (base_x, lone_x, seen_x, base_y, lone_y, seen_y)
    placed = [kind for array in arrays for kind in (array, types.intp)]
    signature = types.UniTuple(types.int32, 3)(*placed, types.intp)

    def generate(target: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        x, x_lone, x_seen, y, y_lone, y_seen = _rows(target, builder, signature, arguments, 6)
        sums = [cgutils.alloca_once_value(builder, ir.Constant(_PAIRS, None)) for _ in range(3)]

        def body(row: Any, within: Any) -> None:
            seen = builder.and_(x_seen.load(row), y_seen.load(row))
            if within is not None:
                seen = builder.and_(seen, within)
            a = builder.and_(builder.sub(x.load(row), x_lone.load(row)), seen)
            b = builder.and_(builder.sub(y.load(row), y_lone.load(row)), seen)
            for total, (p, q) in zip(sums, ((a, a), (b, b), (a, b)), strict=True):
                _add_products(builder, total, p, q)

        _each_block(builder, arguments[12], body)
        return target.make_tuple(
            builder, signature.return_type, [_sum_of_lanes(builder, total, BLOCK // 2) for total in sums]
        )

    return signature, generate


@intrinsic
def dot16(_context: Any, a: Any, a_at: Any, b: Any, b_at: Any, n_rows: Any) -> Any:
    """Return Σ a·b over exactly ``n_rows`` rows, as int32."""
    signature = types.int32(a, types.intp, b, types.intp, types.intp)

    def generate(target: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        first, second = _rows(target, builder, signature, arguments, 2)
        total = cgutils.alloca_once_value(builder, ir.Constant(_PAIRS, None))

        def body(row: Any, within: Any) -> None:
            p = first.load(row)
            if within is not None:
                p = builder.and_(p, within)
            _add_products(builder, total, p, second.load(row))

        _each_block(builder, arguments[4], body)
        return _sum_of_lanes(builder, total, BLOCK // 2)

    return signature, generate


@intrinsic
def tau_sums16(
    _context: Any,
    ranks: Any,
    seen: Any,
    x_at: Any,
    y_at: Any,
    n_rows: Any,
    here_x: Any,
    here_y: Any,
) -> Any:
    """Return Σ sign·sign, Σ sign² of x, Σ sign² of y of one pair against exactly ``n_rows`` joint rows, as int16."""
    signature = types.UniTuple(types.int16, 3)(
        ranks, seen, types.intp, types.intp, types.intp, types.int16, types.int16
    )

    def generate(target: Any, builder: Any, signature: Any, arguments: Any) -> Any:
        kinds, at = signature.args, arguments[2:4]
        x, y = (_Rows(target, builder, kinds[0], arguments[0], first) for first in at)
        x_seen, y_seen = (_Rows(target, builder, kinds[1], arguments[1], first) for first in at)
        x_here, y_here = (_everywhere(builder, value) for value in arguments[5:])
        sums = [cgutils.alloca_once_value(builder, ir.Constant(_ROWS, None)) for _ in range(3)]

        def body(row: Any, within: Any) -> None:
            joint = builder.and_(x_seen.load(row), y_seen.load(row))
            if within is not None:
                joint = builder.and_(joint, within)
            sign_x = builder.and_(_sign(builder, _ROWS, x_here, x.load(row)), joint)
            sign_y = builder.and_(_sign(builder, _ROWS, y_here, y.load(row)), joint)
            for total, (p, q) in zip(
                sums, ((sign_x, sign_y), (sign_x, sign_x), (sign_y, sign_y)), strict=True
            ):
                builder.store(builder.add(builder.load(total), builder.mul(p, q)), total)

        _each_block(builder, arguments[4], body)
        return target.make_tuple(
            builder, signature.return_type, [_sum_of_lanes(builder, total, BLOCK) for total in sums]
        )

    return signature, generate
