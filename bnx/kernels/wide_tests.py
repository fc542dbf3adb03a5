"""Tables of all pairs of a few attributes with all after them, and the least p that each could have."""

import math

import numpy as np

from bnx.kernels.bits import ones
from bnx.kernels.compiling import kernel, part

__all__ = ["class_tables", "least_of_tables"]

_TILE = 64  # attributes whose planes stay in the cache


@kernel
def class_tables(
    planes: np.ndarray,
    words: np.ndarray,
    margins: np.ndarray,
    records: np.ndarray,
    start: int,
    stop: int,
    out: np.ndarray,
) -> None:
    """Write the 2 x 2 tables by class of the pairs (i, j), start <= i < stop, i < j < n, in this order.

    planes (n, words) uint64; words (G + 1,): first word of each group, group = block x C + class; margins (C, n),
    records (C,) int64: of the second level, and of all; out (C, P, 4) int32.
    """
    attributes, classes = planes.shape[0], records.size
    firsts = np.zeros(stop - start, np.int64)
    for i in range(start + 1, stop):
        firsts[i - start] = firsts[i - start - 1] + attributes - i
    for low in range(start + 1, attributes, _TILE):
        for i in range(start, stop):
            for j in range(max(low, i + 1), min(low + _TILE, attributes)):
                place = firsts[i - start] + j - i - 1
                for c in range(classes):
                    both = 0
                    for g in range(c, words.size - 1, classes):
                        one, other = planes[i, words[g] : words[g + 1]], planes[j, words[g] : words[g + 1]]
                        for w in range(one.size):
                            both += np.int64(ones(one[w] & other[w]))
                    cells = out[c, place]
                    cells[0] = records[c] - margins[c, i] - margins[c, j] + both
                    cells[1] = margins[c, j] - both
                    cells[2] = margins[c, i] - both
                    cells[3] = both


@kernel
def least_of_tables(tables: np.ndarray, chosen: np.ndarray) -> np.ndarray:
    """Compute `attainable.least_p` of the chosen 2 x 2 tables (S, P, 4) int32, with logarithms looked up: (k,)."""
    most = 0
    for s in range(tables.shape[0]):
        if tables.shape[1]:
            most = max(most, tables[s, 0, 0] + tables[s, 0, 1] + tables[s, 0, 2] + tables[s, 0, 3])
    logs = np.empty(most + 1)
    for k in range(most + 1):
        logs[k] = math.lgamma(k + 1.0)
    result = np.empty(chosen.size)
    for k in range(chosen.size):
        logarithm = 0.0
        for s in range(tables.shape[0]):
            cells = tables[s, chosen[k]]
            down, across = np.int64(cells[0]) + cells[1], np.int64(cells[0]) + cells[2]
            total = down + cells[2] + cells[3]
            down, across = max(down, total - down), max(across, total - across)
            filled = min(_fullest(down, across, total, logs), _fullest(across, down, total, logs))
            rows, columns = logs[down] + logs[total - down], logs[across] + logs[total - across]
            logarithm += rows + columns - logs[total] - filled
        result[k] = min(1.0, math.exp(logarithm))
    return result


@part
def _fullest(line: int, cap: int, total: int, logs: np.ndarray) -> float:
    """Sum ln(n!) over two lines that fill two caps, the larger first; line, cap: the larger ones."""
    result = 0.0
    for filled in (line, total - line):
        result += logs[min(cap, filled)]
        if filled > cap:
            result += logs[min(total - cap, filled - cap)]
    return result
