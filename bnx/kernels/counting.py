"""Counting loops.

Rows come sorted into groups (one per block of rows and class): group g holds rows ``starts[g]:starts[g + 1]``.
"""

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.core.errors import TypingError
from numba.extending import intrinsic

__all__ = ["count_cells", "count_pairs", "number_cells", "pack_planes"]

_WORDS = 256  # words of a plane read at a time: the planes of 50 attributes then stay in the second-level cache
_ROWS = 2048  # rows whose cell numbers are computed at a time


@intrinsic
def _ones(typing_context, word):  # type: ignore[no-untyped-def]
    """Count the one bits of a word with the machine's own instruction."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        return builder.ctpop(arguments[0])

    return types.uint64(types.uint64), generate


@intrinsic
def _equals(typing_context, codes, first, level):  # type: ignore[no-untyped-def]
    """Compare 64 codes from ``first`` on with a level at once: bit k tells whether code k equals it."""

    def generate(context, builder, signature, arguments):  # type: ignore[no-untyped-def]
        row = context.make_array(signature.args[0])(context, builder, arguments[0])
        lanes = ir.VectorType(context.get_data_type(signature.args[0].dtype), 64)
        place = builder.bitcast(builder.gep(row.data, [arguments[1]]), lanes.as_pointer())
        wanted = builder.trunc(arguments[2], lanes.element)
        alone = builder.insert_element(ir.Constant(lanes, ir.Undefined), wanted, ir.Constant(ir.IntType(32), 0))
        everywhere = ir.Constant(ir.VectorType(ir.IntType(32), 64), [0] * 64)
        spread = builder.shuffle_vector(alone, ir.Constant(lanes, ir.Undefined), everywhere)
        same = builder.icmp_unsigned("==", builder.load(place, align=1), spread)
        return builder.bitcast(same, ir.IntType(64))

    if codes.layout != "C":
        raise TypingError("the codes of an attribute must lie side by side")
    return types.uint64(codes, types.int64, types.int64), generate


@njit(nogil=True, cache=True)
def pack_planes(
    codes: np.ndarray,
    starts: np.ndarray,
    word_starts: np.ndarray,
    sizes: np.ndarray,
    plane_starts: np.ndarray,
    first: int,
    last: int,
    planes: np.ndarray,
) -> None:
    """Write one bit per row and level for attributes ``first:last``; the last level of each has no plane.

    codes (n, N); starts, word_starts (G + 1,): rows and words of each group; plane_starts (n + 1,);
    planes (planes, words) uint64, every word of those attributes is written. The last level's counts follow from the
    margins by subtraction.
    """
    for i in range(first, last):
        row = codes[i]
        for g in range(starts.size - 1):
            whole = starts[g] + (starts[g + 1] - starts[g]) // 64 * 64
            word = word_starts[g]
            for low in range(starts[g], whole, 64):
                for level in range(sizes[i] - 1):
                    planes[plane_starts[i] + level, word] = _equals(row, low, level)
                word += 1
            if whole < starts[g + 1]:
                for level in range(sizes[i] - 1):
                    bits = np.uint64(0)
                    for k in range(starts[g + 1] - whole):
                        bits |= np.uint64(row[whole + k] == level) << np.uint64(k)
                    planes[plane_starts[i] + level, word] = bits


@njit(nogil=True, cache=True)
def _tile(planes: np.ndarray, a: int, b: int, low: int, high: int, out: np.ndarray) -> None:
    """Count the common ones of planes a..a+3 with b, b+1 over words low:high into out (8,)."""
    p0 = planes[a, low:high]
    p1 = planes[a + 1, low:high]
    p2 = planes[a + 2, low:high]
    p3 = planes[a + 3, low:high]
    q0 = planes[b, low:high]
    q1 = planes[b + 1, low:high]
    s0 = s1 = s2 = s3 = t0 = t1 = t2 = t3 = np.uint64(0)
    for w in range(high - low):
        x = q0[w]
        y = q1[w]
        s0 += _ones(p0[w] & x)
        s1 += _ones(p1[w] & x)
        s2 += _ones(p2[w] & x)
        s3 += _ones(p3[w] & x)
        t0 += _ones(p0[w] & y)
        t1 += _ones(p1[w] & y)
        t2 += _ones(p2[w] & y)
        t3 += _ones(p3[w] & y)
    out[0], out[1], out[2], out[3] = s0, s1, s2, s3
    out[4], out[5], out[6], out[7] = t0, t1, t2, t3


@njit(nogil=True, cache=True)
def count_pairs(
    planes: np.ndarray,
    word_starts: np.ndarray,
    sizes: np.ndarray,
    plane_starts: np.ndarray,
    margins: np.ndarray,
    margin_starts: np.ndarray,
    left: np.ndarray,
    right: np.ndarray,
    offsets: np.ndarray,
    first: int,
    last: int,
    out: np.ndarray,
) -> None:
    """Count pairs ``first:last`` of attributes in every group.

    planes must end with 4 spare planes (tiles may read past the last). margins (G, D) int64; left, right (P,): the two
    attributes; out (G, cells) int32, zero on entry: pair p fills ``offsets[p]:`` row-major, left level by right level.
    """
    tile = np.zeros(8, np.uint64)
    for g in range(word_starts.size - 1):
        for low in range(word_starts[g], word_starts[g + 1], _WORDS):
            high = min(low + _WORDS, word_starts[g + 1])
            for p in range(first, last):
                i, j = left[p], right[p]
                rows, columns = sizes[i] - 1, sizes[j] - 1
                for a in range(0, rows, 4):
                    for b in range(0, columns, 2):
                        _tile(planes, plane_starts[i] + a, plane_starts[j] + b, low, high, tile)
                        for v in range(min(2, columns - b)):
                            for u in range(min(4, rows - a)):
                                out[g, offsets[p] + (a + u) * sizes[j] + b + v] += np.int32(tile[4 * v + u])
        for p in range(first, last):
            _fill_last(
                out[g],
                offsets[p],
                sizes[left[p]],
                sizes[right[p]],
                margins[g],
                margin_starts[left[p]],
                margin_starts[right[p]],
            )


@njit(nogil=True, cache=True)
def _fill_last(
    cells: np.ndarray, offset: int, rows: int, columns: int, margins: np.ndarray, row_start: int, column_start: int
) -> None:
    """Complete a pair's last column and last row from the margins."""
    for a in range(rows - 1):
        seen = 0
        for b in range(columns - 1):
            seen += cells[offset + a * columns + b]
        cells[offset + a * columns + columns - 1] = margins[row_start + a] - seen
    for b in range(columns):
        seen = 0
        for a in range(rows - 1):
            seen += cells[offset + a * columns + b]
        cells[offset + (rows - 1) * columns + b] = margins[column_start + b] - seen


