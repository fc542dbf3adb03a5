"""Joint counts of many levels at once: one bit per row and level, and how many rows two levels share.

Bits lie word by word, ``planes[word, plane]``: bit k of a word is row k of its 64 rows. So one instruction compares a
level with eight others, and counts come out side by side, whatever the number of rows.
"""

from typing import Any

import numpy as np
from llvmlite import ir
from numba import types
from numba.core import cgutils
from numba.core.errors import TypingError
from numba.extending import intrinsic

from bnx.kernels.compiling import kernel, part

__all__ = ["ACROSS", "DOWN", "count_planes", "pack_planes"]

DOWN = 4  # planes of a tile on the left; sides are padded to whole tiles
ACROSS = 8  # planes of a vector on the right
_VECTORS = 4  # vectors of a tile: 4 x 4 sums stay in registers
_WORDS = 256  # words of 64 rows that are packed at a time; measured
_build: Any = cgutils  # it has no annotations


# Intrinsics take numba's own types, which have no annotations: hence the ignored errors.
@intrinsic
def _equals(typing_context, codes, first, level):  # type: ignore[no-untyped-def]
    """Compare 64 codes from ``first`` on with a level at once: bit k tells whether code k equals it."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        row = context.make_array(signature.args[0])(context, builder, arguments[0])
        lanes = ir.VectorType(context.get_data_type(signature.args[0].dtype), 64)
        place = builder.bitcast(builder.gep(row.data, [arguments[1]]), lanes.as_pointer())
        spread = _spread(builder, builder.trunc(arguments[2], lanes.element), 64)
        same = builder.icmp_unsigned("==", builder.load(place, align=1), spread)
        return builder.bitcast(same, ir.IntType(64))

    if codes.layout != "C":
        raise TypingError("the codes of an attribute must lie side by side")
    return types.uint64(codes, types.int64, types.int64), generate


def _spread(builder: Any, value: Any, lanes: int) -> Any:
    """Copy a value into every lane of a vector."""
    vector = ir.VectorType(value.type, lanes)
    alone = builder.insert_element(ir.Constant(vector, ir.Undefined), value, ir.Constant(ir.IntType(32), 0))
    everywhere = ir.Constant(ir.VectorType(ir.IntType(32), lanes), [0] * lanes)
    return builder.shuffle_vector(alone, ir.Constant(vector, ir.Undefined), everywhere)


def _tile_of(vectors: int) -> Any:
    """Make the counting of DOWN planes with ``vectors`` * ACROSS others, all sums in registers."""
    lanes = ir.VectorType(ir.IntType(64), ACROSS)
    cells = ir.VectorType(ir.IntType(32), ACROSS)

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        planes, width, a, b, words, out, place, stride = arguments
        bits = context.make_array(signature.args[0])(context, builder, planes).data
        into = context.make_array(signature.args[5])(context, builder, out).data
        ones = _build.get_or_insert_function(builder.module, ir.FunctionType(lanes, [lanes]), "llvm.ctpop.v8i64")

        def vector(pointer: Any, at: Any, number: int, kind: Any) -> Any:
            place = builder.gep(pointer, [builder.add(at, ir.Constant(at.type, number * ACROSS))])
            return builder.bitcast(place, kind.as_pointer())

        sums = [[_build.alloca_once(builder, lanes) for _ in range(vectors)] for _ in range(DOWN)]
        for place_of_sum in (one for row in sums for one in row):
            builder.store(ir.Constant(lanes, [0] * ACROSS), place_of_sum)
        with _build.for_range(builder, words) as loop:
            base = builder.mul(loop.index, width)
            right = [builder.load(vector(bits, builder.add(base, b), v, lanes), align=8) for v in range(vectors)]
            left = builder.gep(bits, [builder.add(base, a)])
            for u in range(DOWN):
                word = builder.load(builder.gep(left, [ir.Constant(ir.IntType(64), u)]))
                spread = _spread(builder, word, ACROSS)
                for v in range(vectors):
                    common = builder.call(ones, [builder.and_(spread, right[v])])
                    builder.store(builder.add(builder.load(sums[u][v]), common), sums[u][v])
        for u in range(DOWN):
            for v in range(vectors):
                cell = vector(into, builder.add(place, builder.mul(stride, ir.Constant(stride.type, u))), v, cells)
                total = builder.add(builder.load(cell, align=4), builder.trunc(builder.load(sums[u][v]), cells))
                builder.store(total, cell, align=4)
        return context.get_dummy_value()

    @intrinsic
    def tile(typing_context, planes, width, a, b, words, out, place, stride):  # type: ignore[no-untyped-def]
        """Count the common ones of planes a.. and b.. over ``words`` words; add them to ``out[place]`` and on."""
        whole = types.int64
        return types.void(planes, whole, whole, whole, whole, out, whole, whole), generate

    return tile


_one, _two, _three, _four = (_tile_of(vectors) for vectors in range(1, _VECTORS + 1))


@kernel
def pack_planes(codes: np.ndarray, first: int, rows: int, size: int, planes: np.ndarray) -> None:
    """Write one bit per row and level for ``rows`` codes from ``first`` on; the last level has no plane.

    codes (N,) unsigned; planes (words, at least size - 1) uint64: the words that the rows fill are written.
    """
    whole = rows // 64
    for word in range(whole):
        for level in range(size - 1):
            planes[word, level] = _equals(codes, first + 64 * word, level)
    if 64 * whole < rows:
        tail = np.full(64, size - 1, codes.dtype)
        for k in range(rows - 64 * whole):
            tail[k] = codes[first + 64 * whole + k]
        for level in range(size - 1):
            planes[whole, level] = _equals(tail, 0, level)


@kernel
def count_planes(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    members: np.ndarray,
    sizes: np.ndarray,
    columns: np.ndarray,
    width: int,
    right: int,
    needed: np.ndarray,
    lows: np.ndarray,
    highs: np.ndarray,
    out: np.ndarray,
) -> None:
    """Count how many rows the levels on the left share with those on the right, but for every last level.

    Args:
        codes: unsigned integers (n, N).
        recode: of the same kind (n, R): what each stored code stands for.
        plain: bool (n,): attributes whose codes stand for themselves.
        members: attributes to pack, (m,).
        sizes: their levels, (m,).
        columns: the first plane of each, (m,); the left side starts at plane 0.
        width: planes in all.
        right: the first plane of the right side.
        needed: bool (DOWN planes each on the left, ACROSS planes each on the right): what is counted.
        lows: first row of each run of rows, (r,).
        highs: one past its last row, (r,).
        out: int32 (left planes * right planes,), row by row, added to.
    """
    planes = np.zeros((_WORDS, width), np.uint64)
    seen = np.empty(64 * _WORDS, codes.dtype)
    filled = int(np.int64(0))
    for run in range(lows.size):
        low = lows[run]
        while low < highs[run]:
            rows = min(64 * (_WORDS - filled), highs[run] - low)
            for m in range(members.size):
                i = members[m]
                own = planes[filled:, columns[m] :]
                if plain[i]:
                    pack_planes(codes[i], low, rows, sizes[m], own)
                else:
                    for k in range(rows):
                        seen[k] = recode[i, codes[i, low + k]]
                    pack_planes(seen, int(np.int64(0)), rows, sizes[m], own)
            low += rows
            filled += (rows + 63) // 64
            if filled == _WORDS:
                _multiply(planes.reshape(-1), filled, width, right, needed, out)
                filled = int(np.int64(0))
    if filled:
        _multiply(planes.reshape(-1), filled, width, right, needed, out)


@part
def _multiply(planes: np.ndarray, words: int, width: int, right: int, needed: np.ndarray, out: np.ndarray) -> None:
    """Add the common ones of the first words of all planes that are needed."""
    stride = needed.shape[1] * ACROSS
    for start in range(0, needed.shape[1], _VECTORS):
        end = min(start + _VECTORS, needed.shape[1])
        for block in range(needed.shape[0]):
            first, last = end, start
            for v in range(start, end):
                if needed[block, v]:
                    first = min(first, v)
                    last = v + 1
            a, b = DOWN * block, right + ACROSS * first
            place = a * stride + ACROSS * first
            if last - first == 4:
                _four(planes, width, a, b, words, out, place, stride)
            elif last - first == 3:
                _three(planes, width, a, b, words, out, place, stride)
            elif last - first == 2:
                _two(planes, width, a, b, words, out, place, stride)
            elif last - first == 1:
                _one(planes, width, a, b, words, out, place, stride)
