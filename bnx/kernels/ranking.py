"""Rows in the order of a score: sorting, and the sums that areas and calibration bins need, in one pass."""

import numpy as np
from numba import njit

__all__ = ["rank_sums", "sort_whole"]

_BITS = 11  # of a number are sorted by at a time
_PASSES = 6  # enough for 64 bits


@njit(nogil=True, cache=True)
def sort_whole(numbers: np.ndarray) -> np.ndarray:
    """Sort whole numbers (N,) int64, none negative: by 11 bits at a time from the lowest up. The input is overwritten.

    Source: Knuth 1998, section 5.2.5 (radix sorting; from memory).
    """
    counts = np.zeros((_PASSES, 1 << _BITS), np.int64)
    mask = (1 << _BITS) - 1
    for number in numbers:
        for k in range(_PASSES):
            counts[k, (number >> (k * _BITS)) & mask] += 1
    here, there = numbers, np.empty_like(numbers)
    for k in range(_PASSES):
        if counts[k, (numbers[0] >> (k * _BITS)) & mask] == numbers.size:
            continue
        at = 0
        for digit in range(mask + 1):
            held = counts[k, digit]
            counts[k, digit] = at
            at += held
        for number in here:
            digit = (number >> (k * _BITS)) & mask
            there[counts[k, digit]] = number
            counts[k, digit] += 1
        here, there = there, here
    return here


@njit(nogil=True, cache=True)
def rank_sums(packed: np.ndarray, scores: np.ndarray, score_sums: np.ndarray, hit_sums: np.ndarray) -> int:
    """Go through rows in ascending order of a score, rows of equal score as one group.

    packed (N,): twice the bit pattern of the score, plus 1 for a hit; scores (N,): the scores; score_sums, hit_sums
    (bins,): added to in the bin, of as many of equal count, that holds a group's middle row.

    Returns:
        The number of (hit, miss) pairs in which the hit scores higher, twice, and of those with equal scores, once.
    """
    rows, bins = packed.size, score_sums.size
    start, below, area = 0, 0, 0
    while start < rows:
        end, hits = start, 0
        while end < rows and packed[end] >> 1 == packed[start] >> 1:
            hits += packed[end] & 1
            end += 1
        misses = end - start - hits
        place = (start + end) * bins // (2 * rows)
        score_sums[place] += scores[start] * (end - start)
        hit_sums[place] += hits
        area += hits * (2 * below + misses)
        below += misses
        start = end
    return area