@njit(nogil=True, cache=True)
def count_cells(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: bool,
    members: np.ndarray,
    sizes: np.ndarray,
    starts: np.ndarray,
    slots: np.ndarray,
    out: np.ndarray,
) -> None:
    """Count the joint levels of a few attributes, the last member fastest, in the groups that have a slot.

    codes (n, N); recode (n, R) int32: the code that each stored code stands for, read unless ``plain``;
    members (m,), sizes (m,): attributes and their levels; starts (G + 1,); slots (G,): row of ``out`` that group g adds
    to, negative to skip it; out (slots, cells) int32.
    """
    cells = np.empty(_ROWS, np.int32)
    for g in range(slots.size):
        slot = slots[g]
        if slot < 0:
            continue
        for low in range(starts[g], starts[g + 1], _ROWS):
            number = min(_ROWS, starts[g + 1] - low)
            number_cells(codes, recode, plain, members, sizes, low, number, cells)
            for k in range(number):
                out[slot, cells[k]] += 1


@njit(nogil=True, cache=True)
def number_cells(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: bool,
    members: np.ndarray,
    sizes: np.ndarray,
    low: int,
    number: int,
    cells: np.ndarray,
) -> None:
    """Number the joint level of each of ``number`` rows from ``low`` on, mixed radix, the last member fastest.

    cells int32: a table of more cells than that would not fit anywhere.
    """
    mine = cells[:number]
    mine[:] = 0
    for m in range(members.size):
        i, size = members[m], np.int32(sizes[m])
        row = codes[i, low : low + number]
        if plain:
            for k in range(mine.size):
                mine[k] = mine[k] * size + np.int32(row[k])
        else:
            for k in range(mine.size):
                mine[k] = mine[k] * size + recode[i, row[k]]
