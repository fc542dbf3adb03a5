"""Counting loops.

Rows come sorted into segments: segment s holds rows ``starts[s]:starts[s + 1]``, all of one block and class. There are
G such groups, and segment s is a part of group s % G.
"""

import numpy as np
from llvmlite import ir
from numba import njit, types
from numba.core.errors import TypingError
from numba.extending import intrinsic

__all__ = ["complete_pairs", "count_cells", "count_pairs", "number_cells", "pack_planes"]

_WORDS = 256  # words of a plane read at a time: the planes of 50 attributes then stay in the second-level cache
_MOST_CELLS = 900  # of a pair counted by bit planes; measured: beyond, single increments win
_ROWS = 2048  # rows whose cell numbers are computed at a time


# Intrinsics take numba's own types, which have no annotations: hence the ignored errors.
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
def pack_planes(codes: np.ndarray, first: int, rows: int, size: int, planes: np.ndarray) -> None:
    """Write one bit per row and level for ``rows`` codes from ``first`` on; the last level has no plane.

    codes (N,); planes (size - 1, words) uint64: the words that the rows fill are written.
    """
    whole = rows // 64
    for word in range(whole):
        for level in range(size - 1):
            planes[level, word] = _equals(codes, first + 64 * word, level)
    if 64 * whole < rows:
        for level in range(size - 1):
            bits = np.uint64(0)
            for k in range(rows - 64 * whole):
                bits |= np.uint64(codes[first + 64 * whole + k] == level) << np.uint64(k)
            planes[level, whole] = bits


@njit(nogil=True, cache=True)
def _tile(planes: np.ndarray, a: int, b: int, words: int, out: np.ndarray) -> None:
    """Count the common ones of planes a..a+3 with b, b+1 over the first words into out (8,)."""
    p0 = planes[a, :words]
    p1 = planes[a + 1, :words]
    p2 = planes[a + 2, :words]
    p3 = planes[a + 3, :words]
    q0 = planes[b, :words]
    q1 = planes[b + 1, :words]
    s0 = s1 = s2 = s3 = t0 = t1 = t2 = t3 = np.uint64(0)
    for w in range(words):
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
    codes: np.ndarray,
    starts: np.ndarray,
    sizes: np.ndarray,
    left: np.ndarray,
    right: np.ndarray,
    offsets: np.ndarray,
    first: int,
    last: int,
    out: np.ndarray,
) -> None:
    """Count pairs of attributes in the groups ``first:last``, but for the last level of either attribute.

    codes (n, N); starts (G + 1,): rows of each group; sizes (n,): levels; left, right (P,): the two attributes;
    out (G, cells) int32, zero on entry: pair p fills ``offsets[p]:`` row-major, left level by right level. Rows are
    packed into bit planes and counted a few thousand at a time, so that the planes stay in the second-level cache.
    """
    used = np.zeros(sizes.size, np.bool_)
    used[left] = True
    used[right] = True
    ends = np.cumsum(np.where(used, sizes - 1, 0))
    planes = np.zeros((ends[-1] + 4, _WORDS), np.uint64)  # tiles may read past the last plane
    tile = np.zeros(8, np.uint64)
    for g in range(first, last):
        for low in range(starts[g], starts[g + 1], 64 * _WORDS):
            rows = min(64 * _WORDS, starts[g + 1] - low)
            for i in range(sizes.size):
                if used[i]:
                    pack_planes(codes[i], low, rows, sizes[i], planes[ends[i] - sizes[i] + 1 :])
            for p in range(left.size):
                i, j = left[p], right[p]
                if (sizes[i] - 1) * (sizes[j] - 1) > _MOST_CELLS:
                    _increment(codes[i], codes[j], low, rows, sizes[j], out[g, offsets[p] :])
                else:
                    _count_tiles(
                        planes,
                        ends[i] - sizes[i] + 1,
                        ends[j] - sizes[j] + 1,
                        sizes[i] - 1,
                        sizes[j],
                        (rows + 63) // 64,
                        tile,
                        out[g, offsets[p] :],
                    )


@njit(nogil=True, cache=True)
def _count_tiles(
    planes: np.ndarray, a0: int, b0: int, rows: int, width: int, words: int, tile: np.ndarray, cells: np.ndarray
) -> None:
    """Add the common ones of planes a0..a0+rows-1 with b0..b0+width-2 to a table ``width`` cells wide."""
    for a in range(0, rows, 4):
        for b in range(0, width - 1, 2):
            _tile(planes, a0 + a, b0 + b, words, tile)
            for v in range(min(2, width - 1 - b)):
                for u in range(min(4, rows - a)):
                    cells[(a + u) * width + b + v] += np.int32(tile[4 * v + u])


@njit(nogil=True, cache=True)
def _increment(left: np.ndarray, right: np.ndarray, low: int, rows: int, width: int, cells: np.ndarray) -> None:
    """Count one by one, which is faster where a table has very many cells."""
    for row in range(low, low + rows):
        cells[np.int64(left[row]) * width + right[row]] += 1


@njit(nogil=True, cache=True)
def complete_pairs(
    margins: np.ndarray,
    margin_starts: np.ndarray,
    sizes: np.ndarray,
    left: np.ndarray,
    right: np.ndarray,
    offsets: np.ndarray,
    first: int,
    last: int,
    out: np.ndarray,
) -> None:
    """Fill in the last level of every attribute from the margins (G, D) int64, for the groups ``first:last``."""
    for g in range(first, last):
        for p in range(left.size):
            i, j = left[p], right[p]
            _fill_last(out[g], offsets[p], sizes[i], sizes[j], margins[g], margin_starts[i], margin_starts[j])


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
    members (m,), sizes (m,): attributes and their levels; starts (S + 1,), S a multiple of G; slots (G,): row of
    ``out`` that segment s adds to is slots[s % G], negative to skip it; out (slots, cells) int32.
    """
    cells = np.empty(_ROWS, np.int32)
    for s in range(starts.size - 1):
        slot = slots[s % slots.size]
        if slot < 0:
            continue
        for low in range(starts[s], starts[s + 1], _ROWS):
            number = min(_ROWS, starts[s + 1] - low)
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
