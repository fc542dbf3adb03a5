"""Counting loops.

Rows come sorted into segments: segment s holds rows ``starts[s]:starts[s + 1]``, all of one block and class. There are
G such groups, and segment s is a part of group s % G.
"""

import numpy as np

from bnx.kernels.compiling import kernel

__all__ = ["count_cells", "count_joint", "number_cells"]

_ROWS = 2048  # rows whose cell numbers are computed at a time


@kernel
def count_joint(
    codes: np.ndarray,
    recode: np.ndarray,
    plain: np.ndarray,
    i: int,
    j: int,
    width: int,
    lows: np.ndarray,
    highs: np.ndarray,
    out: np.ndarray,
) -> None:
    """Count two attributes row by row, which is faster than bit planes where a table has very many cells.

    codes (n, N); recode (n, R): what each stored code stands for, read where not ``plain`` (n,) bool; the rows
    ``lows[r]:highs[r]`` of every run; out (cells,) int32, added to, row-major and ``width`` cells wide.
    """
    first, second = recode[i], recode[j]
    for run in range(lows.size):
        if plain[i] and plain[j]:
            for row in range(lows[run], highs[run]):
                out[np.int64(codes[i, row]) * width + codes[j, row]] += 1
        else:
            for row in range(lows[run], highs[run]):
                a = codes[i, row] if plain[i] else first[codes[i, row]]
                b = codes[j, row] if plain[j] else second[codes[j, row]]
                out[np.int64(a) * width + b] += 1


@kernel
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


@kernel
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
    for k in range(number):
        mine[k] = 0
    for m in range(members.size):
        i, size = members[m], np.int32(sizes[m])
        row = codes[i, low : low + number]
        if plain:
            for k in range(mine.size):
                mine[k] = mine[k] * size + np.int32(row[k])
        else:
            for k in range(mine.size):
                mine[k] = mine[k] * size + recode[i, row[k]]
