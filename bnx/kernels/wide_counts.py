"""What the scan of very many binary attributes needs to know beforehand: joint counts of a few pairs, and margins."""

import numpy as np

from bnx.kernels.bits import ones
from bnx.kernels.compiling import kernel
from bnx.kernels.contingency import _spread

__all__ = ["EVEN", "UNEQUAL", "VARIES", "common_ones", "kinds_of_margins"]

VARIES, EVEN, UNEQUAL = 1, 2, 4  # of a margin: both levels occur; the parts of X2's variance that do not vanish


@kernel
def common_ones(planes: np.ndarray, words: np.ndarray, left: np.ndarray, right: np.ndarray) -> np.ndarray:
    """Count the records that have both attributes of each pair, by group: int32 (P, G).

    planes (n, words) uint64; words (G + 1,): first word of each group; left, right (P,).
    """
    counts = np.zeros((left.size, words.size - 1), np.int32)
    for p in range(left.size):
        one, other = planes[left[p]], planes[right[p]]
        for g in range(words.size - 1):
            for w in range(words[g], words[g + 1]):
                counts[p, g] += np.int32(ones(one[w] & other[w]))
    return counts


@kernel
def kinds_of_margins(margins: np.ndarray, records: np.ndarray) -> np.ndarray:
    """Say of each class and attribute what decides whether X2 can vary, int8 (C, n): a sum of VARIES, EVEN, UNEQUAL.

    margins (C, n) int64: records that have the attribute; records (C,) int64. The variance of X2 of a class is a sum of
    two products, of EVEN parts (from 4 records) and of UNEQUAL parts (from 3).
    """
    classes, attributes = margins.shape
    kinds = np.zeros((classes, attributes), np.int8)
    totals = np.zeros(2, np.int64)
    for c in range(classes):
        for i in range(attributes):
            totals[0], totals[1] = margins[c, i], records[c] - margins[c, i]
            if totals[0] == 0 or totals[1] == 0:
                continue
            kinds[c, i] = VARIES
            if records[c] < 3:
                continue
            even, uneven = _spread(totals, 2, 2, float(records[c]))
            if even > 0 and records[c] > 3:
                kinds[c, i] += EVEN
            if uneven > 0:
                kinds[c, i] += UNEQUAL
    return kinds
